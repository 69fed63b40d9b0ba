"""Whether a claim agrees with itself: its error, its pivot, its digits, its degrees of freedom."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ladderfit.errors import LadderfitError
from ladderfit.review.bench import Bench
from ladderfit.review.claims import Claim, fixed_point
from ladderfit.review.refits import Refit, Way, within_rounding
from ladderfit.review.resampling import Wanted
from ladderfit.review.system import STARS

PIVOTS = (1.0, 2.0, 3.0, 5.0, 10.0, 15.0, 20.0, 30.0)  # d
_TOO_SMALL, _TOO_LARGE = 0.6, 1.6  # of the errors that the stars allow
_SPREADS = 2.576  # how far from the line at another pivot, in spreads (1 % of a normal)
_NEARER = 0.1  # and how much nearer than at the pivot stated
_APART = 0.03  # dex: pivots nearer than this are taken for one


@dataclass(frozen=True)
class Check:
    """One question put to the claim itself.

    Attributes
    ----------
    about : str
        ``error``, ``pivot``, ``rounding`` or ``degrees of freedom``.
    words : str
        The answer.
    fault : str or None
        ``too small``, ``too large``, ``another pivot`` or ``note``; None where nothing
        is wrong.
    pivot : float or None
        Where the claimed magnitude lies [d], if it is at another pivot.
    """

    about: str
    words: str
    fault: str | None = None
    pivot: float | None = None


def error_check(claim: Claim, found: list[Refit]) -> Check | None:
    """The stated error against those that the same stars give, by formula and by resampling.

    The error fails only where it lies beyond all of them: below 0.6 of the
    smallest or above 1.6 of the largest, its rounding allowed for.
    """
    if claim.error is None or not found:
        return None
    possible = [e for refit in found for e in (refit.error, refit.spread) if e > 0.0]
    if not possible:
        return None
    low, high = min(possible), max(possible)
    half = claim.error_half_unit
    stated = fixed_point(claim.error, claim.error_decimals)
    whose = f"{found[0].stars:,} stars allow" if found[0].stars else "the table allows"
    text = (
        f"{whose} errors of {_short(low)} to {_short(high)} {claim.unit} "
        f"(formulas and resampling of all refits); stated is {stated}"
    )
    if claim.error + half < _TOO_SMALL * low:
        return Check("error", f"{text}, {low / claim.error:.1f} times less", "too small")
    if claim.error - half > _TOO_LARGE * high:
        more = f"{text}, {claim.error / high:.1f} times more"
        return Check("error", f"{more}, unless it covers what no table shows", "too large")
    return Check("error", text)


def possible_error(bench: Bench, claim: Claim, way: Way, scatter: float | None) -> Check | None:
    """Whether a slope's error can be had with that scatter and number of stars at all.

    No distribution of periods over a range w has a standard deviation above w / 2,
    so that no slope of n stars is better than scatter / (sqrt(n) w / 2).
    """
    if claim.quantity != "slope" or claim.error is None:
        return None
    try:
        fit = bench.fit(way.selection, way.treatment)
    except LadderfitError:
        return None
    used = fit.used
    x = used.log_period[used.group == STARS]
    if x.size < 3 or np.ptp(x) == 0.0:
        return None
    count = claim.stars or fit.stars
    spread = scatter if scatter is not None else fit.scatter
    least = spread / (np.sqrt(count) * 0.5 * float(np.ptp(x)))
    text = (
        f"with {count:,} stars and a scatter of {_short(spread)} mag no periods within the "
        f"table's range give a slope better than {_short(least)} {claim.unit}"
    )
    if claim.error + claim.error_half_unit < least:
        return Check("error", f"impossible: {text}", "too small")
    return Check("error", text)


def pivot_check(bench: Bench, claim: Claim, way: Way, refit: Refit, reach: float) -> Check | None:
    """Where along the line the claimed magnitude lies, if it is not where it is stated."""
    if claim.quantity != "zero_point" or abs(refit.difference) <= reach:
        return None
    try:
        fit = bench.fit(way.selection, way.treatment)
    except LadderfitError:
        return None
    stated = claim.pivot or bench.opened.choices.relation.pivot
    named = [(period, f"{period:g} d") for period in (*PIVOTS, bench.opened.choices.relation.pivot)]
    mean = 10.0 ** float(np.mean(fit.used.log_period[fit.is_star]))
    named.append((mean, f"{mean:.3g} d, the mean of log P"))
    where = "" if claim.pivot is not None else " (none is stated: the ladder file's)"
    for period, words in sorted(set(named)):
        if abs(np.log10(period / stated)) < _APART:
            continue
        made = bench.resampling.estimate(fit, bench.wanted(claim, way.selection, period))
        if made is None:
            continue
        limit = max(reach, claim.half_unit + _SPREADS * made.spread)
        if abs(claim.value - made.value) <= min(limit, _NEARER * abs(refit.difference)):
            claimed = fixed_point(claim.value, claim.decimals)
            text = (
                f"at {stated:g} d{where} the line has {_short(refit.value, 3)} mag, at {words} "
                f"{_short(made.value, 3)}, and the claim is {claimed}"
            )
            return Check("pivot", text, "another pivot", period)
    implied = _implied(bench, claim, way, refit, stated)
    if implied is None:
        return None
    return Check("pivot", f"the line has the claimed magnitude at {implied:.3g} d", "note")


def _implied(bench: Bench, claim: Claim, way: Way, refit: Refit, stated: float) -> float | None:
    fit = bench.fit(way.selection, way.treatment)
    slope = fit.system.fixed.get("slope")
    if slope is None:
        found = bench.resampling.estimate(fit, Wanted({"slope": 1.0}))
        slope = None if found is None else found.value
    if not slope:
        return None
    exponent = refit.difference / slope
    return float(stated * 10.0**exponent) if abs(exponent) < 3.0 else None


def rounding_check(claim: Claim) -> Check:
    """Whether the digits printed fit the error."""
    if claim.error is None:
        return Check("rounding", "no error is stated to hold the digits against")
    share = claim.half_unit / claim.error
    if share > 0.5:
        words = f"rounding alone may move the value by {share:.1f} of its errors"
        return Check("rounding", words, "note")
    if claim.error_half_unit > 0.25 * claim.error:
        low, high = claim.error - claim.error_half_unit, claim.error + claim.error_half_unit
        words = f"its one digit stands for an error of {_short(low)} to {_short(high)}"
        return Check("rounding", words, "note")
    return Check("rounding", f"rounding moves the value by {share:.2f} of its errors at most")


def freedom_check(bench: Bench, claim: Claim, way: Way) -> Check | None:
    """Whether a scatter is the root mean square of N or of N less the coefficients."""
    if claim.quantity != "scatter" or claim.intrinsic:
        return None
    try:
        fit = bench.fit(way.selection, way.treatment)
    except LadderfitError:
        return None
    count, spent = fit.stars, fit.stars - fit.freedom
    plain = fit.scatter * float(np.sqrt(fit.freedom / count))
    text = (
        f"with {count:,} - {spent:.3g} degrees of freedom {_short(fit.scatter, 4)} mag, "
        f"with {count:,} {_short(plain, 4)}"
    )
    if within_rounding(claim, claim.value - plain) and not within_rounding(
        claim, claim.value - fit.scatter
    ):
        words = f"{text}: the claim is the latter, as if nothing had been fitted"
        return Check("degrees of freedom", words, "note")
    return Check("degrees of freedom", text)


def _short(value: float, digits: int | None = None) -> str:
    text = f"{value:.2g}" if digits is None else f"{value:.{digits}f}"
    return text.replace("-", "\N{MINUS SIGN}") if "e" not in text else text
