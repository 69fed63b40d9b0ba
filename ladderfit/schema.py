"""Nested mappings in, frozen dataclasses out, and back; every key has a dotted name.

The kinds understood are str, bool, int, float, `Prior`, string literals,
tuples, string-keyed mappings, dataclasses and unions of these.  A value that
does not fit becomes a `Problem` under its dotted key; nothing is guessed.
"""

from __future__ import annotations

import dataclasses
import functools
import math
import types
from collections.abc import Iterator, Mapping
from typing import Any, Literal, TypeVar, Union, get_args, get_origin, get_type_hints

import numpy as np

from ladderfit.errors import Problem, nearest
from ladderfit.priors import EXPECTED, Prior, read_prior

T = TypeVar("T")

UNDECIDED = "undecided:"  # a value that starts so was left open by a draft

_WORDS: dict[Any, str] = {
    str: "text in quotes",
    bool: "true or false",
    int: "a whole number",
    float: "a finite number",
    Prior: EXPECTED,
}


def choice(words: str, *, remedy: str = "", **default: Any) -> Any:
    """Declare a field: what it is, in words, for messages; `default=` or `default_factory=`."""
    return dataclasses.field(metadata={"words": words, "remedy": remedy}, **default)


def key_of(field: dataclasses.Field[Any]) -> str:
    """The key of a field in the file; a trailing underscore only avoids a Python keyword."""
    return field.name.rstrip("_")


def join(prefix: str, key: str) -> str:
    """A dotted key; a part that holds a dot, a quote or nothing is quoted, inner quotes doubled."""
    quoted = "." in key or not key or '"' in key
    part = '"' + key.replace('"', '""') + '"' if quoted else key
    return f"{prefix}.{part}" if prefix else part


def split(dotted: str) -> list[str]:
    """The parts of a dotted key; the inverse of `join`."""
    parts, part, quoted, previous = [], "", False, ""
    for character in dotted:
        if character == '"':
            part += '"' if previous == '"' and not quoted else ""
            quoted = not quoted
        elif character == "." and not quoted:
            parts.append(part)
            part = ""
        else:
            part += character
        previous = character
    return [*parts, part]


def read(kind: type[T], value: Any, problems: list[Problem], key: str = "") -> T | None:
    """Convert `value` to `kind`, adding to `problems` what does not fit.

    Returns
    -------
    The converted value, or None where a problem was added.
    """
    result: T | None = _read(kind, value, problems, key, "", "")
    return result


def written(value: Any) -> Any:
    """The inverse of `read`: plain dicts, lists and scalars; None is left out."""
    if isinstance(value, np.generic | np.ndarray):
        return value.tolist()
    if isinstance(value, Prior):
        return value.written()
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        pairs = ((key_of(f), getattr(value, f.name)) for f in dataclasses.fields(value))
        return {key: written(item) for key, item in pairs if item is not None}
    if isinstance(value, Mapping):
        return {key: written(item) for key, item in value.items()}
    if isinstance(value, tuple | list):
        return [written(item) for item in value]
    return value


def flat(mapping: Mapping[str, Any], prefix: str = "") -> dict[str, Any]:
    """Dotted keys of all leaves; a prior counts as a leaf."""
    leaves: dict[str, Any] = {}
    for key, value in mapping.items():
        dotted = join(prefix, key)
        if isinstance(value, Mapping) and value and prefix != "priors":
            leaves |= flat(value, dotted)
        else:
            leaves[dotted] = value
    return leaves


def undecided(value: Any, key: str = "") -> Iterator[Problem]:
    """Values of a nested mapping that a draft left open, one problem each."""
    if isinstance(value, str) and value.startswith(UNDECIDED):
        yield Problem(
            found=f'"{value}"',
            expected="a decision",
            remedy="write what is meant in place of the whole text",
            key=key or None,
        )
    elif isinstance(value, Mapping):
        for name, inner in value.items():
            yield from undecided(inner, join(key, str(name)))
    elif isinstance(value, list | tuple):
        for inner in value:
            yield from undecided(inner, key)


def with_value(mapping: Mapping[str, Any], dotted: str, value: Any) -> dict[str, Any]:
    """A copy of a nested mapping with one dotted key set (None removes it)."""
    first, *rest = split(dotted)
    copy = dict(mapping)
    if rest:
        inner = copy.get(first)
        rest_key = ""
        for part in rest:
            rest_key = join(rest_key, part)
        copy[first] = with_value(inner if isinstance(inner, Mapping) else {}, rest_key, value)
    elif value is None:
        copy.pop(first, None)
    else:
        copy[first] = value
    return copy


def _problem(key: str, value: Any, expected: str, remedy: str) -> Problem:
    shown = repr(value)
    if len(shown) > 80:
        shown = shown[:77] + "..."
    return Problem(
        found=shown, expected=expected, remedy=remedy or "correct the value", key=key or None
    )


