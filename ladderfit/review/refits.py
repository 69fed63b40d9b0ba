"""A claim refitted as described, and by each other defensible way, on the same stars."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from ladderfit.errors import LadderfitError
from ladderfit.review.bench import Bench
from ladderfit.review.claims import Claim
from ladderfit.review.fits import Treatment
from ladderfit.review.resampling import Estimate
from ladderfit.review.selection import Selection
from ladderfit.review.system import STARS

CLIPS = (2.5, 3.0)
JOINT = "hierarchical"
JOINT_WEIGHTS = "errors and scatter"  # of the least squares nearest to the joint fit
_LEVEL = 2.576  # two-sided 1 % of a normal distribution
_LEAST, _MOST = 0.25, 1.0  # bounds of the tolerance, in spreads of the value
_NEAR = 0.25  # of a spread: how near another explanation has to come
_REVISED = 0.01  # of the stars: tables differ by a few between versions


@dataclass(frozen=True)
class Way:
    """A selection of stars and what is done with them.

    Attributes
    ----------
    selection : Selection
    treatment : Treatment
        Of a joint fit only the clip counts.
    joint : bool
        Whether it is the hierarchical fit.
    """

    selection: Selection
    treatment: Treatment
    joint: bool = False

    @property
    def words(self) -> str:
        """What is done with the stars."""
        if not self.joint:
            return self.treatment.words
        clip = self.treatment.clip
        return f"{JOINT} fit" if clip is None else f"{JOINT} fit, clip at {clip:g} s.d."

    def estimate(self, bench: Bench, claim: Claim) -> Estimate | None:
        """The number claimed, this way; None where it is not determined or cannot be had."""
        try:
            return self.made(bench, claim)
        except LadderfitError:
            return None

    def made(self, bench: Bench, claim: Claim) -> Estimate | None:
        """As `estimate`, with the reason where it cannot be had.

        Raises
        ------
        LadderfitError
            If the fit cannot be made.
        """
        if self.joint:
            return bench.joint_estimate(self.selection, self.treatment.clip, claim)
        return bench.estimate(self.selection, self.treatment, claim)


@dataclass(frozen=True, eq=False)
class Refit:
    """A claim's number by one way, held against the claim.

    Attributes
    ----------
    words : str
        The way.
    way : Way
    value, error, spread : float
        The number, its error by the way's own formula, and its standard deviation
        under resampling of the same stars.
    stars : int
    difference : float
        Claim minus refit.
    paired : float
        Standard deviation, under resampling of the same stars, of this refit minus
        the one as described; 0 for that one.
    within_rounding, within_error : bool
        Whether the claim is met to its last digit; within its own error.
    """

    words: str
    way: Way
    value: float
    error: float
    spread: float
    stars: int
    difference: float
    paired: float
    within_rounding: bool
    within_error: bool


def way_described(bench: Bench, claim: Claim) -> Way:
    """What the paper says; what it does not say is left undone.

    An intrinsic scatter has a meaning only with weights from errors and scatter, which
    are taken for it where the paper states none.
    """
    method = claim.method
    selection = bench.described(method)
    if method.fit == JOINT:
        return Way(selection, Treatment(JOINT_WEIGHTS, method.clip), joint=True)
    if method.fit == "both errors":
        weights = method.weights or "errors and scatter"
        return Way(selection, Treatment(weights, method.clip, period_errors=True))
    unstated = "errors and scatter" if claim.intrinsic else "none"
    return Way(selection, Treatment(method.weights or unstated, method.clip))


def other_ways(bench: Bench, described: Way) -> list[Way]:
    """The other defensible treatments of the same stars."""
    system = bench.system(described.selection)
    stars = system.group == STARS
    errors = system.variance[stars]
    differ = bool(errors.size and np.ptp(errors) > 1e-9 * float(np.max(errors)))
    treatments = [Treatment(), *(Treatment("none", clip) for clip in CLIPS)]
    if differ:
        weighted = "errors and scatter"
        treatments += [Treatment("errors"), Treatment(weighted)]
        treatments += [Treatment(weighted, clip) for clip in CLIPS]
    if np.any(system.period_variance > 0.0):
        treatments.append(Treatment("errors and scatter", None, period_errors=True))
    ways = [Way(described.selection, treatment) for treatment in treatments]
    if bench.draws:
        ways.append(Way(described.selection, Treatment(JOINT_WEIGHTS), joint=True))
    return [way for way in ways if way != described]


def held_against(claim: Claim, way: Way, made: Estimate, base: Estimate | None) -> Refit:
    """One refit with its difference from the claim."""
    difference = claim.value - made.value
    paired = 0.0
    paired_with = base is not None and base is not made and len(made.deviations) > 0
    if base is not None and paired_with and len(base.deviations) == len(made.deviations):
        paired = float(np.std(made.deviations - base.deviations))
    return Refit(
        words=way.words,
        way=way,
        value=made.value,
        error=made.error,
        spread=made.spread,
        stars=made.stars,
        difference=difference,
        paired=paired,
        within_rounding=within_rounding(claim, difference),
        within_error=claim.error is not None and abs(difference) <= claim.error,
    )


def within_rounding(claim: Claim, difference: float) -> bool:
    """Whether a difference is no more than the rounding of the claim, ends included."""
    return abs(difference) <= claim.half_unit * (1.0 + 1e-6) + 1e-12


def refits(
    bench: Bench, claim: Claim, described: Way, failed: list[str] | None = None
) -> list[Refit]:
    """All refits, the one as described first; empty where that does not give the number.

    Parameters
    ----------
    bench : Bench
    claim : Claim
    described : Way
    failed : list of str, optional
        Gets a sentence for each other way that cannot be had.

    Raises
    ------
    LadderfitError
        If the refit as described cannot be made.
    """
    base = described.made(bench, claim)
    if base is None:
        return []
    found = [held_against(claim, described, base, base)]
    for way in other_ways(bench, described):
        try:
            made = way.made(bench, claim)
        except LadderfitError as error:
            if failed is not None:
                failed.append(f"{way.words}: {' '.join(str(error).split())}")
            continue
        if made is not None:
            found.append(held_against(claim, way, made, base))
    return found


def tolerance(claim: Claim, found: list[Refit]) -> float:
    """How far a claim may lie from the refit as described and still be reproduced by it.

    Its rounding, and what defensible treatments of the same stars differ by: 2.58
    times the median paired spread (1 % of a normal distribution), though at least a
    quarter of the value's spread under resampling and at most the whole.
    """
    spread = found[0].spread
    others = [refit.paired for refit in found[1:]]
    typical = _LEVEL * float(np.median(others)) if others else _MOST * spread
    return claim.half_unit + float(np.clip(typical, _LEAST * spread, _MOST * spread))


def comes_near(claim: Claim, refit: Refit, spread: float) -> bool:
    """Whether a refit is near enough to be taken for what the paper did.

    Parameters
    ----------
    claim : Claim
    refit : Refit
    spread : float
        Of the refit as described, under resampling; the smaller of the two counts.
    """
    reach = claim.half_unit * (1.0 + 1e-6) + _NEAR * min(refit.spread, spread)
    return abs(refit.difference) <= reach + 1e-12


def count_agrees(claim: Claim, stars: int) -> bool:
    """Whether a number of stars is the one stated, or none is stated."""
    if claim.stars is None:
        return True
    return abs(claim.stars - stars) <= max(1.0, _REVISED * claim.stars)


def moved(claim: Claim) -> Claim:
    """The claim on the table's photometric system, by the transformation it gives."""
    law = claim.transformation
    if law is None:
        return claim
    shift = law.slope
    if claim.quantity == "zero_point":
        shift = law.zero_point + law.slope * float(np.log10((claim.pivot or 10.0) / law.pivot))
    error = None if claim.error is None else float(np.hypot(claim.error, law.error))
    return replace(claim, value=claim.value + shift, error=error)
