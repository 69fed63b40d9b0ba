"""Samples of deviations of supernovae, of their peaks and of their inputs, for checks."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from ladderfit.checks.residuals import moduli
from ladderfit.checks.statistics import PLAIN, Sample
from ladderfit.peak_terms import EXPANSION, HOSTS, Supernovae
from ladderfit.posterior.peak_deviations import peak_deviations, sample_of
from ladderfit.result import Result
from ladderfit.samples import FloatArray, PeakSample

_NAMES = {HOSTS: "supernovae in hosts", EXPANSION: "expansion"}
_INPUTS = {"width": "widths", "decline_rate": "decline rates", "colour": "colours"}
_PEAKS = (*PLAIN, "asymmetry", "tails")
_ENDS = ("distribution", "asymmetry", "tails", "upper end", "lower end")
_BENT = ("trend", "scatter", "bend")


def supernova_samples(
    result: Result, draws: Mapping[str, FloatArray], left_out: dict[str, str]
) -> Iterator[Sample]:
    """Deviations of the supernovae in hosts and of those in the expansion.

    Where inputs have populations, the measured inputs follow as samples of their own:
    a selection by colour changes these, not the peaks given the colours.

    Parameters
    ----------
    result : Result
        With its ladder.
    draws : mapping of str to array, shape (b,)
        Those of its draws that are used.
    left_out : dict of str to str
        What has no checks and why; added to.
    """
    ladder = result.ladder
    present = [group for group in (HOSTS, EXPANSION) if sample_of(ladder, group) is not None]
    if present and ladder.peak_covariance is not None:
        left_out["supernovae"] = "their covariance ties them together"
    for group in present:
        sample = sample_of(ladder, group)
        if sample is not None:
            yield from _of(result, group, sample, draws)


def _of(
    result: Result, group: str, sample: Supernovae, draws: Mapping[str, FloatArray]
) -> Iterator[Sample]:
    relation = result.choices.peak_relation
    plain = relation == type(relation)()
    found = peak_deviations(result.ladder, group, draws)
    where = _where(result, sample)
    values = sample.inputs.values
    mass = {} if relation.host_mass == "none" else {"host mass": values["host_mass"]}
    if found.peak is not None:
        inputs = {name.replace("_", " "): values[name] for name in relation.inputs}
        bent = dict.fromkeys([*inputs, "redshift"], _BENT)
        alone = PLAIN if plain else _PEAKS
        yield Sample(_NAMES[group], found.peak, where | inputs | mass, None, bent, alone, group)
    for name, deviations in found.inputs.items():
        along = where | _before(found.inputs, name, sample) | mass | _stated(sample, name)
        kinds = {key: ("scatter",) if key == "stated error" else ("trend",) for key in along}
        words = f"{_INPUTS[name]}, {group}"
        yield Sample(words, deviations, along, None, kinds, _ENDS, group)


def _where(result: Result, sample: Supernovae) -> dict[str, FloatArray]:
    """How far away they are."""
    if isinstance(sample, PeakSample):
        return {"distance": moduli(result)[sample.host]}
    return {"redshift": np.log(sample.redshift)}


def _before(
    inputs: Mapping[str, FloatArray], name: str, sample: Supernovae
) -> dict[str, FloatArray]:
    """The measured inputs that an input is conditioned on: of the colour, none."""
    names = tuple(inputs)
    return {other: sample.inputs.values[other] for other in names[: names.index(name)]}


def _stated(sample: Supernovae, name: str) -> dict[str, FloatArray]:
    """Logarithm of the variance of a measured input, where it has errors."""
    error = sample.inputs.values.get(f"{name}_error")
    return {} if error is None else {"stated error": 2.0 * np.log(error)}
