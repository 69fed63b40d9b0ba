"""From what objects do given phi to shifts of the posterior: importance weights, or a refit.

The posterior of phi without an object is that with it, over the object's predictive
density; the weights' tail is smoothed (Vehtari et al. 2017, Stat. Comput. 27, 1413;
Vehtari et al. 2024, JMLR 25, 72).  Everything Gaussian is integrated beforehand, so
that the weights are those of phi alone.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from scipy.special import logsumexp

from ladderfit.diagnostics import TRUSTED_K, smoothed_weights
from ladderfit.errors import UndeterminedError
from ladderfit.influence.given import Given, Taken
from ladderfit.influence.rebuilding import posterior_without
from ladderfit.influence.without import Left
from ladderfit.posterior.determined import check_determined
from ladderfit.posterior.joint import Posterior
from ladderfit.sampling.direct import Near
from ladderfit.sampling.run import drawn, target

REWEIGHTED, REFITTED, UNDETERMINED = "reweighted", "refitted", "undetermined"
NOT_TRUSTED = "not trusted"
_NARROWEST = 1e-4  # of the prior's width: the least first step


@dataclass(frozen=True)
class Moved:
    """What taking one object out does.

    Attributes
    ----------
    how : str
        reweighted; refitted, where the weights are too heavy; undetermined, where the
        ladder without it leaves the distance scale open; not trusted, where the
        weights are too heavy and a refit was not asked for or is no better.
    k : float
        Pareto k of the weights.
    elpd : float
        Log density of the object's data given all others.
    shift, error : mapping of str to float
        By target: change of its mean, and the Monte Carlo error of that.
    """

    how: str
    k: float
    elpd: float
    shift: Mapping[str, float]
    error: Mapping[str, float]


def reweighted(given: Given, taken: Taken, thinning: float) -> list[Moved]:
    """Shifts by importance weights, one for each object.

    Parameters
    ----------
    given : Given
    taken : Taken
    thinning : float
        Draws per effective draw.
    """
    found = []
    for place in range(taken.log_predictive.shape[1]):
        density = taken.log_predictive[:, place]
        weights, k = smoothed_weights(-density)
        shift, error = {}, {}
        for name, base in given.base.items():
            new = taken.expected[name][:, place]
            centre = float(weights @ new)
            shift[name] = centre - float(base.mean())
            part = len(weights) * weights * (new - centre) - (base - base.mean())
            error[name] = float(np.sqrt(np.mean(part**2) * thinning / len(weights)))
        with np.errstate(divide="ignore"):
            elpd = float(logsumexp(np.log(weights) + density))
        how = REWEIGHTED if k <= TRUSTED_K else NOT_TRUSTED
        found.append(Moved(how, k, elpd, shift, error))
    return found


def refitted(given: Given, left: Left, before: Moved, seed: int, ess: float) -> Moved:
    """The shift from an exact refit.

    Parameters
    ----------
    given : Given
    left : Left
        What is left out.
    before : Moved
        As the weights have it.
    seed : int
    ess : float
        Effective number of the draws of `given`.
    """
    nothing = dict.fromkeys(given.base, float("nan"))
    rest = _determined(given, left)
    if rest is None:
        return Moved(UNDETERMINED, before.k, float("nan"), nothing, nothing)
    aim = target(rest)
    same = rest.split.phi_names == given.joint.split.phi_names
    if same and len(aim.start):
        widths = np.maximum(given.z.std(axis=0), _NARROWEST * aim.scale)
        aim = replace(aim, near=Near(given.z.mean(axis=0), widths))
    _, found = drawn(rest, aim, seed, max(len(given.z), 1))
    alone = Given(rest, found.z, given.targets)
    shift, error = {}, {}
    for name, base in given.base.items():
        new = alone.base[name]
        shift[name] = float(new.mean() - base.mean())
        error[name] = float(np.sqrt(np.var(new) / found.ess + np.var(base) / ess))
    elpd = before.elpd
    if same:
        ratio = given.joint.log_density(found.z) - rest.log_density(found.z)
        elpd = float(logsumexp(ratio) - np.log(len(ratio)))
    how = REFITTED if found.trusted else NOT_TRUSTED
    return Moved(how, before.k, elpd, shift, error)


def undetermined_without(given: Given, left: Left) -> bool:
    """Whether the ladder without some objects leaves a target or the distance scale open."""
    return _determined(given, left) is None


def _determined(given: Given, left: Left) -> Posterior | None:
    """The posterior without some objects; None where it leaves a target or the scale open."""
    rest = posterior_without(given.joint, left)
    parts = rest.split
    known = {*parts.coefficients, *parts.phi_names, *parts.fixed}
    if not known.issuperset(given.targets):
        return None
    try:
        check_determined(rest)
    except UndeterminedError:
        return None
    return rest