def _read(kind: Any, value: Any, problems: list[Problem], key: str, words: str, remedy: str) -> Any:
    origin = get_origin(kind)
    if origin in (Union, types.UnionType):
        return _read_union(get_args(kind), value, problems, key, words, remedy)
    if dataclasses.is_dataclass(kind) and isinstance(kind, type):
        if isinstance(value, kind):
            return value
        return _read_section(kind, value, problems, key, words, remedy)
    if kind is Prior:
        try:
            return read_prior(value)
        except ValueError as error:
            problems.append(
                Problem(str(error), EXPECTED, remedy or "correct the prior", key=key or None)
            )
            return None
    if origin is tuple:
        return _read_tuple(get_args(kind), value, problems, key, words, remedy)
    if origin is not None and isinstance(origin, type) and issubclass(origin, Mapping):
        return _read_mapping(get_args(kind)[1], value, problems, key, words, remedy)
    if origin is Literal:
        if value in get_args(kind) and isinstance(value, str):
            return value
        options = ", ".join(repr(option) for option in get_args(kind))
        hint = nearest(value, get_args(kind)) if isinstance(value, str) else remedy
        problems.append(_problem(key, value, f"one of {options}", hint))
        return None
    return _read_scalar(kind, value, problems, key, words, remedy)


def _read_scalar(
    kind: Any, value: Any, problems: list[Problem], key: str, words: str, remedy: str
) -> Any:
    if kind is float and isinstance(value, int | float) and not isinstance(value, bool):
        if math.isfinite(value):
            return float(value)
    elif kind is int and isinstance(value, int) and not isinstance(value, bool):
        return value
    elif kind in (str, bool) and isinstance(value, kind):
        return value
    expected = _WORDS[kind] + (f" ({words})" if words else "")
    problems.append(_problem(key, value, expected, remedy))
    return None


def _read_tuple(
    kinds: tuple[Any, ...], value: Any, problems: list[Problem], key: str, words: str, remedy: str
) -> Any:
    open_ended = len(kinds) == 2 and kinds[1] is Ellipsis
    if not isinstance(value, list | tuple) or (not open_ended and len(value) != len(kinds)):
        expected = "a list" if open_ended else f"a list of {len(kinds)}"
        problems.append(_problem(key, value, f"{expected}: {words or 'values'}", remedy))
        return None
    each = [kinds[0]] * len(value) if open_ended else kinds
    before = len(problems)
    items = tuple(
        v if k is float and _infinite(v) else _read(k, v, problems, key, words, remedy)
        for k, v in zip(each, value, strict=True)
    )
    return items if len(problems) == before else None


def _infinite(value: Any) -> bool:
    """Whether a value is an infinite number: fine as a bound, nowhere else."""
    return isinstance(value, float) and math.isinf(value)


def _read_mapping(
    kind: Any, value: Any, problems: list[Problem], key: str, words: str, remedy: str
) -> Any:
    if not isinstance(value, Mapping) or not all(isinstance(name, str) for name in value):
        problems.append(_problem(key, value, f"a table: {words or 'names and values'}", remedy))
        return None
    before = len(problems)
    items = {
        name: _read(kind, item, problems, join(key, name), words, remedy)
        for name, item in value.items()
    }
    return items if len(problems) == before else None


def _read_union(
    kinds: tuple[Any, ...], value: Any, problems: list[Problem], key: str, words: str, remedy: str
) -> Any:
    if value is None and type(None) in kinds:
        return None
    attempts: list[list[Problem]] = []
    for kind in kinds:
        if kind is type(None):
            continue
        found: list[Problem] = []
        result = _read(kind, value, found, key, words, remedy)
        if not found:
            return result
        if dataclasses.is_dataclass(kind) and isinstance(value, Mapping):
            problems.extend(found)
            return None
        attempts.append(found)
    if len(attempts) == 1:
        problems.extend(attempts[0])
    else:
        expected = " or ".join(found[0].expected for found in attempts)
        problems.append(_problem(key, value, expected, remedy or attempts[0][0].remedy))
    return None


@functools.cache
def _hints(kind: type) -> dict[str, Any]:
    return get_type_hints(kind)


def _read_section(
    kind: Any, value: Any, problems: list[Problem], key: str, words: str, remedy: str
) -> Any:
    if not isinstance(value, Mapping):
        problems.append(_problem(key, value, f"a table: {words or 'its keys'}", remedy))
        return None
    before = len(problems)
    hints = _hints(kind)
    fields = {key_of(field): field for field in dataclasses.fields(kind)}
    for name in value:
        if name not in fields:
            problems.append(
                Problem(
                    found="an unknown key",
                    expected="one of " + ", ".join(fields),
                    remedy=nearest(str(name), fields),
                    key=join(key, str(name)),
                )
            )
    arguments: dict[str, Any] = {}
    for name, field in fields.items():
        note = field.metadata
        if name in value:
            arguments[field.name] = _read(
                hints[field.name],
                value[name],
                problems,
                join(key, name),
                note.get("words", ""),
                note.get("remedy", ""),
            )
        elif field.default is dataclasses.MISSING and field.default_factory is dataclasses.MISSING:
            problems.append(
                Problem(
                    found="nothing",
                    expected=note.get("words", "a value"),
                    remedy=note.get("remedy", "") or "add the key",
                    key=join(key, name),
                )
            )
    if len(problems) > before:
        return None
    section = kind(**arguments)
    check = getattr(section, "check", None)
    if check is not None:
        for fault in check():
            inner = f"{key}.{fault.key}" if fault.key and key else (fault.key or key or None)
            problems.append(dataclasses.replace(fault, key=inner))
    return section if len(problems) == before else None
