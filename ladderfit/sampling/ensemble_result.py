"""From a chain of phi to a result: exact draws of theta, and what they are worth."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from ladderfit.ladder import Ladder
from ladderfit.posterior.determined import check_determined
from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.result import Diagnostics, Result, ordered
from ladderfit.sampling.chain_layout import Header
from ladderfit.sampling.chain_reading import Chain
from ladderfit.sampling.convergence import Goal, Report, report
from ladderfit.sampling.ensemble import Layout, theta_generator
from ladderfit.sampling.run import informed, prior_notes

FloatArray = npt.NDArray[np.float64]

_MOST_DRAWS = 400_000  # in a result; longer chains are thinned evenly
_SHORT_WARM_UP = 3.0  # autocorrelation times


def checked_posterior(ladder: Ladder) -> Posterior:
    """The posterior of a ladder whose distance scale is determined.

    Raises
    ------
    UndeterminedError
        If it is not.
    """
    joint = posterior(ladder)
    check_determined(joint)
    return joint


def phi_report(header: Header, z: FloatArray) -> Report:
    """What draws of phi are worth by themselves; `z` has shape (rows, ensembles, walkers, d).

    Ranks do not mind in which unit a coordinate is, so that the chain alone suffices.
    """
    series = np.moveaxis(z, (3, 1, 0, 2), (0, 1, 2, 3))
    return report(
        {
            name: np.abs(values) if folded else values
            for name, folded, values in zip(header.names, header.folded, series, strict=True)
        }
    )


def take_stock(
    joint: Posterior, plan: Layout, z: FloatArray, seed: int
) -> tuple[dict[str, FloatArray], Report]:
    """Exact draws of every parameter for every draw of phi, and a report on all of them.

    Parameters
    ----------
    joint : Posterior
    plan : Layout
    z : array, shape (rows, ensembles, walkers, d)
    seed : int
        The run's; theta has a stream of its own.

    Returns
    -------
    draws : dict
        Arrays of shape (ensembles * rows * walkers,), ensemble by ensemble.
    report : Report
    """
    stride = -(-z.shape[0] * plan.per_row // _MOST_DRAWS)
    kept = z[(len(z) - 1) % stride :: stride]
    flat = kept.swapaxes(0, 1).reshape(-1, plan.dimension)
    draws = ordered(joint.draw(flat, theta_generator(seed)))
    shape = (plan.ensembles, len(kept), plan.walkers)
    found = report({name: values.reshape(shape) for name, values in draws.items()})
    return draws, Report(z.shape[0] * plan.per_row, found.ess, found.rhat)


def ensemble_result(joint: Posterior, chain: Chain, goal: Goal) -> tuple[Result, Report]:
    """The result of a chain, as `direct` would give it: same names, units and order.

    Only draws after the warm-up count; there must be at least one row of them.
    """
    header, warm_up = chain.header, chain.commit.warm_up or 0
    draws, found = take_stock(joint, header.plan, chain.z[warm_up:], header.seed)
    diagnostics = Diagnostics(
        sampler="ensemble",
        seed=header.seed,
        ess=found.ess,
        rhat=found.rhat,
        informed=informed(joint.ladder, draws),
        notes=(
            *joint.ladder.notes,
            *_chain_notes(chain, found, goal),
            *prior_notes(joint.ladder, draws),
        ),
    )
    return Result(joint.ladder.choices, draws, diagnostics, joint.ladder), found


def _chain_notes(chain: Chain, found: Report, goal: Goal) -> list[str]:
    notes = []
    if not found.reaches(goal) or not found.agreed:
        notes.append(found.sentence(goal, going=False))
    rows, warm_up = chain.commit.kept, chain.commit.warm_up or 0
    if found.worst_ess > 0.0:
        times = warm_up / (rows * chain.header.plan.per_row / found.worst_ess)
        if times < _SHORT_WARM_UP:
            notes.append(
                f"The warm-up was only {times:.1f} autocorrelation times of {found.worst} long: "
                "the first draws may still remember where they started."
            )
    return notes
