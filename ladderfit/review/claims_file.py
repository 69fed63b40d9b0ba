"""Reading a claims file; every claim keeps the digits it was printed with."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, replace
from decimal import Decimal
from pathlib import Path
from typing import Any

from ladderfit import schema
from ladderfit.errors import InputError, Problem, raise_if
from ladderfit.files import need_file
from ladderfit.review.claims import Claim, ClaimedMagnitude, Claims, Method
from ladderfit.schema import choice

_LARGEST_FILE = 10_000_000  # bytes
_SHARED = ("paper", "note", "magnitude", "method")  # may stand once for all claims


class _Written(float):
    """A number that remembers how it was written."""

    text: str

    def __new__(cls, text: str) -> _Written:
        number = super().__new__(cls, text)
        number.text = text
        return number


@dataclass(frozen=True)
class _Head:
    """What stands before the claims."""

    title: str = choice("a title", default="")
    paper: str = choice("the paper", default="")
    note: str = choice("how the values are known", default="")
    system: str | None = choice("the photometric system of the table", default=None)
    magnitude: ClaimedMagnitude = choice("the magnitude", default_factory=ClaimedMagnitude)
    method: Method = choice("what the paper says of its method", default_factory=Method)


def read_claims(path: str | Path) -> Claims:
    """Read a claims file.

    Raises
    ------
    InputError
        If the file is missing or no TOML, or a key or value does not fit; one
        problem each, under its key, the claims counted from 1.
    """
    path = Path(path)
    text = _text_of(path)
    try:
        mapping = tomllib.loads(text, parse_float=_Written)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        found = f"a syntax error: {error}"
        raise InputError(Problem(found, "TOML", "correct that line", file=str(path))) from None
    try:
        return claims_from(mapping)
    except InputError as error:
        raise InputError(replace(p, file=str(path)) for p in error.problems) from None


def _text_of(path: Path) -> str:
    def problem(found: str, remedy: str) -> InputError:
        return InputError(Problem(found, "a claims file", remedy, file=str(path)))

    need_file(path, "a claims file")
    if path.stat().st_size > _LARGEST_FILE:
        raise problem(f"{path.stat().st_size:,} bytes", "name the claims file, not a table")
    try:
        return path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError:
        raise problem("bytes that are not UTF-8 text", "save the file as UTF-8") from None
    except OSError as error:
        raise problem(str(error.strerror or error), "make the file readable") from None


def claims_from(mapping: Mapping[str, Any]) -> Claims:
    """Check a nested mapping as read from a claims file, and freeze it.

    What stands before the claims under ``paper``, ``note``, ``[magnitude]`` and
    ``[method]`` holds for every claim that does not say otherwise, key by key.

    Raises
    ------
    InputError
        One problem per key that does not fit.
    """
    raise_if(list(schema.undecided(mapping)))
    problems: list[Problem] = []
    plain = dict(mapping)
    listed = plain.pop("claim", [])
    head = schema.read(_Head, plain, problems)
    if not isinstance(listed, list | tuple) or not listed:
        found = "nothing" if listed in ([], ()) else "no list"
        problems.append(
            Problem(
                found, "one [[claim]] or more", "add [[claim]] with quantity and value", key="claim"
            )
        )
        listed = []
    found_claims = [
        _claim(plain, raw, number, problems) for number, raw in enumerate(listed, start=1)
    ]
    raise_if(problems)
    if head is None:  # not reached: a missing head comes with problems
        raise AssertionError
    return Claims(head.title, tuple(c for c in found_claims if c is not None), head.system)


def _claim(head: Mapping[str, Any], raw: Any, number: int, problems: list[Problem]) -> Claim | None:
    key = f"claim[{number}]"
    if not isinstance(raw, Mapping):
        problems.append(Problem(repr(raw), "a table of keys", "write [[claim]]", key=key))
        return None
    own = dict(raw)
    for shared in _SHARED:
        given = head.get(shared)
        if isinstance(given, Mapping) and isinstance(own.get(shared, {}), Mapping):
            inherited = _inherited(shared, given, own.get(shared, {}))
            own[shared] = {**inherited, **own.get(shared, {})}
        elif given is not None and not isinstance(given, Mapping):
            own.setdefault(shared, given)
    digits = {"decimals": raw.get("value"), "error_decimals": raw.get("error")}
    for place, value in digits.items():
        if place not in own and _decimals(value) is not None:
            own[place] = _decimals(value)
    mine: list[Problem] = []
    claim = schema.read(Claim, own, mine, key)
    problems.extend(mine)
    return claim


def _inherited(shared: str, given: Mapping[str, Any], own: Mapping[str, Any]) -> dict[str, Any]:
    """The shared keys, without the band or index that a claim replaces by the other."""
    replaced = (
        {"band", "wesenheit"} if shared == "magnitude" and {*own} & {"band", "wesenheit"} else set()
    )
    return {key: value for key, value in given.items() if key not in replaced}


def _decimals(value: Any) -> int | None:
    """Digits behind the point of a number as it was written."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    if isinstance(value, _Written):
        text = value.text
    else:
        text = repr(int(value) if isinstance(value, int) else float(value))
    exponent = Decimal(text.replace("_", "")).as_tuple().exponent
    return -exponent if isinstance(exponent, int) else None
