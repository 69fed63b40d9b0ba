"""What is ranked: parameters, moduli, and numbers that depend on several at once."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from ladderfit.ladder import Ladder
from ladderfit.names import base_name, with_group
from ladderfit.samples import FloatArray

LONG_PERIOD = 30.0  # d
MAGNITUDE = f"magnitude at {LONG_PERIOD:g} d"
MEAN_MODULUS = "mean modulus of hosts"
DISTANCE = "distance from the centre"
_RIDGE = 1e-9


def ranks(
    ladder: Ladder, draws: Mapping[str, FloatArray], truth: Mapping[str, float], ranked: int
) -> dict[str, int]:
    """How many of the first draws lie below the truth, by quantity.

    The others give centre and covariance to the distance from the centre, so that
    truth and ranked draws are treated alike.

    Parameters
    ----------
    ladder : Ladder
        That was fitted.
    draws : mapping of str to array, shape (n,)
    truth : mapping of str to float
    ranked : int
        How many draws are ranked.
    """
    first = {name: values[:ranked] for name, values in draws.items()}
    found = {
        name: int(np.sum(values < truth[name]))
        for name, values in first.items()
        if name in truth and np.ptp(values) > 0.0
    }
    single = {name: np.array([value]) for name, value in truth.items()}
    true = _combined(ladder, single)
    for name, values in _combined(ladder, first).items():
        found[name] = int(np.sum(values < true[name][0]))
    distance = _distance_rank(draws, truth, ranked)
    return found if distance is None else {**found, DISTANCE: distance}


def joint_names(ladder: Ladder, draws: Mapping[str, FloatArray]) -> tuple[str, ...]:
    """Names of the quantities that depend on several parameters."""
    return (*_combined(ladder, draws), DISTANCE)


def _combined(ladder: Ladder, values: Mapping[str, FloatArray]) -> dict[str, FloatArray]:
    found: dict[str, FloatArray] = {}
    if "zero_point" in values and "slope" in values:
        dex = np.log10(LONG_PERIOD / ladder.choices.relation.pivot)
        found[MAGNITUDE] = values["zero_point"] + values["slope"] * dex
    if ladder.peaks is not None:
        names = [with_group("modulus", ladder.hosts[h]) for h in np.unique(ladder.peaks.host)]
        found[MEAN_MODULUS] = np.mean([values[name] for name in names], axis=0)
    if "peak_magnitude" in values and "hubble_constant" in values and ladder.velocities is None:
        rate = 5.0 * np.log10(np.maximum(values["hubble_constant"], 1e-300))
        found["intercept"] = 0.2 * (rate - values["peak_magnitude"]) - 5.0
    return found


def _distance_rank(
    draws: Mapping[str, FloatArray], truth: Mapping[str, float], ranked: int
) -> int | None:
    """Rank of the truth's distance from the posterior's centre, in its own covariance."""
    names = [
        name
        for name, values in draws.items()
        if name in truth and np.ptp(values) > 0.0 and base_name(name) != "modulus"
    ]
    if len(names) < 2:
        return None
    points = np.stack([draws[name] for name in names], axis=1)
    inner = points[ranked:]
    centre, scale = inner.mean(axis=0), inner.std(axis=0, ddof=1)
    matrix = np.corrcoef(inner.T) + _RIDGE * np.eye(len(names))

    def size(values: FloatArray) -> FloatArray:
        off = (values - centre) / scale
        return np.asarray(np.sum(off * np.linalg.solve(matrix, off.T).T, axis=1))

    true = size(np.array([[truth[name] for name in names]]))[0]
    return int(np.sum(size(points[:ranked]) < true))
