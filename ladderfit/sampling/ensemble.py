"""`ensemble`: several independent ensembles of walkers on phi.

Each ensemble has a generator of its own and starts over-dispersed round the
modes.  The state of an ensemble is its positions, their log densities and the
state of its generator: whoever goes on from it continues bit for bit.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import emcee
import numpy as np
import numpy.typing as npt

from ladderfit.errors import SamplingError
from ladderfit.sampling.direct import Target, find_modes
from ladderfit.sampling.mode import LogDensity, Mode
from ladderfit.sampling.moves import moves

FloatArray = npt.NDArray[np.float64]

ENSEMBLES = 4
_WIDER = 2.0  # times the posterior's width, for the starting points
_BOX = 12.0  # widths round the mode
_LOOKS = 8  # dispersed points from which modes are sought
_TRIES = 30
_STARTS, _THETA = 1_000_000, 1_000_001  # places of the streams that belong to no ensemble


@dataclass(frozen=True)
class Layout:
    """How many ensembles, of how many walkers, and how many steps from one kept draw to the next.

    A *row* is one kept step of all ensembles: ``ensembles x walkers`` draws.
    """

    dimension: int
    ensembles: int
    walkers: int
    thin: int

    @property
    def per_row(self) -> int:
        """Draws in a row."""
        return self.ensembles * self.walkers


def layout(dimension: int, ensembles: int = ENSEMBLES) -> Layout:
    """The layout for a number of coordinates.

    The autocorrelation time of differential evolution is about three times the
    dimension, so that every dimension-th step loses next to nothing.
    """
    return Layout(dimension, ensembles, 4 * max(10, 2 * dimension), max(2, dimension))


@dataclass(frozen=True, eq=False)
class EnsembleState:
    """One ensemble at one moment.

    Attributes
    ----------
    z : array, shape (walkers, d)
    log_density : array, shape (walkers,)
    generator : tuple
        State of its Mersenne Twister, as numpy's RandomState gives it.
    """

    z: FloatArray
    log_density: FloatArray
    generator: tuple[Any, ...]


def stream(seed: int, place: int) -> np.random.SeedSequence:
    """The independent stream of random numbers at a place, from the run's seed."""
    return np.random.SeedSequence(seed, spawn_key=(place,))


def theta_generator(seed: int) -> np.random.Generator:
    """The generator for the exact draws of theta."""
    return np.random.default_rng(stream(seed, _THETA))


@dataclass(frozen=True, eq=False)
class Start:
    """Where the ensembles start, and the box in which nearly all draws will lie.

    Attributes
    ----------
    states : tuple of EnsembleState
    box : array, shape (2, d), or None
        None where the posterior has several modes.
    """

    states: tuple[EnsembleState, ...]
    box: FloatArray | None


def start(target: Target, plan: Layout, seed: int) -> Start:
    """Ensembles scattered round the modes, twice as wide as the posterior.

    The target is focused on the box, where it can be; whoever goes on from the
    states must focus it on the same one.

    Raises
    ------
    SamplingError
        If no starting points of finite density are found.
    """
    rng = np.random.default_rng(stream(seed, _STARTS))
    modes = find_modes(target, rng, others=_LOOKS)
    box = _box(modes) if len(modes) == 1 else None
    focus(target, box)
    states = []
    for place in range(plan.ensembles):
        z, value = _scattered(target.log_density, modes, plan.walkers, rng)
        twister = np.random.RandomState(np.random.MT19937(stream(seed, place)))
        states.append(EnsembleState(z, value, _state_of(twister)))
    return Start(tuple(states), box)


def focus(target: Target, box: FloatArray | None) -> None:
    """Have the target prepared for a box, shape (2, d)."""
    if box is not None and target.focus is not None:
        target.focus(box[0], box[1])


def _box(modes: Sequence[Mode]) -> FloatArray:
    reach = _BOX * np.sqrt(np.diag(modes[0].covariance))
    return np.stack([modes[0].point - reach, modes[0].point + reach])


def _state_of(twister: np.random.RandomState) -> tuple[Any, ...]:
    state = twister.get_state(legacy=True)
    return tuple(state)  # the key, the position, and a normal held back


def _scattered(
    log_density: LogDensity, modes: Sequence[Mode], size: int, rng: np.random.Generator
) -> tuple[FloatArray, FloatArray]:
    """Points of finite density; those without are drawn again, closer to their mode."""
    home = rng.integers(len(modes), size=size)
    centre = np.array([mode.point for mode in modes])[home]
    factor = np.array([np.linalg.cholesky(mode.covariance) for mode in modes])[home]
    width = np.full(size, _WIDER)
    z, value = centre.copy(), np.full(size, -np.inf)
    for _ in range(_TRIES):
        open_ = ~np.isfinite(value)
        if not open_.any():
            return z, value
        step = rng.standard_normal((int(open_.sum()), centre.shape[1]))
        moved = np.einsum("nij,nj->ni", factor[open_], step)
        z[open_] = centre[open_] + width[open_, None] * moved
        value[open_] = log_density(z[open_])
        width[open_] *= 0.8
    raise SamplingError(
        "too few starting points of finite density round the mode; "
        "check the priors' bounds against the data"
    )


def advance(
    log_density: LogDensity, plan: Layout, states: Sequence[EnsembleState]
) -> Iterator[tuple[EnsembleState, ...]]:
    """Move all ensembles on, without end; yields their states after every kept step.

    Parameters
    ----------
    log_density : callable
        Maps shape (b, d) to (b,); minus infinity is allowed, NaN is not.
    plan : Layout
    states : sequence of EnsembleState
        Where each ensemble stands.
    """
    streams = [_walk(log_density, plan, state) for state in states]
    while True:
        yield tuple(next(walk) for walk in streams)


def _walk(log_density: LogDensity, plan: Layout, state: EnsembleState) -> Iterator[EnsembleState]:
    sampler = emcee.EnsembleSampler(
        plan.walkers, plan.dimension, log_density, moves=moves(), vectorize=True
    )
    start = emcee.State(state.z, log_prob=state.log_density, random_state=state.generator)
    for now in sampler.sample(
        start, iterations=None, store=False, thin_by=plan.thin, skip_initial_state_check=True
    ):
        yield EnsembleState(now.coords.copy(), now.log_prob.copy(), now.random_state)
