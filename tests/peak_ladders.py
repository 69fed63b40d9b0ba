"""Small ladders whose supernovae have widths, colours and more, and the same written out."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd
from brute_force import LOG_2PI, Row, Written, marginal, rows_of
from small_ladders import SMALL, TRUTH

from ladderfit.ladder import Ladder, build_ladder

TRIPP = {"width": {}, "colour": {}}
EVERYTHING = TRIPP | {"host_mass": {}, "surveys": ["Ost", "West"]}
RATE = {"decline_rate": {}, "colour": {}}
COLUMNS = {
    "width": "w",
    "width_error": "e_w",
    "decline_rate": "d",
    "decline_rate_error": "e_d",
    "colour": "c",
    "colour_error": "e_c",
    "host_mass": "logM",
    "survey": "S",
}
COVARIANCES = {
    "peak_width_covariance": "mw",
    "peak_decline_rate_covariance": "md",
    "peak_colour_covariance": "mc",
    "width_colour_covariance": "wc",
    "decline_rate_colour_covariance": "dc",
}
SIGNS = {"alpha": ("width", -1.0), "decline_slope": ("decline_rate", 1.0), "beta": ("colour", 1.0)}


def add_inputs(table: pd.DataFrame, rng: np.random.Generator) -> None:
    """Invented inputs, with errors of their own and correlated with each other and the peak."""
    n = len(table)
    table["w"], table["e_w"] = rng.normal(0.2, 1.0, n), rng.uniform(0.2, 0.6, n)
    table["d"], table["e_d"] = rng.normal(1.1, 0.2, n), rng.uniform(0.05, 0.1, n)
    table["c"], table["e_c"] = rng.normal(0.02, 0.1, n), rng.uniform(0.02, 0.06, n)
    table["logM"] = rng.normal(10.2, 0.6, n)
    table["S"] = np.resize(["Ost", "West", "Nord"], n)
    e = table["e_mB"]
    table["mw"], table["md"] = 0.3 * e * table["e_w"], -0.3 * e * table["e_d"]
    table["mc"] = 0.5 * e * table["e_c"]
    table["wc"], table["dc"] = -0.2 * table["e_w"] * table["e_c"], 0.2 * table["e_d"] * table["e_c"]


def parts_with(
    name: str, relation: dict[str, Any], *, covariances: bool = True, errors: bool = True
) -> tuple[dict[str, Any], dict[str, Any]]:
    """Choices and tables of one of `SMALL`, its supernovae with inputs and the terms asked for."""
    make, _ = SMALL[name]
    choices, tables = make(np.random.default_rng(701), TRUTH)
    rng = np.random.default_rng(31)
    columns = {role: c for role, c in COLUMNS.items() if errors or not role.endswith("_error")}
    columns |= COVARIANCES if covariances else {}
    for section in ("supernovae", "expansion"):
        if section in tables:
            add_inputs(tables[section], rng)
            choices[section]["columns"] |= columns
    return choices | {"peak_relation": dict(relation)}, tables


def ladder_with(name: str, relation: dict[str, Any], **options: Any) -> Ladder:
    """A ladder of `parts_with`."""
    return build_ladder(*parts_with(name, relation, **options))


def log_marginal(ladder: Ladder, values: dict[str, float]) -> float:
    """Log density of all data at given phi, from one dense covariance of everything measured.

    Each supernova has a row for its magnitude and one for each input; the true
    inputs about their mean are integrated by adding their covariance, seen through
    the coefficients, to that of the errors.  For ladders whose populations count.
    """
    sections = [s for s in (ladder.peaks, ladder.flow) if s is not None]
    bare = [row for row in rows_of(ladder) if "peak_magnitude" not in row.terms]
    found, blocks = list(bare), [np.zeros((len(bare), len(bare)))]
    near = [
        r
        for r in rows_of(ladder)
        if "peak_magnitude" in r.terms and "hubble_constant" not in r.terms
    ]
    far = [
        r for r in rows_of(ladder) if "peak_magnitude" in r.terms and "hubble_constant" in r.terms
    ]
    both = {"hosts": (ladder.peaks, near), "expansion": (ladder.flow, far)}
    places: list[int] = []
    for group, (sample, plain) in both.items():
        if sample is None:
            continue
        scatter = ladder.choices.peak_scatters[0 if group == "hosts" else 1]
        for i, row in enumerate(plain):
            places.append(len(found))
            more, block = one_supernova(ladder, sample, i, group, values)
            terms = row.terms | more[0].terms
            found.append(replace(row, terms=terms, scatter=scatter, variance=row.variance))
            found += more[1:]
            blocks.append(block)
    shared = np.zeros((len(found), len(found)))
    start = 0
    for block in blocks:
        stop = start + len(block)
        shared[start:stop, start:stop] = block
        start = stop
    if ladder.peak_covariance is not None:  # in place of the single variances
        shared[np.ix_(places, places)] += ladder.peak_covariance
        found = [replace(r, variance=0.0) if i in set(places) else r for i, r in enumerate(found)]
    assert len(sections) > 0
    return marginal(as_written(ladder, found, shared), values)


def one_supernova(
    ladder: Ladder, sample: Any, i: int, group: str, values: dict[str, float]
) -> tuple[list[Row], np.ndarray]:
    """Rows of magnitude and inputs, and their covariance without the magnitude's own variance."""
    relation, inputs = ladder.choices.peak_relation, sample.inputs.values
    terms: dict[str, float] = {}
    if relation.host_mass != "none":
        beyond = inputs["host_mass"][i] - relation.host_mass.step
        width = relation.host_mass.smoothing
        up = float(beyond >= 0.0) if width == 0.0 else 1.0 / (1.0 + np.exp(-beyond / width))
        terms["mass_step"] = up - 0.5
    for survey in relation.surveys:
        terms[f"survey_offset[{survey}]"] = float(sample.inputs.survey[i] == survey)
    rows, loads, own, with_peak, spreads = [], [], [], [], []
    for coefficient, (name, sign) in SIGNS.items():
        if getattr(relation, name) == "none":
            continue
        mean = f"{name}_mean[{group}]"
        a = sign * values[coefficient]
        terms[mean] = a
        rows.append(Row({mean: 1.0}, inputs[name][i] - getattr(relation, name).reference, 0.0))
        loads.append(a)
        own.append(inputs[f"{name}_error"][i] ** 2)
        with_peak.append(inputs.get(f"peak_{name}_covariance", np.zeros(i + 1))[i])
        spreads.append(values[f"{name}_spread[{group}]"])
    errors = np.zeros((len(rows) + 1, len(rows) + 1))
    errors[1:, 1:] = np.diag(own)
    errors[0, 1:] = errors[1:, 0] = with_peak
    population = np.diag(np.square(spreads))
    if len(rows) == 2:
        role = next(r for r in ("width", "decline_rate") if getattr(relation, r) != "none")
        errors[1, 2] = errors[2, 1] = inputs.get(f"{role}_colour_covariance", np.zeros(i + 1))[i]
        rho = values.get(f"shape_colour_correlation[{group}]", 0.0)
        population[0, 1] = population[1, 0] = rho * spreads[0] * spreads[1]
    seen = np.vstack([loads, np.eye(len(rows))])
    return [Row(terms, 0.0, 0.0), *rows], errors + seen @ population @ seen.T


