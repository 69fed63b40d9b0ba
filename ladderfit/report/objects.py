"""Tables of what the model leaves over, object by object."""

from __future__ import annotations

import numpy as np

from ladderfit.checks.residuals import (
    HostResiduals,
    Residuals,
    cepheid_residuals,
    flow_residuals,
    parallax_residuals,
    peak_residuals,
    velocity_residuals,
)
from ladderfit.report.cells import (
    Cell,
    PaperTable,
    Words,
    number_column,
    text_column,
)
from ladderfit.result import Result
from ladderfit.rounding import to_place

_NOTE = (
    "The model is that at the posterior means. The expected spread is that of one object: its "
    "measurement error and the intrinsic scatter; the error of the fit itself, which all share, "
    "is not in it."
)
_KINDS = (
    ("cepheids", "Cepheids", "log10 P", "d", "mag", cepheid_residuals),
    ("parallaxes", "parallax stars", "log10 P", "d", "mas", parallax_residuals),
    ("supernovae", "supernovae in hosts", "modulus", "mag", "mag", peak_residuals),
    ("expansion", "supernovae in the expansion", "redshift", "", "mag", flow_residuals),
    ("velocities", "objects in the expansion", "distance", "Mpc", "km/s", velocity_residuals),
)
_X_NAMES = {"log10 P": "log_period", "modulus": "modulus"}


def residual_tables(result: Result) -> list[PaperTable]:
    """One table per kind of object; none where the tables behind the result are gone."""
    if result.source is None:
        return []
    found = []
    for stem, words, x, x_unit, unit, make in _KINDS:
        residuals = make(result)
        if residuals is not None and len(residuals):
            found.append(_table(result, residuals, stem, words, (x, x_unit), unit))
    return found


def _table(
    result: Result, data: Residuals, stem: str, words: str, x: tuple[str, str], unit: str
) -> PaperTable:
    hosts = (
        [result.ladder.hosts[index] for index in data.host]
        if isinstance(data, HostResiduals)
        else None
    )
    x_unit = "" if x[0] == "log10 P" else x[1]
    columns = (
        text_column("name", [str(name) for name in data.name]),
        *(() if hosts is None else (text_column("host", hosts),)),
        number_column(_X_NAMES.get(x[0], x[0]), data.x, x_unit, _x_words(*x)),
        number_column("data", data.data, unit),
        number_column("model", data.model, unit),
        number_column("residual", data.residual, unit, "data minus model"),
        number_column("expected", data.sd, unit, "spread that the model expects"),
        number_column("standardised", data.standardised, "", "residual over expected spread"),
    )
    head = ("Name", *(() if hosts is None else ("Host",)), x[0], "Data", "Model", "Residual")
    return PaperTable(
        name=f"residuals_{stem}",
        title=f"Residuals of the {words} ({unit})",
        columns=columns,
        head=(*head, "Expected", "Ratio"),
        rows=_rows(data, hosts),
        notes=(_NOTE, *_reduced(stem)),
    )


def _x_words(x: str, unit: str) -> str:
    return f"log10 of the period in {unit}" if x == "log10 P" else x


def _reduced(stem: str) -> tuple[str, ...]:
    if stem == "cepheids":
        return (
            "Data are absolute magnitudes at the posterior moduli, reduced to the line by all "
            "other terms.",
        )
    return ()


def _rows(data: Residuals, hosts: list[str] | None) -> tuple[tuple[Cell, ...], ...]:
    """Printed to a thirtieth of the typical expected spread, or finer."""
    wide = min(int(np.floor(np.log10(np.median(data.sd) / 3.0))) - 1, 0)
    rows: list[tuple[Cell, ...]] = []
    for index in range(len(data)):
        numbers = (data.data, data.model, data.residual, data.sd)
        rows.append(
            (
                Words(str(data.name[index])),
                *(() if hosts is None else (Words(hosts[index]),)),
                to_place(data.x[index], -3),
                *(to_place(values[index], wide) for values in numbers),
                to_place(data.standardised[index], -2),
            )
        )
    return tuple(rows)
