"""From tables of Cepheids to the samples a fit sees: cuts, magnitudes, variances."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd

from ladderfit.choices import Cepheids, Magnitude, Parallaxes, Range
from ladderfit.errors import Problem, raise_if
from ladderfit.kinds import LOG_PERIOD, MAGNITUDE, METALLICITY, PARALLAX, PERIOD
from ladderfit.physics.photometry import combine, combine_variance, index_weights
from ladderfit.rows import Rows, floats, integers
from ladderfit.samples import FloatArray, IntArray, Kept, StarSample
from ladderfit.tables import BoolArray, DataTable, Texts, and_more, shown

FUNDAMENTAL = frozenset({"f", "fu", "fundamental", "0"})
OVERTONE = frozenset({"1o", "fo", "o", "overtone", "first overtone", "1"})

_SAME_NAME = (
    "remove, rename or set aside one of the two; "
    "or leave columns.star out, where the stars have no names of their own"
)
_KINDS = {
    "period": PERIOD,
    "log_period": LOG_PERIOD,
    "metallicity": METALLICITY,
    "parallax": PARALLAX,
    "parallax_error": PARALLAX,
}


@dataclass(frozen=True, eq=False)
class CepheidSelection:
    """Kept Cepheids; `hosts` are theirs by first appearance, `seen` all in the table."""

    sample: StarSample
    hosts: tuple[str, ...]
    seen: tuple[str, ...]
    kept: Kept


@dataclass(frozen=True, eq=False)
class ParallaxSelection:
    """Kept parallax stars."""

    sample: StarSample
    kept: Kept


def select_cepheids(table: DataTable, section: Cepheids, *, metallicity: bool) -> CepheidSelection:
    """The Cepheids that take part, sorted by host.

    Parameters
    ----------
    table : DataTable
        Their table.
    section : Cepheids
        Their choices.
    metallicity : bool
        Whether the relation has a metallicity term.

    Raises
    ------
    InputError
        If the table does not fit the choices, or nothing is left.
    """
    rows = Rows(table, "cepheids")
    columns = _star_columns(section.columns, metallicity=metallicity)
    _require_stars(rows, columns, section.magnitude, "cepheids.magnitude")
    star, host = _star_names(table, columns), table.texts(columns["host"])
    rows.set_aside(section.set_aside, star, "star", host)
    rows.need(star, "star", columns.get("star"))
    rows.need(host, "host", columns["host"])
    rows.unique("the star", {"star": star, "host": host}, columns.get("star"), _SAME_NAME)
    values = _star_values(rows, columns, section.magnitude)
    _cut_stars(rows, columns, values, section.periods)
    left, kept = rows.finish("Cepheid")
    codes, present = pd.factorize(host.codes[left])
    order = np.argsort(codes, kind="stable")
    sample = _star_sample(star, values, left[order], codes[order])
    hosts = tuple(str(host.labels[code]) for code in present)
    return CepheidSelection(sample, hosts, tuple(host.known), kept)


def select_parallax_stars(
    table: DataTable, section: Parallaxes, magnitude: Magnitude, *, metallicity: bool
) -> ParallaxSelection:
    """The parallax stars that take part, in the order of their table.

    Raises
    ------
    InputError
        If the table does not fit the choices, or nothing is left.
    """
    key = "anchors.parallaxes"
    rows = Rows(table, key)
    columns = _star_columns(section.columns, metallicity=metallicity)
    place = "cepheids.magnitude" if section.magnitude is None else f"{key}.magnitude"
    _require_stars(rows, columns, magnitude, place)
    star = _star_names(table, columns)
    rows.set_aside(section.set_aside, star, "star")
    rows.need(star, "star", columns.get("star"))
    rows.unique("the star", {"star": star}, columns.get("star"), _SAME_NAME)
    values = _star_values(rows, columns, magnitude)
    values["parallax"] = rows.number("parallax", columns["parallax"], PARALLAX)
    values["parallax_error"] = rows.number(
        "parallax_error", columns["parallax_error"], PARALLAX, above=0.0
    )
    _cut_stars(rows, columns, values, section.periods)
    left, kept = rows.finish("parallax star")
    return ParallaxSelection(
        _star_sample(star, values, left, np.full(left.size, -1, dtype=np.int64)), kept
    )


def _star_names(table: DataTable, columns: Mapping[str, str]) -> Texts:
    return table.texts(columns["star"]) if "star" in columns else table.row_numbers()


def _star_columns(columns: Mapping[str, str], *, metallicity: bool) -> dict[str, str]:
    return {role: name for role, name in columns.items() if metallicity or role != "metallicity"}


def _magnitude_weights(magnitude: Magnitude) -> dict[str, float]:
    if magnitude.wesenheit is None:
        return dict.fromkeys(magnitude.used, 1.0)
    index = magnitude.wesenheit
    return index_weights(index.band, index.colour_bands, index.ratio)


def _error_names(magnitude: Magnitude) -> tuple[str, ...]:
    return ("total",) if "total" in magnitude.errors else magnitude.used


def _require_stars(rows: Rows, columns: Mapping[str, str], magnitude: Magnitude, key: str) -> None:
    problems: list[Problem] = []
    used = {name: magnitude.bands[name] for name in magnitude.used}
    errors = {name: magnitude.errors[name] for name in _error_names(magnitude)}
    problems.extend(rows.faults(columns, _KINDS))
    problems.extend(rows.faults(used, dict.fromkeys(used, MAGNITUDE), f"{key}.bands"))
    measured = dict.fromkeys(errors, MAGNITUDE)
    problems.extend(rows.faults(errors, measured, f"{key}.errors", _error_words))
    raise_if(problems)


def _error_words(name: str) -> str:
    return "total error" if name == "total" else f"error of {name}"


def _star_values(
    rows: Rows, columns: Mapping[str, str], magnitude: Magnitude
) -> dict[str, FloatArray]:
    """Period, magnitude, variance and metallicity of every row; NaN where missing."""
    values: dict[str, FloatArray] = {}
    if "period" in columns:
        period = rows.number("period", columns["period"], PERIOD, above=0.0)
        with np.errstate(invalid="ignore", divide="ignore"):
            values["log_period"] = np.log10(np.where(period > 0.0, period, np.nan))
    else:
        values["log_period"] = rows.number("log_period", columns["log_period"], LOG_PERIOD)
        with np.errstate(over="ignore"):
            period = 10.0 ** values["log_period"]
    values["period"] = period
    weights = _magnitude_weights(magnitude)
    bands = {name: rows.number(name, magnitude.bands[name], MAGNITUDE) for name in weights}
    errors = {
        name: rows.number(_error_words(name), magnitude.errors[name], MAGNITUDE, above=0.0)
        for name in _error_names(magnitude)
    }
    values["magnitude"] = combine(weights, bands)
    values["variance"] = (
        errors["total"] ** 2 if "total" in errors else combine_variance(weights, errors)
    )
    values["metallicity"] = (
        rows.number("metallicity", columns["metallicity"], METALLICITY)
        if "metallicity" in columns
        else np.full(rows.table.rows, np.nan)
    )
    return values


def _cut_stars(
    rows: Rows, columns: Mapping[str, str], values: Mapping[str, FloatArray], periods: Range
) -> None:
    if "mode" in columns:
        mode = rows.table.texts(columns["mode"])
        overtone = _overtones(rows, mode, columns["mode"])
        rows.need(mode, "mode", columns["mode"])
        rows.leave_out(overtone, "overtone", "overtones")
    low, high = periods
    outside = (values["period"] < low) | (values["period"] > high)
    rows.leave_out(outside, "outside the period range", "periods")


def _overtones(rows: Rows, mode: Texts, column: str) -> BoolArray:
    lowered = [" ".join(str(label).lower().split()) for label in mode.labels]
    unknown = mode.each([label not in FUNDAMENTAL | OVERTONE | {""} for label in lowered])
    wrong = np.flatnonzero(unknown & rows.judged)
    if wrong.size:
        rows.problems.append(
            Problem(
                found=f"the mode {shown(mode.cell(wrong[0]))}" + and_more(wrong.size - 1),
                expected="F, FU, fundamental or 0; or 1O, FO, O, overtone or 1",
                remedy="correct the label, empty it, or set the star aside",
                file=rows.table.name,
                row=int(wrong[0]) + 1,
                column=column,
            )
        )
    return mode.each([label in OVERTONE for label in lowered])


def _star_sample(
    star: Texts, values: Mapping[str, FloatArray], left: IntArray, host: npt.ArrayLike
) -> StarSample:
    def taken(role: str) -> FloatArray:
        return floats(values[role][left])

    with_parallax = "parallax" in values
    return StarSample(
        star=star.values[left],
        host=integers(host),
        log_period=taken("log_period"),
        magnitude=taken("magnitude"),
        variance=taken("variance"),
        metallicity=taken("metallicity"),
        row=integers(left + 1),
        parallax=taken("parallax") if with_parallax else None,
        parallax_error=taken("parallax_error") if with_parallax else None,
    )
