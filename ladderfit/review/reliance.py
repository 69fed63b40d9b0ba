"""What a value rests on: along cuts and clips, without each host or star, and how few carry it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from ladderfit.errors import LadderfitError
from ladderfit.review.bench import Bench
from ladderfit.review.claims import Claim, period_words
from ladderfit.review.fits import Fit, without
from ladderfit.review.refits import Way
from ladderfit.review.resampling import Estimate, Wanted, number
from ladderfit.review.selection import Selection
from ladderfit.review.unstated import BREAK, HIGHEST, LOWEST
from ladderfit.samples import BoolArray

CLIPS = (None, 4.0, 3.5, 3.0, 2.5, 2.0)
_STARS_SHOWN = 5
_FEWEST = 5  # stars beyond the coefficients, below which a cut is not shown
_GREEDY = 40  # up to this size the set is also built one star at a time


@dataclass(frozen=True)
class Variation:
    """The value under one changed choice.

    Attributes
    ----------
    axis : str
        What is changed.
    words : str
        To what.
    place : float
        Where it stands along the axis; NaN where it has no order.
    value : float
    change : float
        From the refit as described.
    in_errors : float
        The change in units of the claim's error (of the value's spread without one).
    expected : float
        Standard deviation of the change under resampling of the stars.
    stars : int
    """

    axis: str
    words: str
    place: float
    value: float
    change: float
    in_errors: float
    expected: float
    stars: int


@dataclass(frozen=True)
class SmallestSet:
    """A set of stars whose removal moves the value by one error: an upper bound on the fewest.

    Attributes
    ----------
    size : int
    stars : tuple of str
    value : float
        Of the refit without them.
    change : float
    step : float
        The error that the change had to reach.
    of : int
        Number of stars before.
    """

    size: int
    stars: tuple[str, ...]
    value: float
    change: float
    step: float
    of: int


def variations(bench: Bench, claim: Claim, way: Way, step: float) -> list[Variation]:
    """The value along every axis that the table allows, from least squares.

    Parameters
    ----------
    bench : Bench
    claim : Claim
    way : Way
        As described.
    step : float
        The error that changes are counted in.
    """
    base = _plain(way)
    start = base.estimate(bench, claim)
    if start is None:
        return []
    found = []
    for axis, words, place, other in _axes(bench, base):
        made = other.estimate(bench, claim)
        if made is None or made.stars < _FEWEST:
            continue
        change = made.value - start.value
        expected = float(np.std(made.deviations - start.deviations))
        found.append(
            Variation(axis, words, place, made.value, change, change / step, expected, made.stars)
        )
    return found + _single_stars(bench, claim, base, start, step)


def _plain(way: Way) -> Way:
    """The same by least squares where the paper has a joint fit."""
    return replace(way, joint=False)


def _axes(bench: Bench, way: Way) -> Iterator[tuple[str, str, float, Way]]:
    chosen = way.selection
    stars = bench.sample(chosen)

    def changed(**changes: object) -> Way:
        return replace(way, selection=replace(chosen, **changes))  # type: ignore[arg-type]

    if stars is not None:
        period = (
            10.0
            ** stars.log_period[bench.rows(replace(chosen, periods=(0.0, np.inf)))[: len(stars)]]
        )
        low, high = chosen.periods
        for bound in _bounds(LOWEST, period, low):
            words = period_words((bound, high))
            yield "shortest period [d]", words, bound, changed(periods=(bound, high))
        for bound in _bounds(HIGHEST, period, high):
            yield (
                "longest period [d]",
                period_words((low, bound)),
                bound,
                changed(periods=(low, bound)),
            )
    for clip in CLIPS:
        words = "none" if clip is None else f"{clip:g}"
        other = replace(way, treatment=replace(way.treatment, clip=clip))
        yield "clip [s.d.]", words, np.inf if clip is None else clip, other
    yield from _terms(bench, way, chosen)


def _bounds(grid: tuple[float, ...], period: np.ndarray, own: float) -> list[float]:
    """Bounds that cut something, the one described, and none; each set of stars once."""
    if not period.size:
        return []
    kept: dict[int, float] = {}
    for bound in (own, *grid):
        kept.setdefault(int(np.sum(period < bound)), bound)
    return sorted(kept.values())


def _terms(bench: Bench, way: Way, chosen: Selection) -> Iterator[tuple[str, str, float, Way]]:
    nan = float("nan")
    if chosen.break_ is None:
        other = replace(way, selection=replace(chosen, break_=BREAK))
        yield "break", f"at {BREAK:g} d (slope: below it)", nan, other
    if bench.overtone is not None:
        for mode in ("fundamental", "overtone", "both"):
            other = replace(way, selection=replace(chosen, mode=mode))
            yield "modes", mode, nan, other
    stars = bench.stars
    if stars is None:
        return
    present = [bench.opened.hosts[place] for place in np.unique(stars.host)]
    for host in present if len(present) > 1 else ():
        if not chosen.hosts or host in chosen.hosts:
            yield "host left out", host, nan, replace(way, selection=replace(chosen, without=host))


def _single_stars(
    bench: Bench, claim: Claim, way: Way, start: Estimate, step: float
) -> list[Variation]:
    """The stars whose removal moves the value most, exactly, the clip not repeated."""
    fit = bench.fit(way.selection, way.treatment)
    labels = fit.used.label
    order = np.argsort(-np.abs(start.gaps))[:_STARS_SHOWN]
    return [
        Variation(
            axis="star left out",
            words=str(labels[place]),
            place=float("nan"),
            value=start.value - float(start.gaps[place]),
            change=-float(start.gaps[place]),
            in_errors=-float(start.gaps[place]) / step,
            expected=float("nan"),
            stars=start.stars - 1,
        )
        for place in order
        if start.gaps[place] != 0.0
    ]


def smallest_set(bench: Bench, claim: Claim, way: Way, step: float) -> SmallestSet | None:
    """The fewest stars found whose removal moves the value by `step`, verified by a refit.

    Stars are taken out in the order of their influence (Broderick, Giordano & Meager
    2020, arXiv 2011.14999), in either direction, and the number is the smallest for
    which the refit without them has moved far enough; where it is small, also one
    star at a time with the influence worked out anew.  The clip is not repeated.
    None where no set of half the stars does it.
    """
    base = _plain(way)
    try:
        fit = bench.fit(base.selection, base.treatment)
    except LadderfitError:
        return None
    wanted = bench.wanted(claim, base.selection)
    start = number(fit, wanted)
    if start is None:
        return None
    best: BoolArray | None = None
    for sign in (1.0, -1.0):
        found = _ordered(fit, wanted, start[0], sign * start[2], step)
        if found is not None and (best is None or found.sum() < best.sum()):
            best = found
        if found is not None and found.sum() <= _GREEDY:
            one_by_one = _greedy(fit, wanted, start[0], sign, step, int(found.sum()))
            if one_by_one is not None and best is not None and one_by_one.sum() < best.sum():
                best = one_by_one
    if best is None:
        return None
    value = _without(fit, wanted, best)
    if value is None:
        return None
    return SmallestSet(
        size=int(best.sum()),
        stars=tuple(str(name) for name in fit.used.label[best]),
        value=value,
        change=value - start[0],
        step=step,
        of=fit.stars,
    )


def _without(fit: Fit, wanted: Wanted, removed: BoolArray) -> float | None:
    try:
        found = number(without(fit, removed), wanted)
    except LadderfitError:
        return None
    return None if found is None else found[0]


def _ordered(
    fit: Fit, wanted: Wanted, start: float, gaps: np.ndarray, step: float
) -> BoolArray | None:
    """The shortest run of stars, most influential first, that moves the value far enough."""
    order = np.argsort(-gaps)
    order = order[(gaps[order] > 0.0) & fit.is_star[order]]
    most = min(len(order), fit.stars // 2)

    def reaches(size: int) -> bool:
        value = _without(fit, wanted, _mask(fit, order[:size]))
        return value is not None and abs(value - start) >= step

    guess = int(np.searchsorted(np.cumsum(gaps[order]), step)) + 1
    if most < 1:
        return None
    high = min(max(guess, 1), most)
    while not reaches(high):
        if high == most:
            return None
        high = min(high + max(high // 4, 1), most)
    low = 0
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if reaches(middle) else (middle, high)
    return _mask(fit, order[:high])


def _greedy(
    fit: Fit, wanted: Wanted, start: float, sign: float, step: float, most: int
) -> BoolArray | None:
    """One star at a time, the influence of the others worked out anew after each."""
    removed = np.zeros(len(fit.sigma), bool)
    for _ in range(most - 1):
        try:
            left = without(fit, removed)
        except LadderfitError:
            return None
        found = number(left, wanted)
        if found is None:
            return None
        gaps = np.where(left.is_star, sign * found[2], -np.inf)
        removed[np.flatnonzero(~removed)[int(np.argmax(gaps))]] = True
        value = _without(fit, wanted, removed)
        if value is not None and abs(value - start) >= step:
            return removed
    return None


def _mask(fit: Fit, places: np.ndarray) -> BoolArray:
    removed = np.zeros(len(fit.sigma), bool)
    removed[places] = True
    return removed
