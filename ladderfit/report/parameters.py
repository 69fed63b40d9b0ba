"""Tables of the parameters and their covariance, and of the host moduli and theirs."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ladderfit.names import base_name, group_of, parameter, with_group
from ladderfit.report.cells import (
    Cell,
    Column,
    FloatArray,
    PaperTable,
    Quoted,
    Scientific,
    Symbol,
    Unit,
    Words,
    number_column,
    quoted,
    text_column,
)
from ladderfit.result import Result
from ladderfit.rounding import to_place

_MOST_PRINTED = 60  # rows of a covariance worth printing

ERRORS_NOTE = (
    "Values are means and standard deviations of the posterior, rounded by the rule of the "
    "Particle Data Group; where it is skew, the median and the distances to the points that "
    "hold the central 68 per cent."
)


def words_of(name: str) -> str:
    """What a parameter is, with its group."""
    known, group = parameter(name), group_of(name)
    return known.words if group is None else f"{known.words}, {group}"


def globals_of(result: Result) -> tuple[str, ...]:
    """Names of all parameters but the moduli, derived ones last."""
    return (*result.headline, *result.derived)


def quote(result: Result, name: str) -> Quoted:
    """A parameter as the tables and the report quote it."""
    return quoted(result.draws[name], result.diagnostics.ess.get(name))


def prior_words(result: Result, name: str) -> str:
    """The prior in force, or how the number came about."""
    if name in result.derived:
        return "derived"
    prior = result.choices.prior(name)
    return f"{prior}" + ("" if result.choices.states_prior(name) else ", default")


def parameter_table(result: Result) -> PaperTable:
    """Every parameter but the moduli: value, errors, prior, and what the draws are worth."""
    names = globals_of(result)
    numbers = {name: quote(result, name) for name in names}
    rows = tuple(
        (
            Words(words_of(name)),
            Symbol(name),
            numbers[name],
            Unit(parameter(name).unit),
            Words(prior_words(result, name)),
        )
        for name in names
    )
    return PaperTable(
        name="parameters",
        title="Parameters of the calibration",
        columns=_parameter_columns(result, names, list(numbers.values())),
        head=("Parameter", "Symbol", "Value", "Unit", "Prior"),
        rows=rows,
        notes=(ERRORS_NOTE,),
    )


def _parameter_columns(
    result: Result, names: tuple[str, ...], numbers: list[Quoted]
) -> tuple[Column, ...]:
    summary = result.summary().loc[list(names)]
    informed = [result.diagnostics.informed.get(name, float("nan")) for name in names]
    return (
        text_column("parameter", list(names)),
        text_column("words", [words_of(name) for name in names]),
        text_column("unit", [parameter(name).unit for name in names], "of all numbers in the row"),
        *_summary_columns(summary, ""),
        *_quoted_columns(numbers, ""),
        number_column("ess", summary["ess"], words="effective number of draws"),
        number_column("mcse", summary["mcse"], words="Monte Carlo error of the mean"),
        text_column("prior", [prior_words(result, name) for name in names]),
        number_column("informed", informed, words="posterior over prior standard deviation"),
    )


def _summary_columns(summary: object, unit: str) -> tuple[Column, ...]:
    words = {
        "mean": "posterior mean",
        "sd": "posterior standard deviation",
        "q16": "16 % point",
        "q50": "median",
        "q84": "84 % point",
    }
    return tuple(
        number_column(name, summary[name], unit, text)  # type: ignore[index]
        for name, text in words.items()
    )


def _quoted_columns(numbers: list[Quoted], unit: str) -> tuple[Column, ...]:
    return (
        number_column("quoted", [n.value for n in numbers], unit, "mean, or median where skew"),
        number_column("error_below", [n.below for n in numbers], unit),
        number_column("error_above", [n.above for n in numbers], unit),
        Column("asymmetric", np.array([n.asymmetric for n in numbers], dtype=bool)),
    )


def covariance_of(result: Result, names: tuple[str, ...]) -> FloatArray:
    """Covariance of draws, shape (n, n); exactly zero for fixed parameters."""
    if not names:
        return np.empty((0, 0))
    draws = np.stack([result.draws[name] for name in names])
    off = draws - draws.mean(axis=1, keepdims=True)
    off[np.ptp(draws, axis=1) == 0.0] = 0.0
    return np.asarray(off @ off.T / (draws.shape[1] - 1))


def covariance_table(result: Result) -> PaperTable:
    """Covariance of all parameters but the moduli."""
    names = globals_of(result)
    labels = tuple(f"{parameter(name).unit}" for name in names)
    return _covariance(
        "covariance_parameters",
        "Covariance of the parameters",
        names,
        tuple(Symbol(name) for name in names),
        labels,
        covariance_of(result, names),
    )


def modulus_covariance_table(result: Result) -> PaperTable | None:
    """Covariance of the moduli of all hosts [mag^2]; None where there are no hosts."""
    names = _moduli(result)
    if not names:
        return None
    matrix = covariance_of(result, names)
    return moduli_covariance(tuple(str(group_of(name)) for name in names), matrix)


def moduli_covariance(hosts: tuple[str, ...], matrix: FloatArray) -> PaperTable:
    """A covariance of moduli [mag^2] as a table, printed in units of a power of ten."""
    names = tuple(with_group("modulus", host) for host in hosts)
    matrix = np.atleast_2d(matrix)
    title = "Covariance of the distance moduli"
    table = _covariance("covariance_moduli", title, names, (), ("mag",) * len(hosts), matrix)
    if len(hosts) > _MOST_PRINTED:
        return table
    power = int(np.floor(np.log10(max(float(np.min(np.diag(matrix))), 1e-12))))
    rows: tuple[tuple[Cell, ...], ...] = tuple(
        (Words(host), *(to_place(float(entry) / 10.0**power, -2) for entry in row))
        for host, row in zip(hosts, matrix, strict=True)
    )
    return replace(
        table,
        title=f"{title} (in 1e{power} square magnitudes)",
        head=("", *hosts),
        rows=rows,
        cut=True,
        notes=(),
    )


def joint_covariance_table(result: Result) -> PaperTable:
    """Covariance of everything, moduli included, for machines."""
    names = (*globals_of(result), *_moduli(result))
    units = tuple(parameter(name).unit for name in names)
    title = "Covariance of all parameters and distance moduli"
    table = _covariance("covariance", title, names, (), units, covariance_of(result, names))
    return PaperTable(table.name, table.title, table.columns, notes=table.notes)


def _moduli(result: Result) -> tuple[str, ...]:
    """Names of the moduli, nearest first."""
    found = (name for name in result.draws if base_name(name) == "modulus")
    return tuple(sorted(found, key=result.mean))


def _covariance(
    stem: str,
    title: str,
    names: tuple[str, ...],
    heads: tuple[Cell, ...],
    units: tuple[str, ...],
    matrix: FloatArray,
) -> PaperTable:
    columns = (
        text_column("name", list(names), "row"),
        text_column("unit", list(units), "of the row's quantity; an entry has the product of two"),
        *(number_column(name, matrix[:, place]) for place, name in enumerate(names)),
    )
    notes = ("Rows and columns are in the same order; an entry has the product of two units.",)
    if not heads or len(names) > _MOST_PRINTED:
        return PaperTable(stem, title, columns, notes=notes)
    rows = tuple(
        (head, *(Scientific(float(entry)) for entry in row))
        for head, row in zip(heads, matrix, strict=True)
    )
    return PaperTable(
        stem,
        title,
        columns,
        head=("", *heads),
        rows=rows,
        cut=True,
    )


def distance(modulus: FloatArray) -> FloatArray:
    """Distances [Mpc] of moduli [mag]."""
    return np.asarray(10.0 ** (0.2 * modulus - 5.0))


def modulus_table(result: Result) -> PaperTable | None:
    """Distance moduli and distances of all hosts, nearest first; None without hosts."""
    names = list(_moduli(result))
    if not names:
        return None
    summary = result.summary().loc[names]
    hosts = [str(group_of(name)) for name in names]
    numbers = [quote(result, name) for name in names]
    far = [quoted(distance(result.draws[name]), result.diagnostics.ess.get(name)) for name in names]
    stars, peaks = _counts(result)
    anchors = _anchor_words(result)
    rows = tuple(
        (Words(host), number, mpc, count(stars, host), count(peaks, host), anchors.get(host, ""))
        for host, number, mpc in zip(hosts, numbers, far, strict=True)
    )
    return PaperTable(
        name="moduli",
        title="Distance moduli and distances of the hosts",
        columns=(
            text_column("host", hosts),
            *_summary_columns(summary, "mag"),
            *_quoted_columns(numbers, "mag"),
            number_column("distance", [d.value for d in far], "Mpc", "mean, or median where skew"),
            number_column("distance_below", [d.below for d in far], "Mpc"),
            number_column("distance_above", [d.above for d in far], "Mpc"),
            number_column("cepheids", [stars.get(host, np.nan) for host in hosts]),
            number_column("supernovae", [peaks.get(host, np.nan) for host in hosts]),
            text_column("anchor", [anchors.get(host, "") for host in hosts], "geometric modulus"),
        ),
        head=(
            "Host",
            "Modulus (mag)",
            "Distance (Mpc)",
            "Cepheids",
            "Supernovae",
            "Geometric anchor",
        ),
        rows=rows,
        notes=(ERRORS_NOTE, "Errors are correlated between hosts: see their covariance."),
    )


def count(counts: dict[str, int], host: str) -> str:
    """A number of objects in a host, as text; empty where it is not known."""
    return f"{counts[host]:,}" if host in counts else ""


def _counts(result: Result) -> tuple[dict[str, int], dict[str, int]]:
    """Cepheids and supernovae per host, where the tables are known."""
    if result.source is None:
        return {}, {}
    found = []
    for sample in (result.source.cepheids, result.source.peaks):
        each = np.zeros(len(result.source.hosts), dtype=int)
        if sample is not None:
            each = np.bincount(sample.host, minlength=len(result.source.hosts))
        found.append({h: int(n) for h, n in zip(result.source.hosts, each, strict=True)})
    return found[0], found[1]


def _anchor_words(result: Result) -> dict[str, str]:
    if result.source is None:
        return {}
    return {a.name: f"{a.modulus:g} ± {a.error:g}" for a in result.source.geometric}
