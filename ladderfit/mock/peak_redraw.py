"""Peaks of existing supernovae drawn again, with their widths and colours."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np
from astropy.table import MaskedColumn

from ladderfit.choices import Choices, PeakRelation
from ladderfit.errors import Problem
from ladderfit.ladder import Ladder
from ladderfit.mock.tables import digits_column, text_column
from ladderfit.names import with_group
from ladderfit.samples import FloatArray, FlowSample, PeakInputs, PeakSample

Rng = np.random.Generator
_COLUMNS = {  # column and unit of each role that may occur
    "width": ("w", None),
    "width_error": ("e_w", None),
    "decline_rate": ("dm15", "mag"),
    "decline_rate_error": ("e_dm15", "mag"),
    "colour": ("c", "mag"),
    "colour_error": ("e_c", "mag"),
    "peak_width_covariance": ("cov_mw", "mag"),
    "peak_decline_rate_covariance": ("cov_md", "mag2"),
    "peak_colour_covariance": ("cov_mc", "mag2"),
    "width_colour_covariance": ("cov_wc", "mag"),
    "decline_rate_colour_covariance": ("cov_dc", "mag2"),
    "host_mass": ("logM", "dex(Msun)"),
}


def peak_needs(ladder: Ladder) -> Iterator[str]:
    """Names of the parameters of the peak-magnitude relation that need a true value."""
    relation = ladder.choices.peak_relation
    samples = {"hosts": ladder.peaks, "expansion": ladder.flow}
    present = {group: sample for group, sample in samples.items() if sample is not None}
    if not present:
        return
    yield from ["alpha"] if relation.width != "none" else []
    if relation.decline_rate != "none":
        yield "decline_slope"
        yield from ["decline_curvature"] if relation.decline_rate.quadratic else []
    yield from ["beta"] if relation.colour != "none" else []
    yield from ["mass_step"] if relation.host_mass != "none" else []
    yield from (with_group("survey_offset", survey) for survey in relation.surveys)
    measured = _measured(relation, *(sample.inputs for sample in present.values()))
    for group in present:
        for name in measured:
            yield with_group(f"{name}_mean", group)
            yield with_group(f"{name}_spread", group)
        if len(measured) == 2:
            yield with_group("shape_colour_correlation", group)


def peak_beyond(ladder: Ladder) -> Iterator[Problem]:
    """Treatments that are no model of the data, so that nothing can be drawn from them."""
    how = ladder.choices.peak_relation.errors
    samples = [s.inputs for s in (ladder.peaks, ladder.flow) if s is not None]
    if how != "population" and _measured(ladder.choices.peak_relation, *samples):
        yield Problem(
            f'errors = "{how}"',
            "errors met by populations, from which true inputs are drawn",
            'simulate with errors = "population", and change that of the copy',
            key="peak_relation.errors",
        )


def role_columns(inputs: PeakInputs) -> dict[str, str]:
    """Name of the column of each role, for the tables written here."""
    named = {role: _COLUMNS[role][0] for role in inputs.values}
    return named | ({"survey": "Survey"} if inputs.survey is not None else {})


def peaks_again(
    choices: Choices,
    sample: PeakSample | FlowSample,
    group: str,
    bare: FloatArray,
    truth: Mapping[str, float],
    rng: Rng,
) -> list[MaskedColumn]:
    """Columns of peaks and of what belongs to them.

    Parameters
    ----------
    choices : Choices
    sample : PeakSample or FlowSample
        Gives errors, masses and surveys, and inputs that have no errors.
    group : str
        "hosts" or "expansion".
    bare : array, shape (n,)
        Mean peaks without terms [mag].
    truth : mapping of str to float
    rng : Generator
    """
    relation, inputs, n = choices.peak_relation, sample.inputs, len(sample)
    error = np.sqrt(sample.variance)
    names = _measured(relation, inputs)
    true = {name: inputs.values[name] for name in relation.inputs}
    true |= _true_inputs(relation, names, group, n, truth, rng) if names else {}
    peak = bare + _effect(relation, inputs, true, truth, n)
    peak = peak + truth["peak_scatter"] * rng.normal(size=n)
    if not inputs.values and inputs.survey is None:
        return _peak_columns(peak + error * rng.normal(size=n), error)
    noise = _noise(inputs, names, error, rng)
    seen = dict(inputs.values)
    for place, name in enumerate(names, start=1):
        seen[name] = true[name] + noise[:, place]
    columns = _peak_columns(peak + noise[:, 0], error)
    for role, values in seen.items():
        column, unit = _COLUMNS[role]
        columns.append(digits_column(column, values, 10, unit, role.replace("_", " ")))
    if inputs.survey is not None:
        columns.append(text_column("Survey", inputs.survey, "survey"))
    return columns


def _measured(relation: PeakRelation, *inputs: PeakInputs) -> tuple[str, ...]:
    """Inputs with errors of their own."""
    return tuple(
        name for name in relation.inputs if any(f"{name}_error" in each.values for each in inputs)
    )


def _true_inputs(
    relation: PeakRelation,
    names: tuple[str, ...],
    group: str,
    n: int,
    truth: Mapping[str, float],
    rng: Rng,
) -> dict[str, FloatArray]:
    white = rng.normal(size=(n, 2))
    rho = truth.get(with_group("shape_colour_correlation", group), 0.0) if len(names) == 2 else 0.0
    white[:, 1] = rho * white[:, 0] + np.sqrt(1.0 - rho**2) * white[:, 1]
    return {
        name: relation.reference(name)
        + truth[with_group(f"{name}_mean", group)]
        + truth[with_group(f"{name}_spread", group)] * white[:, place]
        for place, name in enumerate(names)
    }


def _effect(
    relation: PeakRelation,
    inputs: PeakInputs,
    true: Mapping[str, FloatArray],
    truth: Mapping[str, float],
    n: int,
) -> FloatArray:
    """What the terms add to the peak [mag], from their definition."""
    total = np.zeros(n)
    off = {name: values - relation.reference(name) for name, values in true.items()}
    if "width" in off:
        total = total - truth["alpha"] * off["width"]
    if relation.decline_rate != "none":
        rate = off["decline_rate"]
        total = total + truth["decline_slope"] * rate
        if relation.decline_rate.quadratic:
            total = total + truth["decline_curvature"] * rate**2
    if "colour" in off:
        total = total + truth["beta"] * off["colour"]
    if relation.host_mass != "none":
        beyond = inputs.values["host_mass"] - relation.host_mass.step
        smooth = relation.host_mass.smoothing
        above = 1.0 / (1.0 + np.exp(-beyond / smooth)) if smooth else (beyond >= 0.0).astype(float)
        total = total + truth["mass_step"] * (above - 0.5)
    if inputs.survey is not None:
        for survey in relation.surveys:
            offset = truth[with_group("survey_offset", survey)]
            total = total + offset * (inputs.survey == survey)
    return np.asarray(total)


def _noise(inputs: PeakInputs, names: tuple[str, ...], error: FloatArray, rng: Rng) -> FloatArray:
    """Errors of the peak and of its measured inputs, drawn together, shape (n, 1 + p)."""
    whole = np.zeros((len(error), 1 + len(names), 1 + len(names)))
    whole[:, 0, 0] = error**2
    for i, name in enumerate(names, start=1):
        whole[:, i, i] = inputs.values[f"{name}_error"] ** 2
        shared = inputs.values.get(f"peak_{name}_covariance", 0.0)
        whole[:, 0, i] = whole[:, i, 0] = shared
    if len(names) == 2:
        shared = inputs.values.get(f"{names[0]}_colour_covariance", 0.0)
        whole[:, 1, 2] = whole[:, 2, 1] = shared
    white = rng.normal(size=(len(error), 1 + len(names), 1))
    return np.asarray((np.linalg.cholesky(whole) @ white)[..., 0])


def _peak_columns(measured: FloatArray, error: FloatArray) -> list[MaskedColumn]:
    return [
        digits_column("mB", measured, 8, "mag", "peak magnitude, simulated"),
        digits_column("e_mB", error, 8, "mag", "error of mB, without the common scatter"),
    ]
