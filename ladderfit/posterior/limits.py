"""Magnitude limits of hosts: each star counts with its density over its chance of detection.

Given everything in phi, a host with a limit is one integral over its modulus.  So
every coefficient that such a host's data depend on is in phi, and its stars are
summed one by one.  Where the limit acts on another band than the relation's, the
chance is conditional on the star's own difference between the two.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr

from ladderfit.kernels.arrow import Solution
from ladderfit.kernels.star_sums import IntArray
from ladderfit.kernels.truncation import truncated_hosts
from ladderfit.ladder import Ladder
from ladderfit.posterior.cepheids import Values
from ladderfit.posterior.frame import Frame
from ladderfit.posterior.star_terms import StarTerms, star_terms
from ladderfit.samples import FloatArray


@dataclass(frozen=True, eq=False)
class Limits:
    """The hosts with limits and their stars.

    Attributes
    ----------
    terms : StarTerms
        The stars of hosts with limits, sorted by host.
    headroom : array, shape (n,)
        Limit minus magnitude in its band [mag].
    softness : float
    """

    terms: StarTerms
    headroom: FloatArray
    softness: float

    @property
    def runs(self) -> IntArray:
        """Host, first star and one past the last, shape (r, 3)."""
        return self.terms.runs

    def log_factor(self, solution: Solution, values: Values) -> FloatArray:
        """What the limits add to the log density, shape (b,)."""
        return np.asarray(truncated_hosts(self.runs, *self._inputs(solution, values)).sum(axis=1))

    def redraw(
        self, solution: Solution, values: Values, local: FloatArray, white: FloatArray
    ) -> None:
        """Put draws under the limits into the locals of these hosts, in place.

        Parameters
        ----------
        solution : Solution
        values : callable
        local, white : array, shape (b, h)
            Locals of all hosts, and the standard normals they were drawn with.
        """
        hosts = self.runs[:, 0]
        share = ndtr(white[:, hosts])
        local[:, hosts] = truncated_hosts(self.runs, *self._inputs(solution, values), share)

    def _inputs(
        self, solution: Solution, values: Values
    ) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
        moments, coefficients, hosts = solution.moments, solution.coefficients, self.runs[:, 0]
        cross, precision = moments.cross[:, hosts], moments.local[:, hosts]
        known = (cross[:, :, :-1] @ coefficients[:, :, None])[:, :, 0]
        centre = (cross[:, :, -1] - known) / precision
        lead, width = self.leads(values, coefficients)
        return centre, precision, lead, width

    def leads(self, values: Values, coefficients: FloatArray) -> tuple[FloatArray, FloatArray]:
        """The local at which each star would be at the limit, and its width, shape (b, n)."""
        rows = self.terms.at(values)
        mean = coefficients @ self.terms.columns.T
        width = np.sqrt(1.0 / rows.weight + self.softness**2)
        return rows.y + self.headroom - mean, width


def limits_of(ladder: Ladder, frame: Frame, names: tuple[str, ...]) -> Limits | None:
    """The limits of a ladder, or None; `names` are the system's coefficients."""
    section, stars = ladder.choices.cepheids, ladder.cepheids
    if section is None or section.completeness is None or stars is None or stars.headroom is None:
        return None
    chosen = np.flatnonzero(np.isfinite(stars.headroom))
    if chosen.size == 0:
        return None
    hosts = stars.host[chosen]
    starts = np.flatnonzero(np.diff(hosts, prepend=-1))
    runs = np.stack([hosts[starts], starts, np.append(starts[1:], chosen.size)], axis=1)
    terms = star_terms(ladder, frame, names)
    if terms.nuisances:
        raise TypeError("limits where hosts have nuisances")  # refused by the choices
    softness = section.completeness.softness
    mine = terms.only(chosen, runs.astype(np.int64))
    return Limits(mine, stars.headroom[chosen], softness)
