"""A comparison of results in words, and as tables in a folder."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np

from ladderfit.comparison.resampling import SAMPLES
from ladderfit.comparison.results import ResultComparison, headline_shifts
from ladderfit.ladder_file import as_written
from ladderfit.names import base_name, parameter
from ladderfit.report.cells import (
    Cell,
    PaperTable,
    Symbol,
    Words,
    number_column,
    quoted,
    text_column,
)
from ladderfit.report.files import write_tables
from ladderfit.rounding import last_place, rounded, to_place
from ladderfit.wording import aligned, printable


def comparison_text(found: ResultComparison) -> str:
    """What differs between results and what moved, for a terminal."""
    sections = [
        ("Results", _results(found)),
        ("Data shared", _shared(found)),
        ("Choices that differ", _choices(found)),
        ("Parameters", aligned(_parameter_rows(found))),
        ("How the errors of the shifts were found", [method(found), *found.notes]),
    ]
    for place in range(1, len(found.labels)):
        heading = f"Shift from {found.labels[0]} to {found.labels[place]}"
        sections.append((printable(heading), aligned(_shift_rows(found, place))))
    return "\n\n".join(
        "\n".join([heading, *(f"  {line}" for line in lines)])
        for heading, lines in sections
        if lines
    )


def _results(found: ResultComparison) -> list[str]:
    return aligned(
        (printable(label), printable(result.choices.title), f"{result.size:,} draws")
        for label, result in zip(found.labels, found.results, strict=True)
    )


def _shared(found: ResultComparison) -> list[str]:
    rows = [
        (SAMPLES[kind], f"{common:,} in all of them", " / ".join(f"{n:,}" for n in counts))
        for kind, (counts, common) in found.shared.items()
    ]
    return aligned(rows)


def _choices(found: ResultComparison) -> list[str]:
    rows = [
        (printable(key), *(printable(as_written(value)) for value in values))
        for key, values in found.differences.items()
    ]
    if not rows:
        return ["none"]
    return aligned([("key", *(printable(label) for label in found.labels)), *rows])


def _parameter_rows(found: ResultComparison) -> list[tuple[str, ...]]:
    rows = [("", *(printable(label) for label in found.labels), "")]
    for name in found.parameters:
        if base_name(name) != "modulus":
            rows.append((printable(name), *_values(found, name), parameter(name).unit))
    return rows


def _values(found: ResultComparison, name: str) -> list[str]:
    cells = []
    for result in found.results:
        known = name in result.draws
        ess = result.diagnostics.ess.get(name)
        cells.append(str(quoted(result.draws[name], ess)) if known else "")
    return cells


def method(found: ResultComparison) -> str:
    """How the errors of the shifts came about, in a sentence or two."""
    if found.reason:
        return (
            f"Nothing was resampled: {found.reason}. The error of a shift then lies between the "
            "difference and the sum of the two errors, whatever the results share."
        )
    known = 100.0 / math.sqrt(2.0 * max(found.resamples - 1, 1))
    return (
        f"{found.resamples:,} joint resamples: an object that several results use comes as often "
        "in each, and an anchor errs alike in each. The error is the spread of the shift, itself "
        f"known to {known:.0f} %; it says how far sampling alone would move it, not whether one "
        "of the choices is right."
    )


def _shift_rows(found: ResultComparison, place: int) -> list[tuple[str, ...]]:
    resampled = not found.reason
    rows: list[tuple[str, ...]] = [("", "shift", "in its errors" if resampled else "its error", "")]
    for name, row in headline_shifts(found, place).iterrows():
        error = row["error"] if resampled else row["most"]
        value = _rounded(row["shift"], error)
        if resampled:
            last = _ratio(row)
            value = str(rounded(row["shift"], error)) if error > 0.0 else value
        else:
            last = f"{_rounded(row['least'], error)} to {_rounded(row['most'], error)}"
        rows.append((printable(str(name)), value, last, str(row["unit"])))
    return rows


def _ratio(row: Any) -> str:
    """A shift in its errors, unless both are Monte Carlo noise."""
    if row["error"] < row["mcse"]:
        return "less than the Monte Carlo error"
    return to_place(row["ratio"], -1) if math.isfinite(row["ratio"]) else ""


def _rounded(value: float, error: float) -> str:
    if math.isfinite(error) and error > 0.0:
        return to_place(value, last_place(error))
    return f"{value:.3g}"


def shift_table(found: ResultComparison, place: int) -> PaperTable:
    """Shifts of every parameter, moduli included, from the first result to another."""
    shifts = found.shift(place)
    names = [str(name) for name in shifts.index]
    columns = [text_column("parameter", names)]
    columns += [
        number_column(name, shifts[name], words=words)
        for name, words in (
            ("shift", "mean less the first result's"),
            ("error", "by joint resampling"),
            ("ratio", "shift over error"),
            ("least", "the error can be, whatever is shared"),
            ("most", "the error can be"),
            ("independent", "the error were nothing shared"),
            ("mcse", "Monte Carlo error of the shift"),
        )
    ]
    columns.append(text_column("unit", [parameter(name).unit for name in names]))
    rows: list[tuple[Cell, ...]] = []
    for name, row in shifts.iterrows():
        error = row["most"] if not np.isfinite(row["error"]) else row["error"]
        bounds = f"{_rounded(row['least'], error)} to {_rounded(row['most'], error)}"
        own = _rounded(row["error"], error) if np.isfinite(row["error"]) else ""
        rows.append((Symbol(str(name)), _rounded(row["shift"], error), own, _ratio(row), bounds))
    return PaperTable(
        name=f"shifts_{place}",
        title=f"Shifts from {found.labels[0]} to {found.labels[place]}",
        columns=tuple(columns),
        head=("Parameter", "Shift", "Error", "Ratio", "Bounds of the error"),
        rows=tuple(rows),
        notes=(method(found), *found.notes),
    )


def choices_table(found: ResultComparison) -> PaperTable:
    """The choices that differ, a column per result."""
    keys = list(found.differences)
    texts = [[as_written(v) for v in found.differences[key]] for key in keys]
    columns = [text_column("key", keys)]
    columns += [
        text_column(f"result_{place + 1}", [row[place] for row in texts], label)
        for place, label in enumerate(found.labels)
    ]
    rows = tuple(
        (Words(key), *(Words(value) for value in row)) for key, row in zip(keys, texts, strict=True)
    )
    return PaperTable(
        name="choices",
        title="Choices that differ",
        columns=tuple(columns),
        head=("Key", *found.labels),
        rows=rows,
    )


def write_comparison(found: ResultComparison, folder: Path) -> None:
    """Write the shifts and the choices that differ into an existing folder.

    Raises
    ------
    OSError
        If a file cannot be written.
    """
    tables = [shift_table(found, place) for place in range(1, len(found.labels))]
    if found.differences:
        tables.append(choices_table(found))
    write_tables(tables, folder, " and ".join(found.labels))
