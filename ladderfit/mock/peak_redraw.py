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
_LIGHT = 299792.458  # km/s
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
    if ladder.peak_covariance is not None and _measured(ladder.choices.peak_relation, *samples):
        yield Problem(
            "measured widths or colours beside a covariance of peaks",
            "one of the two",
            "take the covariance out to simulate the rest",
            key="peak_relation",
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
    shared: FloatArray | None = None,
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
    shared : array, shape (n,), optional
        Errors of the peaks [mag], where they are correlated and so drawn already.
    """
    relation, inputs, n = choices.peak_relation, sample.inputs, len(sample)
    error = np.sqrt(sample.variance)
    names = _measured(relation, inputs)
    true = {name: inputs.values[name] for name in relation.inputs}
    true |= _true_inputs(relation, names, group, n, truth, rng) if names else {}
    peak = bare + _effect(relation, inputs, true, truth, n)
    scatter = truth[choices.peak_scatters[0 if group == "hosts" else 1]]
    peak = peak + scatter * rng.normal(size=n)
    if shared is not None:
        bare_inputs = [*_input_columns(inputs.values), *_survey_columns(inputs)]
        return [*_peak_columns(peak + shared, error), *bare_inputs]
    if not inputs.values and inputs.survey is None:
        return _peak_columns(peak + error * rng.normal(size=n), error)
    noise = _noise(inputs, names, error, rng)
    seen = dict(inputs.values)
    for place, name in enumerate(names, start=1):
        seen[name] = true[name] + noise[:, place]
    columns = _peak_columns(peak + noise[:, 0], error)
    return [*columns, *_input_columns(seen), *_survey_columns(inputs)]


def correlated_errors(
    ladder: Ladder, rng: Rng
) -> tuple[dict[str, FloatArray], dict[str, FloatArray]]:
    """Errors of peaks drawn from their covariance, by group, and the matrix by its key.

    The matrix is of what takes part, single errors included, peculiar velocities not.
    """
    whole, given = ladder.peak_covariance, ladder.choices.peak_covariance
    if whole is None or given is None:
        return {}, {}
    matrix, key = np.array(whole), given[0]
    near = 0 if ladder.peaks is None else len(ladder.peaks)
    if ladder.flow is not None:
        factor = _magnitudes_per_velocity(ladder.flow.redshift)
        expansion = ladder.choices.expansion
        velocity = 0.0 if expansion is None else expansion.peculiar_velocity
        places = np.arange(near, len(matrix))
        matrix[places, places] -= (factor * velocity) ** 2
    errors = np.linalg.cholesky(matrix) @ rng.normal(size=len(matrix))
    drawn = {}
    if ladder.peaks is not None:
        drawn["hosts"] = errors[:near]
    if ladder.flow is not None:
        drawn["expansion"] = errors[near:]
    kept = matrix[near:, near:] if key.startswith("expansion") else matrix
    return drawn, {key: kept}


def _magnitudes_per_velocity(redshift: FloatArray) -> FloatArray:
    """Change of magnitude per km/s of velocity along the line of sight."""
    return np.asarray(5.0 / np.log(10.0) / (_LIGHT * redshift))


def _input_columns(values: Mapping[str, FloatArray]) -> list[MaskedColumn]:
    columns = []
    for role, each in values.items():
        column, unit = _COLUMNS[role]
        columns.append(digits_column(column, each, 10, unit, role.replace("_", " ")))
    return columns


def _survey_columns(inputs: PeakInputs) -> list[MaskedColumn]:
    return [] if inputs.survey is None else [text_column("Survey", inputs.survey, "survey")]


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
