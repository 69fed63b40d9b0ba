"""`direct`: independent draws of phi by importance sampling round the mode.

The mode and its curvature give a Student-t, slightly widened and mixed with a
wider one; draws from it are weighted, the weights' tail is Pareto-smoothed, and
the weights are resampled away.  Where the first proposal is poor it is adapted
to what was found.  The Pareto k says whether the result may be trusted, and the
mean weight is the evidence.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ladderfit.diagnostics import TRUSTED_K, smoothed_weights, weights_ess
from ladderfit.errors import SamplingError
from ladderfit.sampling.mode import LogDensity, Mode, find_modes_from
from ladderfit.sampling.proposal import Component, Proposal, component

FloatArray = npt.NDArray[np.float64]
WithTheta = Callable[[FloatArray, np.random.Generator], tuple[FloatArray, FloatArray]]
Progress = Callable[[str, float], None]

_FREEDOM = 12.0
_WIDEN, _WIDE = 1.03, 2.0  # widths of the two parts of the proposal, in those of the mode
_WIDE_SHARE = 0.06
_PILOT = 600
_ROUNDS = 4
_GOOD_EFFICIENCY = 0.5
_GOOD_K = 0.5
_OVERSAMPLE = 1.25
_NEARLY = 0.15  # of the pool: a difference that does not matter
_BOX = 12.0  # widths round the mode
_MODE_DISTANCE = 5.0
_MODE_MASS = 1e-4


@dataclass(frozen=True)
class Near:
    """A point and widths to start from, shape (d,) each."""

    point: FloatArray
    width: FloatArray


@dataclass(frozen=True)
class Target:
    """A log density and where to look for it.

    Attributes
    ----------
    log_density : callable
        Maps shape (b, d) to (b,).
    with_theta : callable, optional
        Maps z, shape (b, d), and a generator to log densities, shape (b,), and one draw of
        all that z leaves open for each, shape (b, q): for targets where that costs little.
    start, scale : array, shape (d,)
        A starting point, and the width of the prior in each coordinate.
    folded : array of bool, shape (d,)
        Coordinates of which only the size counts.
    focus : callable, optional
        Told the corners of the box in which nearly all draws will lie.
    near : Near, optional
        Where a similar density had its mode: then other modes are not looked for.
    pool : int, optional
        How many draws a similar density was given weights for: kept where it fits, so
        that the two share their random numbers.
    """

    log_density: LogDensity
    start: FloatArray
    scale: FloatArray
    folded: npt.NDArray[np.bool_]
    focus: Callable[[FloatArray, FloatArray], None] | None = None
    near: Near | None = None
    pool: int | None = None
    with_theta: WithTheta | None = None


@dataclass(frozen=True)
class DirectDraws:
    """Independent, equally weighted draws.

    Attributes
    ----------
    z : array, shape (n, d)
    pareto_k : float
        Of the weights before resampling.
    efficiency : float
        Effective draws per proposal.
    ess : float
        Effective number of the `n` draws.
    log_evidence, log_evidence_error : float
    modes : tuple of Mode
        Every separate mode found, by mass.
    pool : int
        How many draws had weights.
    theta : array, shape (n, q), or None
        What was drawn along with each, if the target does that.
    """

    z: FloatArray
    pareto_k: float
    efficiency: float
    ess: float
    log_evidence: float
    log_evidence_error: float
    modes: tuple[Mode, ...]
    pool: int = 0
    theta: FloatArray | None = None

    @property
    def trusted(self) -> bool:
        """Whether the weights are light enough."""
        return self.pareto_k <= TRUSTED_K


def draw_direct(
    target: Target, draws: int, rng: np.random.Generator, progress: Progress | None = None
) -> DirectDraws:
    """Draw from `target`.

    Parameters
    ----------
    target : Target
    draws : int
        How many draws to return.
    rng : numpy Generator
    progress : callable, optional
        Told the stage and the fraction done.

    Raises
    ------
    SamplingError
        If no starting point has a finite density.
    """
    tell = progress if progress is not None else _silent
    if len(target.start) == 0:
        return _nothing_to_draw(target, draws)
    tell("finding the mode", 0.0)
    modes = find_modes(target, rng)
    if target.focus is not None and len(modes) == 1:
        reach = _BOX * np.sqrt(np.diag(modes[0].covariance))
        target.focus(modes[0].point - reach, modes[0].point + reach)
    tell("drawing", 0.2)
    proposal = _first_proposal(modes, target.folded)
    for left in reversed(range(_ROUNDS)):
        pool, good = _pool(target, proposal, draws, rng, last=left == 0)
        if good:
            break
        weights, _ = smoothed_weights(pool.log_weight)
        proposal = _adapted(proposal, pool.z, weights, target.folded)
    tell("drawing", 1.0)
    return _resampled(pool, draws, rng, modes)


def find_modes(target: Target, rng: np.random.Generator, others: int = 2) -> tuple[Mode, ...]:
    """The modes reached from the start and from `others` dispersed points, by mass."""
    if target.near is not None:
        near = target.near
        [mode] = find_modes_from(target.log_density, near.point[None, :], near.width)
        if mode.converged:
            return (_fold(mode, target.folded),)
    spread = 0.7 * target.scale * rng.standard_normal((others, len(target.start)))
    starts = np.array([target.start, *(target.start + spread)])
    starts[:, target.folded] = np.abs(starts[:, target.folded])
    usable = np.isfinite(target.log_density(starts))
    if not usable.any():
        raise SamplingError(
            "the posterior has no finite density at any starting point; "
            "check the priors' bounds against the data"
        )
    found = find_modes_from(target.log_density, starts[usable], 0.3 * target.scale)
    folded = [_fold(mode, target.folded) for mode in found]
    folded.sort(key=lambda mode: -mode.log_mass)
    kept = [folded[0]]
    for mode in folded[1:]:
        light = mode.log_mass < folded[0].log_mass + np.log(_MODE_MASS)
        if not light and all(_apart(mode, other) for other in kept):
            kept.append(mode)
    return tuple(kept)


def _nothing_to_draw(target: Target, draws: int) -> DirectDraws:
    """All is in theta: the density of the empty phi is the evidence, exactly."""
    z = np.empty((draws, 0))
    return DirectDraws(z, 0.0, 1.0, float(draws), float(target.log_density(z[:1])[0]), 0.0, ())


def _silent(stage: str, fraction: float) -> None:
    del stage, fraction


def _fold(mode: Mode, folded: npt.NDArray[np.bool_]) -> Mode:
    sign = np.where(folded & (mode.point < 0.0), -1.0, 1.0)
    covariance = mode.covariance * np.outer(sign, sign)
    return Mode(mode.point * sign, mode.log_density, covariance, mode.converged)


def _apart(mode: Mode, other: Mode) -> bool:
    gap = mode.point - other.point
    distance = np.sqrt(min(gap @ np.linalg.solve(m.covariance, gap) for m in (mode, other)))
    return bool(distance > _MODE_DISTANCE)


def _first_proposal(modes: tuple[Mode, ...], folded: npt.NDArray[np.bool_]) -> Proposal:
    mass = np.array([mode.log_mass for mode in modes])
    share = np.maximum(np.exp(mass - mass.max()), 0.05)
    components = []
    for mode, part in zip(modes, share / share.sum(), strict=True):
        for widen, portion in ((_WIDEN, 1.0 - _WIDE_SHARE), (_WIDE, _WIDE_SHARE)):
            components.append(
                component(
                    mode.point,
                    mode.covariance,
                    widen=widen,
                    freedom=_FREEDOM,
                    share=float(part * portion),
                )
            )
    return Proposal(tuple(components), folded)


@dataclass(frozen=True)
class _Pool:
    """Draws of the proposal, their log weights, and theta where it came along."""

    z: FloatArray
    log_weight: FloatArray
    theta: FloatArray | None

    def __add__(self, other: _Pool) -> _Pool:
        both = self.theta is not None and other.theta is not None
        return _Pool(
            np.concatenate([self.z, other.z]),
            np.concatenate([self.log_weight, other.log_weight]),
            np.concatenate([self.theta, other.theta]) if both else None,
        )


def _weigh(
    target: Target, proposal: Proposal, size: int, rng: np.random.Generator, *, along: bool = True
) -> _Pool:
    z = proposal.draw(rng, size)
    theta = None
    if along and target.with_theta is not None:
        log_density, theta = target.with_theta(z, rng)
    else:
        log_density = target.log_density(z)
    log_weight = log_density - proposal.log_density(z)
    _need_finite(float(np.max(log_weight)))
    return _Pool(z, log_weight, theta)


def _need_finite(value: float) -> None:
    if not np.isfinite(value):
        raise SamplingError(
            "no draw has a finite density; look for absurd numbers in the tables, "
            "and check the priors' bounds against the data"
        )


def _pool(
    target: Target, proposal: Proposal, draws: int, rng: np.random.Generator, *, last: bool
) -> tuple[_Pool, bool]:
    """Weighted draws, and whether they are good: a pilot, and where it is good or the last, all."""
    found = _weigh(target, proposal, _PILOT, rng)
    weights, k = smoothed_weights(found.log_weight)
    efficiency = weights_ess(weights) / len(found.z)
    _need_finite(efficiency)
    if not last and (efficiency < _GOOD_EFFICIENCY or k > _GOOD_K):
        return found, False
    pool = int(np.ceil(_OVERSAMPLE * draws / max(efficiency, 0.1)))
    if target.pool is not None and abs(pool - target.pool) <= _NEARLY * pool:
        pool = target.pool
    if pool > _PILOT:
        along = efficiency >= _GOOD_EFFICIENCY  # else most of theta would be thrown away
        found = found + _weigh(target, proposal, pool - _PILOT, rng, along=along)
    return found, last or smoothed_weights(found.log_weight)[1] < _GOOD_K


def _adapted(
    proposal: Proposal, z: FloatArray, weights: FloatArray, folded: npt.NDArray[np.bool_]
) -> Proposal:
    """Add a component with the weighted mean and covariance, mirrored where draws reach zero."""
    centre = weights @ z
    width = np.sqrt(np.maximum(weights @ (z - centre) ** 2, 1e-300))
    mirrored = folded & (centre < 2.0 * width)
    centre = np.where(mirrored, 0.0, centre)
    gap = z - centre
    covariance = (gap * weights[:, None]).T @ gap
    covariance[mirrored] = np.where(np.eye(len(centre))[mirrored] > 0, covariance[mirrored], 0.0)
    covariance[:, mirrored] = covariance[mirrored].T
    covariance += np.diag(1e-12 + 1e-6 * np.diag(covariance))
    fresh = (
        component(centre, covariance, widen=1.1, freedom=_FREEDOM / 2.0, share=0.6),
        component(centre, covariance, widen=_WIDE, freedom=_FREEDOM / 2.0, share=0.1),
    )
    old = tuple(
        Component(c.centre, c.factor, freedom=c.freedom, share=0.3 * c.share)
        for c in proposal.components
    )
    return Proposal((*fresh, *old), proposal.folded)


def _resampled(
    pool: _Pool, draws: int, rng: np.random.Generator, modes: tuple[Mode, ...]
) -> DirectDraws:
    """Resample the weights away (systematic resampling, Kitagawa 1996) and take stock."""
    weights, k = smoothed_weights(pool.log_weight)
    pool_ess, size = weights_ess(weights), len(weights)
    top = float(np.max(pool.log_weight))
    ratio = np.exp(pool.log_weight - top)
    mean = float(ratio.mean())
    relative_error = float(ratio.std() / (mean * np.sqrt(len(ratio))))
    points = (rng.uniform() + np.arange(draws)) / draws
    chosen = np.minimum(np.searchsorted(np.cumsum(weights), points), size - 1)
    count = np.bincount(chosen, minlength=size)
    kish = draws**2 / float(np.sum(count.astype(float) ** 2))
    chosen = rng.permutation(chosen)
    return DirectDraws(
        z=pool.z[chosen],
        pareto_k=k,
        efficiency=pool_ess / size,
        ess=min(kish, pool_ess),
        log_evidence=top + float(np.log(mean)),
        log_evidence_error=relative_error,
        modes=modes,
        pool=size,
        theta=None if pool.theta is None else pool.theta[chosen],
    )
