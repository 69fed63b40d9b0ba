"""Deviations of supernovae from the model, standard normal and independent if it is true.

As for stars (`ladderfit.posterior.deviations`), they are taken at draws of everything.
What was measured of a supernova whose inputs have errors, (colour, shape, peak), is
jointly normal once its true inputs are integrated over their population.  The
deviations are L^-1 (measured - mean) with L the Cholesky factor of that covariance, in
that order: the colour by itself, the shape (width or decline rate) given the colour,
the peak given both (Rosenblatt 1952, Annals of Mathematical Statistics 23, 470).  So the
peak's are independent of the measured inputs, which are fair covariates for them.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from ladderfit.kernels.populations import CURVED, LINEAR, WIDENED, condition
from ladderfit.ladder import Ladder
from ladderfit.names import with_group
from ladderfit.peak_terms import HOSTS, PeakTerms, Supernovae
from ladderfit.physics.expansion import term_of
from ladderfit.posterior.supernovae import flow_variance, terms_of
from ladderfit.samples import FloatArray

Draws = Mapping[str, FloatArray]


@dataclass(frozen=True)
class PeakDeviations:
    """Of the supernovae of one population at every draw, shape (b, n) each.

    Attributes
    ----------
    peak : array or None
        Of the peak, given the measured inputs; None where a covariance ties peaks together.
    inputs : mapping of str to array
        Of the measured inputs that have a population, by name, in the order in which they
        are conditioned on: colour, then shape.
    """

    peak: FloatArray | None
    inputs: Mapping[str, FloatArray] = field(default_factory=dict)


def sample_of(ladder: Ladder, group: str) -> Supernovae | None:
    """The supernovae of a population, "hosts" or "expansion"; None where there are none."""
    if group == HOSTS:
        return ladder.peaks
    return None if ladder.choices.expansion is None else ladder.flow


def peak_deviations(ladder: Ladder, group: str, draws: Draws) -> PeakDeviations:
    """Deviations of supernovae from the peak-magnitude relation, and of their inputs.

    With a square in an input the peak is not normal given the measured inputs; as in
    the fit, its exact mean and variance stand for its distribution.

    Parameters
    ----------
    ladder : Ladder
        With supernovae of that population.
    group : str
        "hosts" or "expansion".
    draws : mapping of str to array, shape (b,)
        Of every parameter and modulus.

    Raises
    ------
    ValueError
        If the population has no supernovae.
    """
    sample, terms = sample_of(ladder, group), terms_of(ladder)
    if sample is None:
        raise ValueError(f"no supernovae: {group}")
    given = _given_inputs(terms, group, sample, draws) if terms.noisy else None
    inputs = {} if given is None or not terms.integrated else _inputs(terms, given)
    if ladder.peak_covariance is not None:
        return PeakDeviations(None, inputs)
    left, variance = _bare(ladder, group, draws)
    for name, column in terms.design(sample).items():
        left = left - draws[name][:, None] * column
    if given is not None:
        left, variance = left - given.shift, variance + given.extra
    return PeakDeviations(left / np.sqrt(variance), inputs)


def _bare(ladder: Ladder, group: str, draws: Draws) -> tuple[FloatArray, FloatArray]:
    """Peaks less distance and standard peak, and their variance, without terms, (b, n) each."""
    in_hosts, elsewhere = ladder.choices.peak_scatters
    peaks, flow, expansion = ladder.peaks, ladder.flow, ladder.choices.expansion
    if group == HOSTS and peaks is not None:
        moduli = [draws[with_group("modulus", ladder.hosts[host])] for host in peaks.host]
        left = peaks.magnitude - np.stack(moduli, axis=1) - draws["peak_magnitude"][:, None]
        return left, peaks.variance + draws[in_hosts][:, None] ** 2
    if flow is None or expansion is None:
        raise ValueError(f"no supernovae: {group}")
    zero = draws["peak_magnitude"] - 5.0 * np.log10(draws["hubble_constant"])
    term = term_of(expansion, flow.redshift, flow.redshift_heliocentric)
    left = flow.magnitude - term - zero[:, None]
    return left, flow_variance(ladder) + draws[elsewhere][:, None] ** 2


@dataclass(frozen=True)
class _Given:
    """Measured inputs less their mean and their covariance; what they say of the peak.

    `off` (b, n, p), `covariance` (b, n, p, p), `shift` and `extra` (b, n).
    """

    off: FloatArray
    covariance: FloatArray
    shift: FloatArray
    extra: FloatArray


def _given_inputs(terms: PeakTerms, group: str, sample: Supernovae, draws: Draws) -> _Given:
    named = {name: draws[name] for name in terms.nonlinear}
    a, square = np.ascontiguousarray(terms.linear(named)), terms.square(named)
    x, errors, with_peak = terms.noisy_inputs(sample)
    batch, (n, p) = len(a), x.shape
    spread, mean = np.zeros((batch, 1, p, p)), np.zeros((batch, 1, p))
    style = (CURVED if terms.curved else LINEAR) if terms.integrated else WIDENED
    if terms.integrated:
        mean[:, 0] = np.stack([draws[name] for name in terms.means_of(group)], axis=1)
        spread[:, 0] = _spread(terms, group, draws)
    lever, shift, extra = np.zeros((batch, n, p)), np.empty((batch, n)), np.empty((batch, n))
    condition(
        style,
        a,
        np.zeros(batch) if square is None else np.ascontiguousarray(square),
        spread,
        mean,
        np.zeros(n, dtype=np.int64),
        x,
        errors,
        with_peak,
        lever,
        shift,
        extra,
        np.zeros((batch, 1, p + 1, p + 1)),
        np.zeros(batch),
    )
    return _Given(x - mean, spread + errors, shift + (lever * mean).sum(axis=2), extra)


def _spread(terms: PeakTerms, group: str, draws: Draws) -> FloatArray:
    """Covariance of true inputs, shape (b, p, p)."""
    own = np.stack([draws[name] for name in terms.spreads_of(group)], axis=1)
    found = own[:, :, None] * np.eye(own.shape[1]) * own[:, None, :]
    correlation = terms.correlation_of(group)
    if correlation is not None:
        found[:, 0, 1] = found[:, 1, 0] = draws[correlation] * own[:, 0] * own[:, 1]
    return np.asarray(found)


def _inputs(terms: PeakTerms, given: _Given) -> dict[str, FloatArray]:
    """Whitened inputs: the last, a colour where there is one, by itself; the first given it."""
    off, covariance = given.off[:, :, ::-1], given.covariance[:, :, ::-1, ::-1]
    names = terms.noisy[::-1]
    root = np.sqrt(covariance[:, :, 0, 0])
    found = {names[0]: off[:, :, 0] / root}
    if len(names) == 2:
        factor = covariance[:, :, 0, 1] / root
        rest = np.sqrt(covariance[:, :, 1, 1] - factor**2)
        found[names[1]] = (off[:, :, 1] - factor * found[names[0]]) / rest
    return found
