"""Residuals of a rung's objects against any column of their table; no widgets."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ladderfit.checks.residuals import (
    Residuals,
    cepheid_residuals,
    flow_residuals,
    parallax_residuals,
    peak_residuals,
    velocity_residuals,
)
from ladderfit.ladder import Ladder
from ladderfit.result import Result
from ladderfit.samples import FloatArray, IntArray

SECTION_OF = {
    "anchors": "anchors.parallaxes",
    "cepheids": "cepheids",
    "supernovae": "supernovae",
    "expansion": "expansion",
}


@dataclass(frozen=True, eq=False)
class ColumnResiduals:
    """Residuals with the column's cells.

    Attributes
    ----------
    section : str
        Of the ladder file.
    column, unit : str
        The column's name and its unit as the table states it ("" where it does not).
    x : array, shape (n,)
        The cells; objects whose cell is missing are left out.
    residuals : Residuals
        Of the same n objects.
    data_unit : str
        Unit of the residuals.
    """

    section: str
    column: str
    unit: str
    x: FloatArray
    residuals: Residuals
    data_unit: str


def numeric_columns(ladder: Ladder, rung: str) -> list[str]:
    """Columns of a rung's table that hold numbers, in the table's order."""
    table = ladder.table(SECTION_OF[rung])
    if table is None:
        return []
    return [
        name
        for name, column in table.columns.items()
        if np.ndim(column.values) == 1 and np.asarray(column.values).dtype.kind in "fiu"
    ]


def against_column(result: Result, rung: str, column: str) -> ColumnResiduals | None:
    """A rung's residuals against a column; None where there are none."""
    section = SECTION_OF[rung]
    found, rows, unit = _residuals(result, section)
    table = result.ladder.table(section)
    if found is None or rows is None or table is None or column not in table.columns:
        return None
    known = table.columns[column]
    cells = np.asarray(known.values, dtype=float)[rows - 1]
    good = np.isfinite(cells) & ~np.asarray(known.missing, bool)[rows - 1]
    kept = Residuals(
        found.name[good], found.x[good], found.data[good], found.model[good], found.sd[good]
    )
    stated = "" if known.unit is None else str(known.unit)
    return ColumnResiduals(section, column, stated, cells[good], kept, unit)


def _residuals(result: Result, section: str) -> tuple[Residuals | None, IntArray | None, str]:
    ladder = result.ladder
    if section == "cepheids" and ladder.cepheids is not None:
        return cepheid_residuals(result), ladder.cepheids.row, "mag"
    if section == "anchors.parallaxes" and ladder.parallax_stars is not None:
        return parallax_residuals(result), ladder.parallax_stars.row, "mas"
    if section == "supernovae" and ladder.peaks is not None:
        return peak_residuals(result), ladder.peaks.row, "mag"
    if section == "expansion" and ladder.velocities is not None:
        return velocity_residuals(result), ladder.velocities.row, "km/s"
    if section == "expansion" and ladder.flow is not None:
        return flow_residuals(result), ladder.flow.row, "mag"
    return None, None, ""