def as_written(ladder: Ladder, rows: list[Row], shared: np.ndarray) -> Written:
    """Rows as `brute_force.marginal` takes them."""
    linear = tuple(dict.fromkeys(name for row in rows for name in row.terms))
    return Written(
        ladder=ladder,
        linear=linear,
        others=(),
        A=np.array([[row.terms.get(name, 0.0) for name in linear] for row in rows]),
        y=np.array([row.y for row in rows]),
        variance=np.array([row.variance for row in rows]),
        scatter=tuple(row.scatter for row in rows),
        shared=shared,
    )


def log_on_a_grid(
    measured: np.ndarray,
    errors: np.ndarray,
    mean: np.ndarray,
    population: np.ndarray,
    model: Any,
    size: int = 361,
) -> float:
    """Log density of (m, w, c) as measured, summed over a grid of true (w, c).

    `errors` is the covariance of the three, scatter included; `model` gives the true
    magnitude of arrays of true w and c.
    """
    root = np.linalg.cholesky(population)
    u = np.linspace(-7.0, 7.0, size)
    white = np.stack(np.meshgrid(u, u, indexing="ij"), axis=-1)
    true = mean + white @ root.T
    off = np.concatenate(
        [(measured[0] - model(true[..., 0], true[..., 1]))[..., None], measured[1:] - true], axis=-1
    )
    chi2 = np.einsum("...i,ij,...j->...", off, np.linalg.inv(errors), off)
    log = -0.5 * (chi2 + np.linalg.slogdet(errors)[1] + 3 * LOG_2PI)
    log = log - 0.5 * np.sum(white**2, axis=-1) - LOG_2PI
    return float(np.log(np.sum(np.exp(log))) + 2.0 * np.log(u[1] - u[0]))
