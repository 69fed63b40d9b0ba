"""Tables of systematics and of the error budget, from a folder of alternatives."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
from astropy.table import Table

from ladderfit.errors import InputError, Problem
from ladderfit.names import PARAMETERS, base_name, parameter
from ladderfit.report.cells import (
    Cell,
    PaperTable,
    Symbol,
    Words,
    number_column,
    text_column,
)
from ladderfit.rounding import to_place

SHARE = "_share"
_PRINTED = ("slope", "zero_point", "metallicity", "peak_magnitude", "hubble_constant")


def alternative_tables(folder: str | Path) -> list[PaperTable]:
    """The systematics and the error budget in a folder written by ``ladderfit alternatives``.

    Raises
    ------
    InputError
        If the folder has no systematics, or a table cannot be read.
    """
    folder = Path(folder)
    found = [systematics_table(_read(folder / "systematics.ecsv"))]
    if (folder / "budget.ecsv").is_file():
        found.append(budget_table(_read(folder / "budget.ecsv")))
    return found


def _read(path: Path) -> Table:
    try:
        return Table.read(path, format="ascii.ecsv")
    except (OSError, ValueError) as error:
        words = "no such file" if not path.is_file() else f"a table that cannot be read ({error})"
        raise InputError(
            Problem(
                found=words[:200],
                expected="a table written by ladderfit alternatives",
                remedy="name the folder of finished alternatives",
                file=str(path),
            )
        ) from None


def _numbers(table: Table, name: str) -> list[float]:
    return [float(v) for v in np.ma.filled(np.ma.asarray(table[name], dtype=float), math.nan)]


def systematics_table(table: Table) -> PaperTable:
    """How far each axis of alternatives moves each parameter.

    Parameters
    ----------
    table : Table
        Columns axis, parameter, fits, largest, largest_in_errors, of, spread, unit.
    """
    names = [str(name) for name in table["parameter"]]
    axes, fits = [str(axis) for axis in table["axis"]], _numbers(table, "fits")
    largest, errors = _numbers(table, "largest"), _numbers(table, "largest_in_errors")
    spread = _numbers(table, "spread")
    value = [str(value) for value in table["of"]]
    rows: list[tuple[Cell, ...]] = []
    last = ""
    for place, name in enumerate(names):
        if base_name(name) not in _PRINTED:
            continue
        digits = -_digits(name)
        again = axes[place] == last
        last = axes[place]
        rows.append(
            (
                Words("" if again else axes[place]),
                _symbol(name),
                _shown(largest[place], digits),
                _shown(errors[place], -1),
                Words(value[place].removeprefix(f"{axes[place]} = ")),
                _shown(spread[place], digits),
            )
        )
    return PaperTable(
        name="systematics",
        title="How far other choices move the parameters",
        columns=(
            text_column("axis", axes),
            text_column("parameter", names),
            number_column("fits", fits),
            number_column("largest", largest, words="shift of largest size, with its sign"),
            number_column("largest_in_errors", errors, words="in errors of the baseline"),
            text_column("of", value, "the value that makes it"),
            number_column("spread", spread, words="standard deviation over the values"),
            text_column("unit", [_unit(name) for name in names]),
        ),
        head=("Choice", "", "Largest shift", "In errors", "By the value", "Spread"),
        rows=tuple(rows),
        notes=(
            "Shifts are from the baseline; the data are mostly the same, so that they are "
            "systematic, not random. Units are those of the parameters.",
        ),
    )


def budget_table(table: Table) -> PaperTable:
    """What each source contributes to the error of each number; squares add up.

    Parameters
    ----------
    table : Table
        Column source; for each number NAME its error and NAME_share of the variance.
    """
    names = [n.removesuffix(SHARE) for n in table.colnames if n.endswith(SHARE)]
    sources = [str(source) for source in table["source"]]
    columns = [text_column("source", sources)]
    cells: list[list[Cell]] = [[Words(source)] for source in sources]
    head: list[Cell] = ["Source"]
    for name in names:
        error, share = _numbers(table, name), _numbers(table, f"{name}{SHARE}")
        columns.append(number_column(name, error, words=f"error contributed [{_unit(name)}]"))
        columns.append(number_column(f"{name}{SHARE}", share, words="of the variance"))
        head += [_symbol(name), "per cent"]
        for row, value, part in zip(cells, error, share, strict=True):
            row += [_shown(value, -_digits(name)), _shown(100.0 * part, 0)]
    return PaperTable(
        name="error_budget",
        title="What contributes to the errors",
        columns=tuple(columns),
        head=tuple(head),
        rows=tuple(tuple(row) for row in cells),
        notes=(
            "Errors in the unit of each number; their squares add up, and the shares are of the "
            "variance.",
        ),
    )


def _symbol(name: str) -> Cell:
    return Symbol(name) if base_name(name) in PARAMETERS else name


def _unit(name: str) -> str:
    return parameter(name).unit if base_name(name) in PARAMETERS else ""


def _digits(name: str) -> int:
    return parameter(name).digits if base_name(name) in PARAMETERS else 3


def _shown(value: float, place: int) -> str:
    return to_place(value, place) if math.isfinite(value) else ""
