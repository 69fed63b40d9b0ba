"""Cepheids whose deviations are not normal: a mixture with outliers, or a Student-t.

Given every coefficient that the data of hosts depend on, hosts are independent of one
another, and each is one integral over its modulus, in which a star's label (outlier or
not) or scale is summed over exactly.  So these coefficients are in phi, no label is
ever sampled, and every sampler of phi does as it is.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.special import gammaln

from ladderfit.choices.outliers import MIXTURE
from ladderfit.kernels import robust
from ladderfit.kernels.arrow import Moments, Solution, solve
from ladderfit.kernels.robust_draw import draw_hosts
from ladderfit.ladder import Ladder
from ladderfit.posterior.cepheids import Values
from ladderfit.posterior.errors_in_inputs import input_errors
from ladderfit.posterior.families import Family, families, outliers_of
from ladderfit.posterior.frame import Frame, star_columns
from ladderfit.samples import FloatArray, IntArray, StarSample

_OF_MANY = 5  # places of a maximum that are tried where a host has many stars


@dataclass(frozen=True, eq=False)
class RobustHosts:
    """The Cepheids of all hosts, ready for the integrals over the hosts' locals.

    Attributes
    ----------
    families : tuple of Family
        The laws of deviations that occur.
    stars : HostStars
        Columns and magnitudes in the frame.
    """

    families: tuple[Family, ...]
    stars: robust.HostStars

    def solution(
        self, total: Moments, known: IntArray, given: FloatArray, values: Values
    ) -> Solution:
        """Theta and the evidence of all rows, given phi; `total` are the moments of all others."""
        apart = replace(total, local=total.local[:, :0], cross=total.cross[:, :0])
        found = solve(apart, known, given)
        evidence = found.log_evidence.copy()
        robust.integrate_hosts(*self._inputs(total, found.coefficients, values), evidence)
        return replace(found, log_evidence=evidence, moments=total)

    def draw(
        self, solution: Solution, values: Values, white: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Coefficients, shape (b, k), and locals, shape (b, h), given phi."""
        total, free = solution.moments, len(solution.free)
        apart = replace(total, local=total.local[:, :0], cross=total.cross[:, :0])
        coefficients, _ = replace(solution, moments=apart).draw(white[:, :free])
        seeds = np.ascontiguousarray(white[:, free:]).view(np.uint64)
        local = np.empty(total.local.shape)
        draw_hosts(*self._inputs(total, coefficients, values), seeds, local)
        return coefficients, local

    def shape(self, values: Values) -> FloatArray:
        """What the kernels want to know of every law, shape (b, families, 6)."""
        parts = []
        for family in self.families:
            t2 = values(family.scatter) ** 2
            nothing = np.zeros(len(t2))
            if family.treatment == MIXTURE:
                fraction, width2 = values(family.fraction), values(family.width) ** 2
                norm = nothing - 0.5 * robust.LOG_2PI
                own = (fraction, width2, values(family.offset), nothing, norm)
            else:
                freedom = values(family.freedom)
                norm = gammaln(0.5 * freedom + 0.5) - gammaln(0.5 * freedom)
                own = (nothing, nothing, nothing, freedom, norm - 0.5 * np.log(np.pi * freedom))
            parts.append(np.stack([t2, *own], axis=1))
        return np.ascontiguousarray(np.stack(parts, axis=1))

    def _inputs(
        self, total: Moments, coefficients: FloatArray, values: Values
    ) -> tuple[robust.HostStars, FloatArray, FloatArray, FloatArray, FloatArray]:
        known = (total.cross[:, :, :-1] @ coefficients[:, :, None])[:, :, 0]
        linear = total.cross[:, :, -1] - known
        return (
            self.stars,
            self.shape(values),
            np.ascontiguousarray(coefficients),
            np.ascontiguousarray(total.local),
            np.ascontiguousarray(linear),
        )


def robust_hosts(ladder: Ladder, frame: Frame) -> RobustHosts | None:
    """The Cepheids of a ladder whose outliers are modelled, or None."""
    stars, outliers = ladder.cepheids, outliers_of(ladder.choices)
    if stars is None or outliers is None:
        return None
    found, family = families(ladder, stars, outliers)
    narrow, _ = star_columns(ladder, stars)
    n, width = len(stars), frame.centroid.shape[1]
    wide = np.zeros((n, width))
    wide[:, : narrow.shape[1]] = narrow
    whole = frame.columns(stars.host, wide, stars.magnitude)
    starts = np.searchsorted(stars.host, np.arange(frame.hosts + 1)).astype(np.int64)
    kinds = [robust.MIXTURE if f.treatment == MIXTURE else robust.STUDENT for f in found]
    held = robust.HostStars(
        y=np.ascontiguousarray(whole[:, -1]),
        variance=np.ascontiguousarray(stars.variance),
        columns=np.ascontiguousarray(whole[:, :-1]),
        sensitivity=_sensitivity(ladder, stars, width),
        family=family,
        kinds=np.array(kinds, dtype=np.int64),
        starts=starts,
        chosen=_chosen(whole, starts),
    )
    return RobustHosts(found, held)


def _sensitivity(ladder: Ladder, stars: StarSample, width: int) -> FloatArray:
    """Derivative of every column with respect to an input, times that input's error."""
    errors = input_errors(ladder, stars)
    parts = []
    if errors is not None:
        for slope, error in (
            (errors.period_slope, errors.period_error),
            (errors.metallicity_slope, errors.metallicity_error),
        ):
            if slope is not None and error is not None:
                padded = np.zeros((len(stars), width))
                padded[:, : slope.shape[1]] = slope * error[:, None]
                parts.append(padded)
    return np.stack(parts) if parts else np.empty((0, len(stars), width))


def _chosen(whole: FloatArray, starts: IntArray) -> IntArray:
    """Stars spread evenly over each host's residuals from a line common to all hosts."""
    slopes = np.linalg.lstsq(whole[:, :-1], whole[:, -1], rcond=None)[0]
    residual = whole[:, -1] - whole[:, :-1] @ slopes
    chosen = np.full((len(starts) - 1, robust.CANDIDATES), -1, dtype=np.int64)
    for host, start in enumerate(starts[:-1]):
        stop = starts[host + 1]
        n = stop - start
        order = start + np.argsort(residual[start:stop])
        few = min(n, robust.CANDIDATES)
        many = n >= robust.MANY
        spread = np.linspace(0.1, 0.9, _OF_MANY) if many else np.linspace(0.0, 1.0, few)
        places = np.round(spread * (n - 1)).astype(int)
        chosen[host, : len(places)] = order[places] - start
    return chosen
