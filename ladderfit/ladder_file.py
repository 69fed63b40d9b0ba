"""The ladder file: read with tomllib, written with tomlkit so that comments live."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import tomlkit
from tomlkit.items import Array, InlineTable, Item, Table

from ladderfit import schema
from ladderfit.choices import Choices
from ladderfit.errors import InputError, LadderfitError, Problem
from ladderfit.files import need_file, write_text_atomically
from ladderfit.priors import Prior

_LARGEST_FILE = 10_000_000  # bytes; a ladder file is a page of text
_HEADERS = (
    ("cepheids",),
    ("cepheids", "magnitude"),
    ("relation",),
    ("peak_relation",),
    ("anchors",),
    ("anchors", "geometric"),
    ("anchors", "geometric", "*"),
    ("anchors", "parallaxes"),
    ("anchors", "parallaxes", "magnitude"),
    ("hosts",),
    ("supernovae",),
    ("expansion",),
    ("priors",),
    ("sampling",),
    ("alternatives",),
)


def read_choices(path: str | Path) -> Choices:
    """Read a ladder file, without its tables.

    Raises
    ------
    InputError
        If the file is missing or no TOML, or a key or value does not fit.
    """
    path = Path(path)
    mapping = _parsed(_text_of(path), path)
    try:
        return Choices.from_mapping(mapping)
    except InputError as error:
        raise InputError(replace(p, file=str(path)) for p in error.problems) from None


def _text_of(path: Path) -> str:
    def problem(found: str, remedy: str) -> InputError:
        return InputError(Problem(found, "a ladder file", remedy, file=str(path)))

    need_file(path, "a ladder file")
    if path.stat().st_size > _LARGEST_FILE:
        raise problem(f"{path.stat().st_size:,} bytes", "name the ladder file, not a table")
    try:
        return path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError:
        raise problem("bytes that are not UTF-8 text", "save the file as UTF-8") from None
    except OSError as error:
        raise problem(str(error.strerror or error), "make the file readable") from None


def _parsed(text: str, path: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        raise InputError(
            Problem(
                found=f"a syntax error: {error}",
                expected="TOML",
                remedy="correct that line",
                file=str(path),
            )
        ) from None


def write_choices(choices: Choices, path: str | Path) -> None:
    """Write a ladder file; in an existing one only changed keys change, and comments live.

    The text is read back and compared before it replaces the old file.

    Raises
    ------
    InputError
        If a file is there that is not a ladder file; it is not touched.
    LadderfitError
        If the text does not read back as the same choices; nothing is written.
    OSError
        If the file cannot be written.
    """
    path = Path(path)
    if path.exists():
        before = read_choices(path)
        document = tomlkit.parse(_text_of(path))
        _update(document, before.to_mapping(), choices.to_mapping(), ())
        text = tomlkit.dumps(document)
    else:
        text = tomlkit.dumps(_laid_out(choices.to_mapping(), ()))
    try:
        same = Choices.from_mapping(tomllib.loads(text)) == choices
    except (tomllib.TOMLDecodeError, InputError):
        same = False
    if not same:
        raise LadderfitError(
            f"{path}: the choices do not read back as written; the file is left as it was; "
            "write them to a new file"
        )
    write_text_atomically(path, text)


def as_written(value: Any) -> str:
    """A value the way the ladder file writes it, with short numbers; None is ``(absent)``."""
    if value is None:
        return "(absent)"
    if isinstance(value, Prior):
        return as_written(value.written())
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int | float):
        return f"{value:.15g}"
    if isinstance(value, list | tuple):
        return f"[{', '.join(as_written(item) for item in value)}]"
    if isinstance(value, Mapping):
        pairs = (f"{schema.join('', key)} = {as_written(item)}" for key, item in value.items())
        return "{" + ", ".join(pairs) + "}"
    return f'"{value}"'


def _is_header(place: tuple[str, ...]) -> bool:
    return any(
        len(place) == len(header)
        and all(want in ("*", part) for want, part in zip(header, place, strict=True))
        for header in _HEADERS
    )


def _laid_out(mapping: Mapping[str, Any], place: tuple[str, ...]) -> Any:
    """A new document or table: plain keys first, then the tables below it."""
    bare = bool(place) and all(isinstance(value, Mapping) for value in mapping.values())
    bare = bare and all(_is_header((*place, key)) for key in mapping)
    table: Any = tomlkit.table(is_super_table=bare) if place else tomlkit.document()
    below = {key for key, value in mapping.items() if isinstance(value, Mapping)}
    below = {key for key in below if _is_header((*place, key))}
    for key, value in mapping.items():
        if key not in below:
            table.add(key, _item(value))
    for key in mapping:
        if key in below:
            table.add(key, _laid_out(mapping[key], (*place, key)))
    return table


def _item(value: Any) -> Item:
    """A value: mappings inline, lists of mappings one to a line."""
    if isinstance(value, Mapping):
        inline = tomlkit.inline_table()
        for key, inner in value.items():
            inline.append(key, _item(inner))
        return inline
    if isinstance(value, list):
        array = tomlkit.array()
        for inner in value:
            array.append(_item(inner))
        array.multiline(bool(value) and isinstance(value[0], Mapping))
        return array
    plain: Item = tomlkit.item(value)
    return plain


def _update(
    container: Any, before: Mapping[str, Any], after: Mapping[str, Any], place: tuple[str, ...]
) -> None:
    """Bring a parsed document from `before` to `after`, touching only keys that differ."""
    for key in before:
        if key not in after and key in container:
            del container[key]
    for key, value in after.items():
        old = before.get(key)
        if old == value and type(old) is type(value):
            continue
        here = (*place, key)
        nested = isinstance(old, Mapping) and isinstance(value, Mapping) and place != ("priors",)
        if nested and isinstance(container.get(key), Mapping):
            _update(container[key], old or {}, value, here)
        elif nested or (isinstance(value, Mapping) and _is_header(here)):
            changed = (
                {k: v for k, v in value.items() if (old or {}).get(k) != v} if nested else value
            )
            _put(container, key, _laid_out(changed, here) if _is_header(here) else _item(value))
        elif isinstance(value, list) and isinstance(container.get(key), Array):
            _update_array(container, key, value)
        else:
            _put(container, key, _item(value))


def _put(container: Any, key: str, item: Item) -> None:
    """Set a key; a table that becomes a plain value, or the other way, moves to its place."""
    old = container.get(key)
    if isinstance(old, Table) or isinstance(item, Table):
        if old is not None:
            del container[key]
        if isinstance(container, InlineTable):
            item = _item(item.unwrap())
        container.append(key, item)
    else:
        container[key] = item


def _update_array(container: Any, key: str, value: list[Any]) -> None:
    """Keep the entries that stay, with their comments; replace the list where that cannot be."""
    array = container[key]
    for number, entry in reversed(list(enumerate(array.unwrap()))):
        if entry not in value:
            del array[number]
    stays = array.unwrap()
    if stays == value[: len(stays)] and stays:
        for entry in value[len(stays) :]:
            array.append(_item(entry))
    if array.unwrap() != value:
        container[key] = _item(value)
