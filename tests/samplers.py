"""Both samplers on one ladder, and how to hold two sets of draws against each other."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from ladderfit.ladder import Ladder
from ladderfit.names import base_name
from ladderfit.result import Result
from ladderfit.sampling.convergence import Goal
from ladderfit.sampling.live import lay_out
from ladderfit.sampling.run_folder import RunFolder
from ladderfit.sampling.worker import Stopper, run
from ladderfit.store import read_result


def by_ensemble(ladder: Ladder, folder: Path, *, goal: Goal, seed: int = 1) -> Result:
    """Draw with the worker's own code, in this process."""
    return worked(lay_out(ladder, folder, seed=seed, goal=goal))


def worked(folder: RunFolder) -> Result:
    """Work in a folder until its goal is reached."""
    assert run(folder, Stopper(folder)).state == "finished"
    return read_result(folder.path)


def free(result: Result) -> list[str]:
    """Parameters that are not held fixed."""
    return [name for name in result.draws if result.sd(name) > 0.0]


def marginal_faults(one: Result, two: Result) -> list[str]:
    """Means apart by over 4 combined Monte Carlo errors, deviations by over 5 %.

    Where heavy tails make a deviation's own Monte Carlo error so large that 5 % is less
    than 3.2 of them, as it is for a normal at 4,000 effective draws each, 3.2 count.
    """
    faults = []
    for name in free(one):
        error = np.hypot(*(r.sd(name) / np.sqrt(r.diagnostics.ess[name]) for r in (one, two)))
        gap = one.mean(name) - two.mean(name)
        if abs(gap) > 4.0 * error:
            faults.append(f"mean of {name}: {gap / error:.1f} errors apart")
        ratio = one.sd(name) / two.sd(name)
        allowed = max(0.05, 3.2 * np.hypot(*(deviation_error(r, name) for r in (one, two))))
        if abs(np.log(ratio)) > allowed:
            faults.append(f"deviation of {name}: ratio {ratio:.3f}, allowed {allowed:.3f}")
    return faults


def deviation_error(result: Result, name: str, blocks: int = 20) -> float:
    """Relative Monte Carlo error of a standard deviation, from blocks of neighbouring draws."""
    square = (result.draws[name] - result.mean(name)) ** 2
    by_block = np.array([part.mean() for part in np.array_split(square, blocks)])
    return float(0.5 * by_block.std(ddof=1) / np.sqrt(blocks) / square.mean())


def covariance_faults(one: Result, two: Result) -> list[str]:
    """Correlations apart by over 4.5 of their errors (Fisher's z)."""
    names = free(one)
    table = [np.corrcoef([r.draws[name] for name in names]) for r in (one, two)]
    angle = [
        np.arctanh(np.clip(np.atleast_2d(t) * (1.0 - np.eye(len(names))), -0.999999, 0.999999))
        for t in table
    ]
    ess = np.array([[r.diagnostics.ess[name] for name in names] for r in (one, two)])
    faults = []
    for i, name in enumerate(names):
        for j in range(i):
            error = np.sqrt(np.sum(1.0 / np.minimum(ess[:, i], ess[:, j])))
            gap = (angle[0] - angle[1])[i, j] / error
            if abs(gap) > 4.5:
                faults.append(f"correlation of {name} and {names[j]}: {gap:.1f} errors apart")
    return faults


def joint_p_value(
    one: Result, two: Result, names: tuple[str, str], size: int = 300, seed: int = 1
) -> float:
    """Permutation p-value of the energy distance of two parameters' joint draws.

    Szekely & Rizzo (2013, J. Stat. Plan. Inference 143, 1249).  Draws are picked far
    apart, so that they count as independent.
    """
    rng = np.random.default_rng(seed)
    points = []
    for result in (one, two):
        chosen = rng.choice(result.size, size, replace=False)
        points.append(np.stack([result.draws[name][chosen] for name in names], axis=1))
    both = np.concatenate(points)
    root = np.linalg.cholesky(np.cov(points[1].T))
    both = np.linalg.solve(root, (both - both.mean(axis=0)).T).T
    distance = np.linalg.norm(both[:, None] - both[None], axis=2)

    def energy(order: np.ndarray) -> float:
        d = distance[np.ix_(order, order)]
        across, within = d[:size, size:].mean(), d[:size, :size].mean() + d[size:, size:].mean()
        return float(2.0 * across - within)

    observed = energy(np.arange(2 * size))
    drawn = [energy(rng.permutation(2 * size)) for _ in range(199)]
    return (1 + sum(value >= observed for value in drawn)) / 200.0


def most_correlated(result: Result) -> tuple[str, str]:
    """The two headline parameters whose joint distribution says most."""
    names = [name for name in free(result) if base_name(name) != "modulus"]
    table = np.abs(np.corrcoef([result.draws[name] for name in names]))
    i, j = np.unravel_index(np.argmax(table - 2.0 * np.eye(len(names))), table.shape)
    return names[i], names[j]
