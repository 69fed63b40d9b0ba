"""Every choice of a calibration, with its key, its meaning, and whether it is the default."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from ladderfit import schema
from ladderfit.choices import Choices
from ladderfit.ladder_file import as_written
from ladderfit.priors import Prior

_ELSEWHERE = ("priors", "alternatives")  # told in tables of their own


@dataclass(frozen=True)
class Entry:
    """One choice.

    Attributes
    ----------
    section : str
        First part of the key; empty for keys without one.
    key : str
        Dotted key of the ladder file.
    value : str
        As the ladder file writes it; ``(absent)`` where there is none.
    words : str
        What the key means.
    default : bool
        Whether the value is that of a file that leaves the key out.
    """

    section: str
    key: str
    value: str
    words: str
    default: bool


def entries(choices: Choices) -> list[Entry]:
    """Every choice in the order of the ladder file, defaults included; priors are left out."""
    found: list[Entry] = []
    for field in dataclasses.fields(choices):
        if field.name not in _ELSEWHERE:
            found += _field(choices, field, "", _default(field))
    return found


def _default(field: dataclasses.Field[Any]) -> Any:
    """What a field is when left out; MISSING where it cannot be."""
    if field.default is not dataclasses.MISSING:
        return field.default
    if field.default_factory is not dataclasses.MISSING:
        return field.default_factory()
    return dataclasses.MISSING


def _field(owner: Any, field: dataclasses.Field[Any], prefix: str, default: Any) -> Iterator[Entry]:
    key = schema.join(prefix, schema.key_of(field))
    yield from _value(getattr(owner, field.name), key, field.metadata.get("words", ""), default)


def _value(value: Any, key: str, words: str, default: Any) -> Iterator[Entry]:
    if dataclasses.is_dataclass(value) and not isinstance(value, Prior | type):
        same = type(value) is type(default)
        for field in dataclasses.fields(value):
            other = getattr(default, field.name) if same else _default(field)
            yield from _field(value, field, key, other)
    elif isinstance(value, Mapping) and value and _holds_sections(value):
        for name, inner in value.items():
            yield from _value(inner, schema.join(key, name), words, dataclasses.MISSING)
    else:
        section = schema.split(key)[0] if "." in key else ""
        shown = _shown(value)
        yield Entry(section, key, shown, words, default=_same(value, default))


def _holds_sections(value: Mapping[str, Any]) -> bool:
    return all(dataclasses.is_dataclass(inner) for inner in value.values())


def _same(value: Any, default: Any) -> bool:
    return default is not dataclasses.MISSING and type(value) is type(default) and value == default


def _shown(value: Any) -> str:
    if isinstance(value, Mapping | tuple | list) and not value:
        return "none"
    return as_written(schema.written(value))
