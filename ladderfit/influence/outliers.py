"""Cepheids whose deviations are not normal, each taken out of its host's integral.

Given phi, which then holds every coefficient that hosts depend on, hosts are
independent: only the integral over the star's own host changes.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from ladderfit.influence.given import Given
from ladderfit.kernels.robust import HostStars, integrate_hosts
from ladderfit.posterior.robust import RobustHosts
from ladderfit.samples import FloatArray, IntArray


def log_ratios(given: Given, robust: RobustHosts) -> Iterator[tuple[int, int, FloatArray]]:
    """Every star: its place, its host, and its log density given all others, shape (s,).

    A star that is all its host has is passed over.
    """
    total, coefficients = given.solution.moments, given.solution.coefficients
    known = np.einsum("shk,sk->sh", total.cross[:, :, :-1], coefficients)
    linear = total.cross[:, :, -1] - known
    shape, stars = robust.shape(given.value), robust.stars
    coefficients = np.ascontiguousarray(coefficients)
    for host, (start, stop) in enumerate(zip(stars.starts[:-1], stars.starts[1:], strict=True)):
        own = np.ascontiguousarray(total.local[:, [host]])
        pull = np.ascontiguousarray(linear[:, [host]])

        rows = np.arange(start, stop)
        if len(rows) == 1 and not np.all(own > 0.0):
            continue
        rest = [rows, *(rows[rows != star] for star in rows)]
        whole: FloatArray | None = None
        for star, left in zip((-1, *rows.tolist()), rest, strict=True):
            found = np.zeros(len(given.z))
            integrate_hosts(some(stars, host, left), shape, coefficients, own, pull, found)
            if whole is None:
                whole = found
            else:
                yield star, host, whole - found


def some(stars: HostStars, host: int, rows: IntArray) -> HostStars:
    """Some rows of one host, as the only host."""
    start = int(stars.starts[host])
    tried = stars.chosen[host]
    places = np.searchsorted(rows, tried[tried >= 0] + start)
    stay = np.isin(tried[tried >= 0] + start, rows)
    chosen = np.full((1, len(tried)), -1, dtype=np.int64)
    chosen[0, : int(stay.sum())] = places[stay]
    return HostStars(
        y=stars.y[rows],
        variance=stars.variance[rows],
        columns=np.ascontiguousarray(stars.columns[rows]),
        sensitivity=np.ascontiguousarray(stars.sensitivity[:, rows]),
        family=stars.family[rows],
        kinds=stars.kinds,
        starts=np.array([0, len(rows)], dtype=np.int64),
        chosen=chosen,
    )
