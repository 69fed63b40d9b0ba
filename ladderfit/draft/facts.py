"""What each column of a table holds, before anything is made of it."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

import astropy.units as u
import numpy as np

from ladderfit.inputs.kinds import Kind, conversion
from ladderfit.inputs.tables import DataTable
from ladderfit.samples import FloatArray, IntArray

_NUMBER = Kind("a number", "")
_MOST_TEXT = 0.05  # share of cells that are no numbers, up to which a column still holds numbers
_UNIT = r"(mas|uas|days?|d|mpc|kpc|km_?s|mag|dex|deg|hours?)"
_ERROR = r"(e|err|error|sig|sigma|unc|uncertainty|std|sd|rms)"


@dataclass(frozen=True, eq=False)
class Facts:
    """One column.

    Attributes
    ----------
    name : str
        As the table has it.
    place : int
        Its place in the table, from 0.
    unit : Unit or None
    numbers : array or None
        Its finite numbers; None for text.
    labels : tuple of str
        Its distinct cells as text, by first appearance.
    counts : array of int
        How often each label occurs.
    stem : str
        The name in small letters and figures only, without the unit and the sign of
        an error.
    error : bool
        Whether the name says that it holds errors.
    """

    name: str
    place: int
    unit: Any
    numbers: FloatArray | None
    labels: tuple[str, ...]
    counts: IntArray
    stem: str
    error: bool

    @property
    def filled(self) -> int:
        """Number of cells that are not missing."""
        return int(self.counts.sum())

    @property
    def unique(self) -> bool:
        """Whether no cell occurs twice."""
        return bool(np.all(self.counts == 1))

    def within(self, low: float, high: float, numbers: FloatArray | None = None) -> bool:
        """Whether nearly all numbers (19 of 20) lie between two bounds."""
        found = self.numbers if numbers is None else numbers
        if found is None or not len(found):
            return False
        return bool(np.mean((found >= low) & (found <= high)) >= 0.95)

    def in_unit_of(self, kind: Kind) -> FloatArray | None:
        """The numbers in the unit of a kind; None for text and other kinds of unit."""
        factors = conversion(self.unit, kind)
        if self.numbers is None or factors is None:
            return None
        return np.asarray(self.numbers * factors[0] + factors[1])


def facts_of(table: DataTable) -> list[Facts]:
    """Look at every column that has one value in each cell and any at all."""
    found = []
    for place, (name, column) in enumerate(table.columns.items()):
        if np.ndim(column.values) != 1 or _is_position(name, column.unit):
            continue
        texts = table.texts(name)
        codes = texts.codes[~texts.missing]
        if not len(codes):
            continue
        counts = np.bincount(codes, minlength=len(texts.labels))
        stem, error = stem_of(name)
        found.append(
            Facts(
                name=name,
                place=place,
                unit=column.unit,
                numbers=_numbers(table, name),
                labels=tuple(str(label) for label in texts.labels[counts > 0]),
                counts=counts[counts > 0],
                stem=stem,
                error=error,
            )
        )
    return found


def _is_position(name: str, unit: Any) -> bool:
    """Whether a column holds a place in the sky, of which a ladder makes no use."""
    if unit is not None and unit.is_equivalent(u.deg) and not unit.is_equivalent(u.dex):
        return float(unit.to(u.deg)) > 0.01
    return re.fullmatch(r"(ra|dec?|glon|glat)_?(j?2000|deg|icrs)?", name.lower()) is not None


def _numbers(table: DataTable, name: str) -> FloatArray | None:
    if np.asarray(table.columns[name].values).dtype.kind == "b":
        return None
    numbers = table.numbers(name, _NUMBER)
    finite = numbers.values[np.isfinite(numbers.values)]
    if not len(finite) or len(numbers.faulty) > _MOST_TEXT * (len(finite) + len(numbers.faulty)):
        return None
    return np.asarray(finite)


def stem_of(name: str) -> tuple[str, bool]:
    """A column's name without unit and sign of an error, and whether there was such a sign.

    ``e_Vmag``, ``errV``, ``V_err`` and ``sigma(V)`` are errors with the stem of ``V``
    and ``Vmag``.
    """
    plain = re.sub(r"[^0-9A-Za-z]+", "_", name).strip("_")
    bare = plain
    for pattern in (
        rf"(?i)^{_ERROR}_",
        rf"(?i)_{_ERROR}$",
        r"^(e|err|error|Err|Error|sig|sigma|Sigma|unc)(?=[A-Z0-9])",
        r"(?i)(?<=[a-z0-9])(err|error|sigma|unc)$",
    ):
        bare = re.sub(pattern, "", bare, count=1)
        if bare != plain:
            break
    lowered = bare.lower()
    shorter = re.sub(rf"_{_UNIT}$", "", lowered)
    stem = re.sub(r"[^0-9a-z]", "", shorter)
    return stem, bare != plain or re.fullmatch(_ERROR, plain.lower()) is not None
