"""Two pins, runs or posteriors beside one another, as HTML; no widgets."""

from __future__ import annotations

import html
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from ladderfit.choices import Choices
from ladderfit.ladder_file import as_written
from ladderfit.names import base_name, group_of, parameter
from ladderfit.rounding import rounded
from ladderfit.workbench.pins import Numbers, fit_difference
from ladderfit.workbench.tables import table
from ladderfit.workbench.why import signed

_LONGEST = 70  # letters of a value


@dataclass(frozen=True)
class Side:
    """One of two that are compared.

    Attributes
    ----------
    words : str
        What to call it.
    choices : Choices or None
    numbers : mapping of str to (mean, sd)
    """

    words: str
    choices: Choices | None
    numbers: Numbers


def compared(one: Side, other: Side) -> str:
    """Choices that differ, then numbers with their change in errors of the second."""
    return f"{_choices(one, other)}{_numbers(one, other)}"


def _choices(one: Side, other: Side) -> str:
    if one.choices is None or other.choices is None:
        return ""
    differing = fit_difference(one.choices, other.choices)
    if not differing:
        return "<h4>No choice differs</h4>"
    rows = [(key, *_values(theirs, ours)) for key, (theirs, ours) in differing.items()]
    count = "One choice differs" if len(rows) == 1 else f"{len(rows)} choices differ"
    return f"<h4>{count}</h4>" + table(("key", other.words, one.words), rows)


def _values(theirs: Any, ours: Any) -> tuple[str, str]:
    """Both values; of lists of entries only those that the other lacks."""
    if isinstance(theirs, list) and isinstance(ours, list) and _entries(theirs, ours):
        kept = [item for item in ours if item in theirs]
        left = [_cut([item for item in items if item not in kept]) for items in (theirs, ours)]
        also = f" and {len(kept)} in common" if kept else ""
        return left[0] + also, left[1] + also
    return _cut(theirs), _cut(ours)


def _entries(*lists: list[Any]) -> bool:
    return any(isinstance(item, Mapping) for items in lists for item in items)


def _cut(value: Any) -> str:
    text = as_written(value)
    return text if len(text) <= _LONGEST else f"{text[: _LONGEST - 1]}…"


def _numbers(one: Side, other: Side) -> str:
    rows = []
    for name, (mean, sd) in one.numbers.items():
        if name not in other.numbers:
            continue
        before, error = other.numbers[name]
        change = (mean - before) / error if error > 0.0 else None
        rows.append((name, before, error, mean, sd, change))
    if not rows:
        return ""
    rows.sort(key=lambda row: (base_name(row[0]) == "modulus", -abs(row[5] or 0.0)))
    body = [
        (_words(name), "" if d is None else signed(d), _pair(before, error), _pair(mean, sd))
        for name, before, error, mean, sd, d in rows
    ]
    head = ("parameter", "change", other.words, one.words)
    words = f"Numbers, those that moved most first; change in errors of {other.words}"
    return f"<h4>{html.escape(words)}</h4>" + table(head, body)


def _words(name: str) -> str:
    group, known = group_of(name), parameter(name)
    words = known.words if group is None else f"{known.words}, {group}"
    return f"{words} [{known.unit}]" if known.unit else words


def _pair(mean: float, sd: float) -> str:
    return str(rounded(mean, sd)) if sd > 0.0 else f"{mean:.6g} (fixed)"


def bar(share: float, words: str) -> str:
    """A bar of progress with its words."""
    escaped = html.escape(words)
    return (
        f'<div class="lf-progress" role="progressbar" aria-valuemin="0" aria-valuemax="100" '
        f'aria-valuenow="{100.0 * share:.0f}" aria-label="{escaped}">'
        f'<span style="width:{100.0 * share:.1f}%"></span></div>'
    )
