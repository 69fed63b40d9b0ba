"""Exact draws of the hosts' locals under deviations that are not normal; compiled.

The nodes of the integral give a density that is linear between finer nodes, with the
logarithm interpolated by cubics.  Draws from it are accepted with the ratio of the
true density to 1.2 times this one, so that what is accepted follows the true density
however coarse the nodes are, as long as the ratio stays below 1.2.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled
from ladderfit.kernels.robust import MOST_NODES, log_local, march, workspace
from ladderfit.kernels.robust_rows import PREPARED, HostStars, prepare

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
SeedArray = npt.NDArray[np.uint64]

_FINE = 6  # finer nodes to a step
_ENVELOPE = 1.2
_TRIES = 10_000

_STRIDE = np.uint64(0x9E3779B97F4A7C15)
_FIRST, _SECOND = np.uint64(0xBF58476D1CE4E5B9), np.uint64(0x94D049BB133111EB)
_S30, _S27, _S31, _S11 = np.uint64(30), np.uint64(27), np.uint64(31), np.uint64(11)


@compiled
def _uniform(state: SeedArray) -> float:
    """The next number between 0 and 1 (SplitMix64: Steele, Lea & Flood 2014)."""
    state[0] += _STRIDE
    z = state[0]
    z = (z ^ (z >> _S30)) * _FIRST
    z = (z ^ (z >> _S27)) * _SECOND
    z = z ^ (z >> _S31)
    return (float(z >> _S11) + 0.5) / 9007199254740992.0


@compiled
def _between(nodes: FloatArray, first: int, stop: int, j: int, x: float) -> float:
    """Log density a fraction x of the way from node j to the next."""
    if j == first or j + 2 >= stop:
        return float(nodes[j] + x * (nodes[j + 1] - nodes[j]))
    before, here, there, after = nodes[j - 1], nodes[j], nodes[j + 1], nodes[j + 2]
    return float(
        -before * x * (x - 1.0) * (x - 2.0) / 6.0
        + here * (x * x - 1.0) * (x - 2.0) / 2.0
        - there * x * (x + 1.0) * (x - 2.0) / 2.0
        + after * x * (x * x - 1.0) / 6.0
    )


@compiled
def _fill(
    nodes: FloatArray, first: int, stop: int, top: float, fine: FloatArray, area: FloatArray
) -> int:
    """Densities at the finer nodes and the area below each; returns the number of cells."""
    cells = (stop - first - 1) * _FINE
    for i in range(cells + 1):
        j = min(first + i // _FINE, stop - 2)
        x = (i - (j - first) * _FINE) / _FINE
        fine[i] = math.exp(_between(nodes, first, stop, j, x) - top)
        area[i] = 0.0 if i == 0 else area[i - 1] + 0.5 * (fine[i - 1] + fine[i])
    return cells


@compiled
def _place(fine: FloatArray, area: FloatArray, cells: int, share: float) -> tuple[float, float]:
    """Where a share of the area lies below, in cells, and the density there."""
    wanted = share * area[cells]
    low, high = 0, cells
    while high - low > 1:
        middle = (low + high) // 2
        if area[middle] <= wanted:
            low = middle
        else:
            high = middle
    rest, here, rise = wanted - area[low], fine[low], fine[low + 1] - fine[low]
    root = math.sqrt(max(here * here + 2.0 * rise * rest, 0.0))
    inside = min(2.0 * rest / (here + root), 1.0) if here + root > 0.0 else 0.0
    return low + inside, here + rise * inside


@compiled
def _draw_one(
    rows: FloatArray,
    n: int,
    chosen: IntArray,
    A: float,
    B: float,
    work: FloatArray,
    nodes: FloatArray,
    fine: FloatArray,
    area: FloatArray,
    state: SeedArray,
) -> float:
    origin, step, first, stop = march(rows, n, chosen, A, B, work, nodes)
    top = -np.inf
    for j in range(first, stop):
        top = max(top, nodes[j])
    cells = _fill(nodes, first, stop, top, fine, area)
    u = origin
    for _ in range(_TRIES):
        place, density = _place(fine, area, cells, _uniform(state))
        u = origin + (first - MOST_NODES + place / _FINE) * step
        true = math.exp(log_local(u, rows, n, A, B) - top)
        if _uniform(state) * _ENVELOPE * density < true:
            break
    return u


@compiled
def draw_hosts(
    stars: HostStars,
    shape: FloatArray,
    coefficients: FloatArray,
    local: FloatArray,
    linear: FloatArray,
    seeds: SeedArray,
    out: FloatArray,
) -> None:
    """One draw of every host's local into `out`, shape (b, h).

    Shapes as in `ladderfit.kernels.robust.integrate_hosts`; `seeds` has shape (b, h).
    """
    hosts = len(stars.starts) - 1
    longest = 0
    for h in range(hosts):
        longest = max(longest, stars.starts[h + 1] - stars.starts[h])
    rows = np.empty((longest, PREPARED))
    nodes, work = np.empty(2 * MOST_NODES), workspace(longest)
    fine, area = np.empty(2 * MOST_NODES * _FINE + 1), np.empty(2 * MOST_NODES * _FINE + 1)
    state = np.empty(1, np.uint64)
    for b in range(len(out)):
        for h in range(hosts):
            state[0] = seeds[b, h]
            A, B = local[b, h], linear[b, h]
            start, stop = stars.starts[h], stars.starts[h + 1]
            if start == stop:
                angle = 2.0 * math.pi * _uniform(state)
                normal = math.sqrt(-2.0 * math.log(_uniform(state))) * math.cos(angle)
                out[b, h] = B / A + normal / math.sqrt(A)
                continue
            prepare(stars, shape[b], coefficients[b], start, stop, rows)
            out[b, h] = _draw_one(
                rows, stop - start, stars.chosen[h], A, B, work, nodes, fine, area, state
            )
