"""What each anchor contributes to the zero point."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from ladderfit.names import with_group
from ladderfit.priors import LogNormal, Normal, Prior
from ladderfit.result import Result
from ladderfit.samples import FloatArray

_TRANSLATED = ("zero_point", "peak_magnitude", "hubble_constant")


@dataclass(frozen=True)
class AnchorWeights:
    """Shares of the zero point; together they are 1.

    Attributes
    ----------
    geometric : mapping of str to float
        By geometric anchor in use.
    parallaxes : float or None
        Of all parallax stars together; None where none take part.
    priors : float
        Of priors on zero point, peak magnitude and Hubble constant.
    """

    geometric: Mapping[str, float]
    parallaxes: float | None
    priors: float

    def by_name(self) -> dict[str, float]:
        """Every share under one name: the anchors', ``parallaxes`` and ``priors``."""
        found = dict(self.geometric)
        if self.parallaxes is not None:
            found["the parallaxes"] = self.parallaxes
        return {**found, "the priors": self.priors}


def anchor_weights(result: Result) -> AnchorWeights | None:
    """How much of the zero point rests on each anchor.

    The weight of a geometric anchor is the change of the zero point per change of
    the anchor's modulus, with the sign turned.  For a datum with a normal error
    that derivative is the posterior covariance of the zero point with what was
    measured, over the datum's variance; priors follow the same rule.  Moving every
    modulus by one amount moves zero point, peak magnitude and 5 log10 H0 by as much
    the other way, so what the other shares leave is that of the parallaxes.

    Parameters
    ----------
    result : Result
        With its ladder.

    Returns
    -------
    AnchorWeights or None
        None where the ladder has no relation, or its zero point is fixed.
    """
    zero_point = result.draws.get("zero_point")
    if zero_point is None or np.ptp(zero_point) == 0.0:
        return None
    ladder = result.ladder
    geometric = {}
    for anchor in ladder.geometric:
        measured = result.draws[with_group("modulus", anchor.name)]
        measured = measured + _shared(result, anchor.name)
        geometric[anchor.name] = -_covariance(zero_point, measured) / anchor.error**2
    priors = sum(_share_of_prior(result, name, zero_point) for name in _TRANSLATED)
    if ladder.parallax_stars is None:
        return AnchorWeights(geometric, None, priors)
    return AnchorWeights(geometric, 1.0 - sum(geometric.values()) - priors, priors)


def _shared(result: Result, anchor: str) -> FloatArray:
    """What errors that anchors share add to an anchor's datum [mag]."""
    total = np.zeros(result.size)
    for name, shared in result.choices.anchors.shared_errors.items():
        draws = result.draws.get(with_group("shared_error", name))
        if draws is not None:
            total = total + shared.error * shared.loads.get(anchor, 0.0) * draws
    return total


def _share_of_prior(result: Result, name: str, zero_point: FloatArray) -> float:
    draws = result.draws.get(name)
    if draws is None:
        return 0.0
    prior: Prior = result.choices.prior(name)
    if isinstance(prior, LogNormal):
        return _covariance(zero_point, 5.0 * np.log10(draws)) / prior.deviation**2
    if isinstance(prior, Normal):
        return _covariance(zero_point, draws) / prior.deviation**2
    return 0.0


def _covariance(a: FloatArray, b: FloatArray) -> float:
    return float(np.mean((a - a.mean()) * (b - b.mean())))
