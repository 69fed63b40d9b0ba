"""The Hubble constant along the lower and the upper redshift cut, each point an exact refit."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from ladderfit.errors import LadderfitError
from ladderfit.ladder import Ladder
from ladderfit.result import Result
from ladderfit.samples import FloatArray, IntArray
from ladderfit.sampling.warm import WarmDrawer
from ladderfit.units import LN10

FEWEST = 10  # supernovae in the expansion below which a cut is left out
_POINTS = 8
_Ends = tuple[float, float]
_MOMENTS = 1000  # draws of phi over which the intercept's moments are averaged


@dataclass(frozen=True, eq=False)
class CutLine:
    """Refits along one cut, shape (m,) each.

    Attributes
    ----------
    cut : array
        The redshift at which the sample is cut.
    kept : array of int
        Supernovae left in the expansion.
    mean, sd : array
        Of the Hubble constant [km/s/Mpc].
    expected : array
        Standard deviation of the change from the chosen range that the difference
        of the samples alone leads to expect [km/s/Mpc].  As one sample holds the
        other, it is the root of the difference of two variances (Gratton &
        Challinor 2020, MNRAS 499, 3410): those of the intercept, which is what the
        expansion determines.
    """

    cut: FloatArray
    kept: IntArray
    mean: FloatArray
    sd: FloatArray
    expected: FloatArray


@dataclass(frozen=True, eq=False)
class RedshiftCuts:
    """The Hubble constant for the chosen redshift range, and along both of its ends."""

    chosen: tuple[float, float]
    kept: int
    mean: float
    sd: float
    lower: CutLine
    upper: CutLine


def hubble_along_cuts(
    ladder: Ladder,
    lower: Sequence[float] | None = None,
    upper: Sequence[float] | None = None,
    *,
    draws: int = 4000,
    seed: int | None = None,
    progress: Callable[[float], None] | None = None,
) -> RedshiftCuts:
    """Draw the ladder anew for every lower, and for every upper redshift cut.

    Parameters
    ----------
    ladder : Ladder
        With supernovae in the expansion.
    lower, upper : sequence of float, optional
        The cuts.  By default from half the chosen lower cut, and from the middle
        of the chosen range, to the middle and to 1.3 times the upper cut,
        where the table has supernovae.
    draws : int
        Per refit: the error of each mean is sd / sqrt(draws).
    seed : int, optional
        Of every refit.
    progress : callable, optional
        Told the fraction done.

    Raises
    ------
    LadderfitError
        If the ladder has no supernovae in the expansion, or too few.
    """
    section, flow = ladder.choices.expansion, ladder.flow
    if section is None or flow is None:
        raise LadderfitError("redshift cuts need supernovae in the expansion, which are missing")
    low, high = section.redshifts
    seen = np.sort(_every_redshift(ladder))
    lower = _default(low, 0.5 * low, float(np.sqrt(low * high))) if lower is None else lower
    upper = _default(high, float(np.sqrt(low * high)), 1.3 * high) if upper is None else upper
    ranges = {
        "lower": _useful([(cut, high) for cut in lower], (low, high), seen),
        "upper": _useful([(low, cut) for cut in upper], (low, high), seen),
    }
    todo = dict.fromkeys(((low, high), *ranges["lower"], *ranges["upper"]))
    drawer, known = WarmDrawer(), dict[_Ends, _Refit]()
    for cuts in todo:
        changed = ladder.change({"expansion.redshifts": list(cuts)})
        known[cuts] = _refit(drawer, drawer.draw(changed, draws=draws, seed=seed))
        if progress is not None:
            progress(len(known) / len(todo))
    base = known[low, high]
    return RedshiftCuts(
        (low, high),
        len(flow),
        base.mean,
        base.sd,
        _line([known[cuts] for cuts in ranges["lower"]], [c for c, _ in ranges["lower"]], base),
        _line([known[cuts] for cuts in ranges["upper"]], [c for _, c in ranges["upper"]], base),
    )


@dataclass(frozen=True)
class _Refit:
    """Hubble constant, supernovae left, and the variance of the intercept."""

    mean: float
    sd: float
    kept: int
    variance: float


def _refit(drawer: WarmDrawer, result: Result) -> _Refit:
    """What one refit gives; the intercept's variance by its exact moments given phi."""
    flow, last = result.ladder.flow, drawer.last
    variance = float(np.var(result.draws["intercept"]))
    if last is not None:
        joint, z = last
        names = joint.split.coefficients
        form = np.zeros(len(names))
        form[names.index("hubble_constant")], form[names.index("peak_magnitude")] = 0.2, -0.2
        solution = joint.solution(z[:_MOMENTS])
        rows = np.linalg.solve(solution.factor, form[solution.free][None, :, None])[..., 0]
        centre = solution.coefficients @ form
        variance = float(np.var(centre) + np.mean(np.sum(rows**2, axis=1)))
    return _Refit(
        result.mean("hubble_constant"),
        result.sd("hubble_constant"),
        0 if flow is None else len(flow),
        variance,
    )


def _every_redshift(ladder: Ladder) -> FloatArray:
    """Redshifts of the table's usable rows, whatever the cut."""
    flow = ladder.change({"expansion.redshifts": [0.0, float("inf")]}).flow
    if flow is None or len(flow) < FEWEST:
        raise LadderfitError(
            f"redshift cuts need at least {FEWEST} supernovae in the expansion; "
            f"there are {0 if flow is None else len(flow)}"
        )
    return flow.redshift


def _default(chosen: float, low: float, high: float) -> list[float]:
    """Cuts between two bounds, evenly in log z, the chosen one among them."""
    if low <= 0.0 or not np.isfinite(high):
        return [chosen]
    return sorted({chosen, *np.geomspace(low, high, _POINTS).tolist()})


def _useful(ranges: list[_Ends], chosen: _Ends, seen: FloatArray) -> list[_Ends]:
    """Ranges that keep enough supernovae; of those that keep the same, the chosen or the first."""

    def held(cuts: _Ends) -> tuple[int, int]:
        low, high = cuts
        return int(np.searchsorted(seen, low)), int(np.searchsorted(seen, high, side="right"))

    found: dict[tuple[int, int], _Ends] = {}
    for cuts in ranges:
        first, last = held(cuts)
        if last - first >= FEWEST:
            found.setdefault((first, last), chosen if held(chosen) == (first, last) else cuts)
    return list(found.values())


def _line(found: list[_Refit], cuts: list[float], base: _Refit) -> CutLine:
    variance = np.array([refit.variance for refit in found], dtype=float)
    return CutLine(
        cut=np.array(cuts, dtype=float),
        kept=np.array([refit.kept for refit in found], dtype=np.int64),
        mean=np.array([refit.mean for refit in found], dtype=float),
        sd=np.array([refit.sd for refit in found], dtype=float),
        expected=base.mean * LN10 * np.sqrt(np.abs(variance - base.variance)),
    )
