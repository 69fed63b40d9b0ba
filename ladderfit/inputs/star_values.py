"""What is known of every row of a table of Cepheids: period, magnitude, metallicity, mode."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from ladderfit.choices import Cepheids, Magnitude, Parallaxes
from ladderfit.errors import Problem, raise_if
from ladderfit.inputs.kinds import (
    LOG_PERIOD,
    LOG_PERIOD_ERROR,
    MAGNITUDE,
    METALLICITY,
    PARALLAX,
    PERIOD,
    PERIOD_ERROR,
    Kind,
)
from ladderfit.inputs.rows import Rows
from ladderfit.inputs.tables import BoolArray, Texts, and_more, shown
from ladderfit.physics.overtones import (
    PERIOD_RATIOS,
    fundamental_log_period,
    fundamental_stretch,
    within_range,
)
from ladderfit.physics.photometry import (
    colour_weights,
    combine,
    combine_covariance,
    combine_variance,
    index_weights,
)
from ladderfit.samples import FloatArray, IntArray, Photometry

Section = Cepheids | Parallaxes

FUNDAMENTAL = frozenset({"f", "fu", "fundamental", "0"})
OVERTONE = frozenset({"1o", "fo", "o", "overtone", "first overtone", "1"})

_KINDS = {
    "period": PERIOD,
    "log_period": LOG_PERIOD,
    "metallicity": METALLICITY,
    "metallicity_error": METALLICITY,
    "parallax": PARALLAX,
    "parallax_error": PARALLAX,
}


@dataclass(frozen=True, eq=False)
class StarValues:
    """Every row of a table, shape (n,) each; NaN where missing.

    Attributes
    ----------
    period, log_period : array
        Period [d] and its log10; of the fundamental mode where it was converted.
    observed : array
        log10 of the period as the table gives it.
    magnitude, variance, metallicity : array
    overtone : array of bool
        First-overtone pulsators.
    log_period_error, metallicity_error : array or None
        In dex.
    photometry : Photometry or None
        Of an index.
    """

    period: FloatArray
    log_period: FloatArray
    observed: FloatArray
    magnitude: FloatArray
    variance: FloatArray
    metallicity: FloatArray
    overtone: BoolArray
    log_period_error: FloatArray | None
    metallicity_error: FloatArray | None
    photometry: Photometry | None


def star_columns(columns: Mapping[str, str], *, metallicity: bool) -> dict[str, str]:
    """The columns that are used; those of the metallicity only where there is such a term."""
    unused = () if metallicity else ("metallicity", "metallicity_error")
    return {role: name for role, name in columns.items() if role not in unused}


def require_stars(
    rows: Rows,
    columns: Mapping[str, str],
    magnitude: Magnitude,
    key: str,
    kinds: Mapping[str, Kind] | None = None,
) -> None:
    """Check that all columns are there, in the right kind of unit; `key` is the magnitude's.

    Raises
    ------
    InputError
        With a problem for each column.
    """
    problems: list[Problem] = []
    used = {name: magnitude.bands[name] for name in magnitude.used}
    errors = {name: magnitude.errors[name] for name in _error_names(magnitude)}
    of_error = LOG_PERIOD_ERROR if "log_period" in columns else PERIOD_ERROR
    problems.extend(rows.faults(columns, {**_KINDS, **(kinds or {}), "period_error": of_error}))
    problems.extend(rows.faults(used, dict.fromkeys(used, MAGNITUDE), f"{key}.bands"))
    measured = dict.fromkeys(errors, MAGNITUDE)
    problems.extend(rows.faults(errors, measured, f"{key}.errors", _error_words))
    raise_if(problems)


def star_values(
    rows: Rows, columns: Mapping[str, str], section: Section, magnitude: Magnitude
) -> StarValues:
    """Read every row; those that miss a number are left out, impossible ones are problems."""
    period, observed, error = _periods(rows, columns)
    overtone = _overtones(rows, columns)
    log_period = observed
    if section.overtones == "convert":
        law = PERIOD_RATIOS[section.conversion]
        log_period = np.where(overtone, fundamental_log_period(observed, law), observed)
        period = np.where(overtone, _unlogged(log_period), period)
        if error is not None:
            error = np.where(overtone, error * fundamental_stretch(observed, law), error)
    mean, variance, photometry = _magnitudes(rows, magnitude)
    metallicity = np.full(rows.table.rows, np.nan)
    if "metallicity" in columns:
        metallicity = rows.number("metallicity", columns["metallicity"], METALLICITY)
    metallicity_error = None
    if "metallicity_error" in columns:
        metallicity_error = rows.number(
            "metallicity_error", columns["metallicity_error"], METALLICITY, above=0.0
        )
    return StarValues(
        period=period,
        log_period=log_period,
        observed=observed,
        magnitude=mean,
        variance=variance,
        metallicity=metallicity,
        overtone=overtone,
        log_period_error=error,
        metallicity_error=metallicity_error,
        photometry=photometry,
    )


def _periods(
    rows: Rows, columns: Mapping[str, str]
) -> tuple[FloatArray, FloatArray, FloatArray | None]:
    """Periods [d], their log10, and its errors where the table gives them."""
    error = None
    if "period" in columns:
        period = rows.number("period", columns["period"], PERIOD, above=0.0)
        positive = np.where(period > 0.0, period, np.nan)
        if "period_error" in columns:
            name = columns["period_error"]
            error = rows.number("period_error", name, PERIOD_ERROR, above=0.0)
            error = error / positive / np.log(10.0)
        return period, np.log10(positive), error
    log_period = rows.number("log_period", columns["log_period"], LOG_PERIOD)
    if "period_error" in columns:
        name = columns["period_error"]
        error = rows.number("period_error", name, LOG_PERIOD_ERROR, above=0.0)
    return _unlogged(log_period), log_period, error


def _unlogged(log_period: FloatArray) -> FloatArray:
    with np.errstate(over="ignore"):
        return np.asarray(10.0**log_period)


def _magnitudes(
    rows: Rows, magnitude: Magnitude
) -> tuple[FloatArray, FloatArray, Photometry | None]:
    """The magnitude or index [mag], its variance [mag^2], and what an index is made of."""
    weights = _magnitude_weights(magnitude)
    bands = {name: rows.number(name, magnitude.bands[name], MAGNITUDE) for name in weights}
    errors = {
        name: rows.number(_error_words(name), magnitude.errors[name], MAGNITUDE, above=0.0)
        for name in _error_names(magnitude)
    }
    total = "total" in errors
    variance = errors["total"] ** 2 if total else combine_variance(weights, errors)
    return combine(weights, bands), variance, _photometry(magnitude, bands, errors)


def _photometry(
    magnitude: Magnitude, bands: Mapping[str, FloatArray], errors: Mapping[str, FloatArray]
) -> Photometry | None:
    if magnitude.wesenheit is None:
        return None
    band = {magnitude.wesenheit.band: 1.0}
    colour = colour_weights(magnitude.wesenheit.colour_bands)
    values = combine(band, bands), combine(colour, bands)
    if "total" in errors:
        return Photometry(*values)
    return Photometry(
        *values,
        combine_variance(band, errors),
        combine_variance(colour, errors),
        combine_covariance(band, colour, errors),
    )


def _magnitude_weights(magnitude: Magnitude) -> dict[str, float]:
    if magnitude.wesenheit is None:
        return dict.fromkeys(magnitude.used, 1.0)
    index = magnitude.wesenheit
    return index_weights(index.band, index.colour_bands, index.ratio)


def _error_names(magnitude: Magnitude) -> tuple[str, ...]:
    return ("total",) if "total" in magnitude.errors else magnitude.used


def _error_words(name: str) -> str:
    return "total error" if name == "total" else f"error of {name}"


def _overtones(rows: Rows, columns: Mapping[str, str]) -> BoolArray:
    """Which rows are overtone pulsators; an unknown mode is a problem, a missing one is not."""
    if "mode" not in columns:
        return np.zeros(rows.table.rows, bool)
    mode = rows.table.texts(columns["mode"])
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
                column=columns["mode"],
            )
        )
    return mode.each([label in OVERTONE for label in lowered])


def cut_stars(
    rows: Rows, columns: Mapping[str, str], section: Section, values: StarValues
) -> Texts | None:
    """Leave out what the choices leave out; returns the photometric systems, if any are named."""
    system = None
    if "system" in columns:
        system = rows.table.texts(columns["system"])
        rows.need(system, "system", columns["system"])
    if "mode" in columns:
        rows.need(rows.table.texts(columns["mode"]), "mode", columns["mode"])
        if section.overtones == "drop":
            rows.leave_out(values.overtone, "overtone", "overtones")
    low, high = section.periods
    outside = (values.period < low) | (values.period > high)
    rows.leave_out(outside, "outside the period range", "periods")
    return system


def conversion_notes(section: Section, values: StarValues, left: IntArray) -> tuple[str, ...]:
    """What a reader should know of converted periods; `left` are the rows that take part."""
    if section.overtones != "convert":
        return ()
    law, converted = PERIOD_RATIOS[section.conversion], left[values.overtone[left]]
    count = len(converted)
    words = "overtone period" + ("" if count == 1 else "s")
    notes = [f"{count:,} {words} converted by {law} ({section.conversion}, from memory)"]
    outside = int(np.sum(~within_range(values.observed[converted], law)))
    if outside:
        notes.append(
            f"{outside:,} of {count:,} converted {words} outside {law.low:g} < log10 P1 < "
            f"{law.high:g}, where {section.conversion} is stated to hold"
        )
    return tuple(notes)
