"""Which alternatives: axes of dotted keys, one at a time or all combinations."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from ladderfit import schema
from ladderfit.choices import Choices
from ladderfit.errors import InputError, Problem
from ladderfit.ladder_file import as_written

LARGEST_GRID = 100_000  # combinations


@dataclass(frozen=True)
class Alternative:
    """One way to choose otherwise.

    Attributes
    ----------
    changes : mapping of str to value
        By dotted key of the ladder file; empty for the baseline.
    """

    changes: Mapping[str, Any]

    @property
    def key(self) -> str:
        """A name for good: the changes as a ladder file writes them."""
        return "; ".join(f"{key} = {as_written(value)}" for key, value in self.changes.items())

    @property
    def axes(self) -> tuple[str, ...]:
        """The dotted keys that change."""
        return tuple(self.changes)

    def without(self, axis: str) -> Alternative:
        """The same with one axis as in the baseline."""
        return Alternative({key: value for key, value in self.changes.items() if key != axis})


def alternatives_of(
    choices: Choices, axes: Mapping[str, Sequence[Any]] | None = None, *, grid: bool = False
) -> list[Alternative]:
    """The alternatives to a baseline, which is not among them.

    Values that equal the baseline's, and repeated ones, are left out.

    Parameters
    ----------
    choices : Choices
        The baseline.
    axes : mapping of str to sequence, optional
        Values to try by dotted key; by default the ``[alternatives]`` of the choices.
    grid : bool
        All combinations of all axes, the baseline's value counting as one of each;
        otherwise one change at a time.

    Raises
    ------
    InputError
        If there is nothing to try, a key is unknown, values are no list, or the
        grid is too large.
    """
    given = choices.alternatives if axes is None else axes
    bare = choices.change({"alternatives": None}) if choices.alternatives else choices
    if not given:
        raise InputError(_nothing("no axis", "[alternatives]"))
    faults = [_no_list(key, values) for key, values in given.items() if not _is_list(values)]
    if faults:
        raise InputError(faults)
    if grid:
        _refuse_too_large(given)
    tried = {key: _new_values(bare, key, values) for key, values in given.items()}
    tried = {key: values for key, values in tried.items() if values}
    if not tried:
        raise InputError(_nothing("values that all equal the baseline's", "[alternatives]"))
    return list(_combinations(tried) if grid else _one_by_one(tried))


def _one_by_one(tried: Mapping[str, Sequence[Any]]) -> Iterator[Alternative]:
    for key, values in tried.items():
        for value in values:
            yield Alternative({key: value})


def _combinations(tried: Mapping[str, Sequence[Any]]) -> Iterator[Alternative]:
    levels = [[{}, *({key: value} for value in values)] for key, values in tried.items()]
    for combination in itertools.product(*levels):
        changes = {key: value for level in combination for key, value in level.items()}
        if changes:
            yield Alternative(changes)


def _refuse_too_large(given: Mapping[str, Sequence[Any]]) -> None:
    size = math.prod(1 + len(values) for values in given.values())
    if size > LARGEST_GRID:
        raise InputError(
            Problem(
                found=f"a grid of {size:,} combinations",
                expected=f"at most {LARGEST_GRID:,}",
                remedy="take out axes or values, or change one at a time",
                key="alternatives",
            )
        )


def _new_values(choices: Choices, key: str, values: Sequence[Any]) -> list[Any]:
    """Values that differ from the baseline's and from one another."""
    kept: dict[str, Any] = {}
    for value in values:
        try:
            same = choices.change({key: value}) == choices
        except InputError:  # it becomes a row that says so
            same = False
        if not same:
            kept.setdefault(as_written(schema.written(value)), schema.written(value))
    return list(kept.values())


def _is_list(values: Any) -> bool:
    return isinstance(values, Sequence) and not isinstance(values, str) and len(values) > 0


def _no_list(key: str, values: Any) -> Problem:
    place = schema.join("alternatives", key)
    return Problem(repr(values), "a list of values to try", "write [value, ...]", key=place)


def _nothing(found: str, expected: str) -> Problem:
    return Problem(
        found=found,
        expected=f"dotted keys with lists of values in {expected}",
        remedy='write "relation.metallicity" = ["none"], say',
        key="alternatives",
    )
