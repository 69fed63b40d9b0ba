"""What the peak-magnitude relation needs of a table of supernovae, and whether it makes sense."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from ladderfit.choices import Choices, PeakRelation
from ladderfit.choices.peak_relation import INPUTS
from ladderfit.errors import Problem
from ladderfit.inputs.kinds import (
    DECLINE_RATE,
    HOST_MASS,
    MAGNITUDE,
    MAGNITUDE_SQUARED,
    NUMBER,
    PEAK_COLOUR,
    Kind,
)
from ladderfit.inputs.rows import Rows, floats, nearest_few
from ladderfit.inputs.tables import and_more
from ladderfit.samples import FloatArray, FlowSample, IntArray, PeakInputs, PeakSample

KINDS: dict[str, Kind] = {
    "width": NUMBER,
    "width_error": NUMBER,
    "decline_rate": DECLINE_RATE,
    "decline_rate_error": DECLINE_RATE,
    "colour": PEAK_COLOUR,
    "colour_error": PEAK_COLOUR,
    "peak_width_covariance": MAGNITUDE,
    "peak_decline_rate_covariance": MAGNITUDE_SQUARED,
    "peak_colour_covariance": MAGNITUDE_SQUARED,
    "width_colour_covariance": MAGNITUDE,
    "decline_rate_colour_covariance": MAGNITUDE_SQUARED,
    "host_mass": HOST_MASS,
}
Samples = Mapping[str, PeakSample | FlowSample | None]  # by section


def roles_read(relation: PeakRelation, columns: Mapping[str, str]) -> tuple[str, ...]:
    """Roles of numbers that are read: those that a term needs or can use, where they are given."""
    inputs = relation.inputs
    wanted = [*inputs, *(f"{name}_error" for name in inputs)]
    wanted += [f"peak_{name}_covariance" for name in inputs]
    wanted += [f"{name}_colour_covariance" for name in inputs if "colour" in inputs]
    wanted += ["host_mass"] if relation.host_mass != "none" else []
    return tuple(role for role in wanted if role in columns and role in KINDS)


class InputColumns:
    """Columns of inputs of one table; rows that miss one are left out as it is made.

    Parameters
    ----------
    rows : Rows
    columns : mapping of str to str
        Column by role.
    relation : PeakRelation
    """

    def __init__(self, rows: Rows, columns: Mapping[str, str], relation: PeakRelation) -> None:
        self._values: dict[str, FloatArray] = {}
        self._survey = None
        for role in roles_read(relation, columns):
            above = 0.0 if role.endswith("_error") else None
            self._values[role] = rows.number(role, columns[role], KINDS[role], above=above)
        if relation.surveys and "survey" in columns:
            self._survey = rows.table.texts(columns["survey"])
            rows.need(self._survey, "survey", columns["survey"])

    def taken(self, left: IntArray) -> PeakInputs:
        """The inputs of the rows that take part."""
        survey = None if self._survey is None else self._survey.values[left]
        values = {role: floats(column[left]) for role, column in self._values.items()}
        return PeakInputs(values, survey)


def peak_problems(
    choices: Choices,
    samples: Samples,
    files: Mapping[str, str],
    covariance: FloatArray | None,
) -> Iterator[Problem]:
    """Covariances that no set of errors allows, and surveys of which nothing takes part.

    Parameters
    ----------
    choices : Choices
    samples : mapping of str to PeakSample, FlowSample or None
        By section, "supernovae" first.
    files : mapping of str to str
        Their tables, for messages.
    covariance : array, shape (n, n), or None
        Of the peaks of both samples together [mag^2].
    """
    yield from _surveys(choices, samples)
    faults = list(_faulty_covariances(choices, samples, files))
    yield from faults
    if covariance is not None and not faults:
        yield from _indefinite(samples, covariance)


def _surveys(choices: Choices, samples: Samples) -> Iterator[Problem]:
    present = [s.inputs.survey for s in samples.values() if s and s.inputs.survey is not None]
    known = sorted({str(name) for survey in present for name in survey})
    for name in choices.peak_relation.surveys:
        if present and name not in known:
            yield Problem(
                found=f"the survey {name!r}, of which no supernova takes part",
                expected="surveys of supernovae that take part",
                remedy=nearest_few(name, known),
                key="peak_relation.surveys",
            )


def _indefinite(samples: Samples, covariance: FloatArray) -> Iterator[Problem]:
    """Covariances of peaks with inputs that the covariance of all peaks leaves no room for."""
    explained = []
    for sample in samples.values():
        if sample is not None:
            inputs = _with_errors(sample)
            own, with_peak = error_blocks(sample, inputs)
            solved = np.linalg.solve(own, with_peak[..., None])[..., 0]
            explained.append(np.einsum("np,np->n", with_peak, solved))
    try:
        np.linalg.cholesky(covariance - np.diag(np.concatenate(explained)))
    except np.linalg.LinAlgError:
        yield Problem(
            found="covariances of peaks with width or colour beside a covariance of all peaks "
            "that is too small for them",
            expected="errors that make one covariance matrix",
            remedy="take the columns of covariances with the peak out, or correct them",
            key="supernovae.columns",
        )


def _with_errors(sample: PeakSample | FlowSample) -> tuple[str, ...]:
    return tuple(name for name in INPUTS if f"{name}_error" in sample.inputs.values)


def _faulty_covariances(
    choices: Choices, samples: Samples, files: Mapping[str, str]
) -> Iterator[Problem]:
    for section, sample in samples.items():
        if sample is None:
            continue
        columns = _columns_of(choices, section)
        for role in sample.inputs.values:
            if role.endswith("_covariance"):
                for error in _errors_behind(role):
                    if error in sample.inputs.values:
                        continue
                    yield Problem(
                        found=f"{role}, but no {error}",
                        expected="a covariance of two measurements that both have errors",
                        remedy=f"add columns.{error}, or take {role} out",
                        key=f"{section}.columns.{role}",
                    )
        yield from _impossible(section, sample, columns, files[section])


def error_blocks(
    sample: PeakSample | FlowSample, inputs: tuple[str, ...]
) -> tuple[FloatArray, FloatArray]:
    """Covariance of the errors of `inputs`, shape (n, p, p), and with the peak's, shape (n, p)."""
    values, n, p = sample.inputs.values, len(sample), len(inputs)
    nothing = np.zeros(n)
    own, with_peak = np.zeros((n, p, p)), np.zeros((n, p))
    for i, name in enumerate(inputs):
        own[:, i, i] = values.get(f"{name}_error", nothing) ** 2
        with_peak[:, i] = values.get(f"peak_{name}_covariance", nothing)
        for j, other in enumerate(inputs):
            if i != j and (shared := values.get(f"{name}_{other}_covariance")) is not None:
                own[:, i, j] = own[:, j, i] = shared
    return own, with_peak


