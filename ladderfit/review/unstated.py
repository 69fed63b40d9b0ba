"""Choices that a paper does not state: which of them would give its numbers."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from ladderfit.review.bench import Bench
from ladderfit.review.claims import Claim, Method, period_words
from ladderfit.review.refits import (
    Refit,
    Way,
    comes_near,
    count_agrees,
    held_against,
    other_ways,
)
from ladderfit.review.resampling import Estimate
from ladderfit.review.selection import EVERY_PERIOD

LOWEST = (0.0, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0, 10.0)  # d
HIGHEST = (float("inf"), 100.0, 80.0, 60.0, 50.0, 40.0, 30.0)
CLIPS = (2.0, 2.5, 2.7, 3.0, 3.5, 4.0)
BREAK = 10.0  # d
_WIDER = 1.67  # times the stated error
_MOST_REMOVED = 0.2  # of the stars, where the paper does not state their number


@dataclass(frozen=True, eq=False)
class Explanation:
    """A way that gives the numbers of one relation.

    Attributes
    ----------
    words : str
    way : Way
    stated : bool
        Whether the stars are those described, so that it is another method only.
    refits : tuple of Refit
        One per claim explained.
    tried, met : int
        Number of ways tried, and of those that meet the claims.
    """

    words: str
    way: Way
    stated: bool
    refits: tuple[Refit, ...]
    tried: int
    met: int


def choices_not_stated(bench: Bench, method: Method, described: Way) -> Iterator[tuple[str, Way]]:
    """One choice at a time that the paper does not state, everything else as described."""
    described = replace(described, joint=False)  # the joint fit agrees, and takes longer
    selection = described.selection
    if method.periods is None:
        for periods in _ranges(bench, described):
            way = replace(described, selection=replace(selection, periods=periods))
            yield f"periods {period_words(periods)}", way
    if method.clip is None:
        for clip in CLIPS:
            treatment = replace(described.treatment, clip=clip)
            yield f"a clip at {clip:g} s.d.", replace(described, treatment=treatment)
    if method.break_ is None and selection.break_ is None:
        way = replace(described, selection=replace(selection, break_=BREAK))
        yield f"a break at {BREAK:g} d", way
    if method.mode is None and bench.overtone is not None:
        for mode in ("fundamental", "overtone", "both"):
            if mode != selection.mode:
                words = "both modes" if mode == "both" else f"the {mode} mode alone"
                yield words, replace(described, selection=replace(selection, mode=mode))
    stars = bench.stars
    if not method.hosts and stars is not None:
        present = [bench.opened.hosts[place] for place in np.unique(stars.host)]
        for host in present if len(present) > 1 else ():
            way = replace(described, selection=replace(selection, without=host))
            yield f"without {host}", way


def _ranges(bench: Bench, described: Way) -> Iterator[tuple[float, float]]:
    """The file's own range, then round ones, each set of stars once."""
    stars = bench.sample(described.selection)
    if stars is None:
        return
    cepheids = bench.ladder.choices.cepheids
    own = EVERY_PERIOD if cepheids is None else cepheids.periods
    period = 10.0 ** stars.log_period[bench.rows(described.selection)[: len(stars)]]
    seen = {len(period)}
    grid = [own, *((low, high) for high in HIGHEST for low in LOWEST)]
    done = set()
    for low, high in grid:
        inside = (period >= low) & (period <= high)
        mark = (int(np.sum(period < low)), int(np.sum(period > high)))
        if mark in done or int(np.sum(inside)) in (*seen, 0):
            continue
        done.add(mark)
        yield low, high


def explanation(
    bench: Bench, claims: Sequence[Claim], described: Way, method: Method
) -> Explanation | None:
    """What gives all numbers of one relation where the description does not.

    Another method on the stars described, or one choice that is not stated.  The
    claims have to be met within their rounding and a quarter of the spread under
    resampling, and the number of stars has to be the one stated; where none is
    stated a choice may take out a fifth of the stars at most.  Those that meet
    every claim to its last digit go first, then methods, then the number of stars.
    """
    base = [described.estimate(bench, claim) for claim in claims]
    ways = [("", way) for way in other_ways(bench, described)]
    tried = met = 0
    best: tuple[tuple[float, ...], Explanation] | None = None
    listed = [*ways, *choices_not_stated(bench, method, described)]
    for words, way in listed:
        made = [way.estimate(bench, claim) for claim in claims]
        tried += 1
        found = [
            held_against(claim, way, own, reference)
            for claim, own, reference in zip(claims, made, base, strict=True)
            if own is not None
        ]
        if len(found) < len(claims) or not _meets(claims, found, base, bool(words)):
            continue
        digits = all(refit.within_rounding for refit in found)
        pull = max(abs(refit.difference) / max(refit.spread, 1e-12) for refit in found)
        met += 1
        stated = claims[0].stars or found[0].stars
        beside = abs(found[0].stars - stated)
        rank = (float(not digits), float(bool(words)), beside, -float(found[0].stars), pull)
        if best is None or rank < best[0]:
            text = words or way.words
            best = (rank, Explanation(text, way, not words, tuple(found), 0, 0))
    return None if best is None else replace(best[1], tried=tried, met=met)


def _meets(
    claims: Sequence[Claim],
    found: Sequence[Refit],
    base: Sequence[Estimate | None],
    chosen: bool,
) -> bool:
    """Whether a way gives every claim; `chosen` if its stars or terms are not as described."""
    first = base[0]
    if first is None:
        return False
    for claim, refit, own in zip(claims, found, base, strict=True):
        if own is None or not comes_near(claim, refit, own.spread):
            return False
        if not count_agrees(claim, refit.stars) or (chosen and _far_wider(claim, refit)):
            return False
    stated = any(claim.stars is not None for claim in claims)
    return stated or found[0].stars >= (1.0 - _MOST_REMOVED) * first.stars


def _far_wider(claim: Claim, refit: Refit) -> bool:
    """Whether a choice leaves the number so uncertain that the stated error is not its own."""
    if claim.error is None:
        return False
    return min(refit.error, refit.spread) > _WIDER * (claim.error + claim.error_half_unit)