def peak_notes(choices: Choices, samples: Samples) -> Iterator[str]:
    """What a reader should know about the terms of the peak-magnitude relation."""
    relation = choices.peak_relation
    present = {key: sample for key, sample in samples.items() if sample is not None}
    if not present or not relation.inputs:
        return
    words = " and ".join(name.replace("_", " ") for name in relation.inputs)
    yield (
        f"supernovae: whether one is in the sample is taken not to depend on its {words}; "
        "a selection by colour that is not modelled biases beta and the peak magnitude"
    )
    exact = [
        f"{name.replace('_', ' ')} ({section})"
        for name in relation.inputs
        for section, sample in present.items()
        if f"{name}_error" not in sample.inputs.values
    ]
    if exact and relation.errors != "ignored":
        yield f"supernovae: no errors are given of {', '.join(exact)}; taken as exact"
    if relation.errors != "population" and len(exact) < len(relation.inputs) * len(present):
        how = "ignored" if relation.errors == "ignored" else "only put into the variance"
        yield (
            f"supernovae: FOR COMPARING ONLY: errors of {words} are {how}, "
            "which biases the coefficients"
        )


def _columns_of(choices: Choices, section: str) -> Mapping[str, str]:
    found = choices.supernovae if section == "supernovae" else choices.expansion
    return {} if found is None else found.columns


def _errors_behind(role: str) -> tuple[str, ...]:
    """The error columns that a covariance belongs to, but for the peak's own."""
    first, second = role.removesuffix("_covariance").rsplit("_", 1)
    if role.startswith("peak_"):
        return (f"{role.removeprefix('peak_').removesuffix('_covariance')}_error",)
    return f"{first}_error", f"{second}_error"


def _largest(correlation: FloatArray, inputs: tuple[str, ...]) -> str:
    """The role of the largest correlation among peak and inputs."""
    size = np.abs(np.triu(correlation, 1))
    first, second = np.unravel_index(int(np.argmax(size)), size.shape)
    names = ("peak", *inputs)
    return f"{names[first]}_{names[second]}_covariance"


def _impossible(
    section: str, sample: PeakSample | FlowSample, columns: Mapping[str, str], file: str
) -> Iterator[Problem]:
    """The first row whose errors and covariances make no covariance matrix."""
    inputs = _with_errors(sample)
    if not inputs or not any(r.endswith("_covariance") for r in sample.inputs.values):
        return
    own, with_peak = error_blocks(sample, inputs)
    whole = np.zeros((len(sample), len(inputs) + 1, len(inputs) + 1))
    whole[:, 0, 0], whole[:, 0, 1:], whole[:, 1:, 0] = sample.variance, with_peak, with_peak
    whole[:, 1:, 1:] = own
    scale = np.sqrt(np.einsum("nii->ni", whole))
    shape = whole / (scale[:, :, None] * scale[:, None, :])
    faulty = np.flatnonzero(np.linalg.eigvalsh(shape)[:, 0] <= 0.0)
    if faulty.size:
        role = _largest(shape[faulty[0]], inputs)
        yield Problem(
            found=f"covariances that are too large for the errors{and_more(faulty.size - 1)}",
            expected="correlations between -1 and 1 that fit together",
            remedy="correct errors or covariances, or set the row aside",
            file=file,
            row=int(sample.row[faulty[0]]),
            column=columns.get(role),
            key=f"{section}.columns.{role}",
        )
