"""The joint posterior of a ladder: log density of phi, and exact draws of theta given phi."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import partial
from typing import Protocol

import numpy as np

from ladderfit.kernels.arrow import Moments, Rows, Solution, no_moments, solve
from ladderfit.kernels.compiling import side_by_side
from ladderfit.kernels.reduced import reduced
from ladderfit.ladder import Ladder
from ladderfit.names import with_group
from ladderfit.posterior.cepheids import Block, ScatterBlock, noisy_block, plain_rows
from ladderfit.posterior.coupled import (
    CoupledBlock,
    TwoScatterBlock,
    coupled_hosts,
    supernova_block,
    supernova_data,
)
from ladderfit.posterior.errors_in_inputs import input_errors
from ladderfit.posterior.frame import Frame, host_frame
from ladderfit.posterior.known_rows import known_rows
from ladderfit.posterior.limits import Limits, limits_of
from ladderfit.posterior.parallaxes import ParallaxTerms, parallax_terms
from ladderfit.posterior.populations import population_blocks
from ladderfit.posterior.robust import RobustHosts, robust_hosts
from ladderfit.posterior.shared import SharedBlock, shared_block
from ladderfit.posterior.split import Split, shared_photometry, split
from ladderfit.posterior.star_terms import star_by_star, star_terms
from ladderfit.posterior.supernovae import correlated_samples, ladder_rows
from ladderfit.samples import FloatArray

_CHUNK = 512  # draws evaluated at once: their sums stay in the processor's cache
_WORTH_HALVING = 256  # draws below which a second thread does not pay
_FARTHEST = 8.0  # prior widths up to which a scatter's sums are tabulated

_Piece = tuple[FloatArray, np.random.Generator]  # some phi, and what draws theta for them


class Tabulated(Protocol):
    """Sums that can be tabulated more finely over a range of extra variance."""

    def focus(self, low: float, high: float) -> None:
        """Have a short table for the range."""


@dataclass(frozen=True, eq=False)
class Posterior:
    """The posterior of one ladder, ready to be evaluated; build with `posterior`.

    Attributes
    ----------
    ladder : Ladder
    split : Split
        What is in phi and what in theta.
    frame : Frame
        How host moduli are eliminated.
    blocks : tuple of Block
        Data rows whose variances depend on phi.
    constant : Moments
        Anchors, priors and rows of fixed variance; batch of one.
    parallaxes : ParallaxTerms or None
    limits : Limits or None
        Magnitude limits of hosts.
    robust : RobustHosts or None
        The Cepheids, where their outliers are modelled.
    """

    ladder: Ladder
    split: Split
    frame: Frame
    blocks: tuple[Block, ...]
    constant: Moments
    parallaxes: ParallaxTerms | None
    limits: Limits | None = None
    robust: RobustHosts | None = None

    @property
    def dimension(self) -> int:
        """Number of coordinates of phi."""
        return len(self.split.phi)

    def log_density(self, z: FloatArray) -> FloatArray:
        """Log posterior density of phi, theta and star moduli integrated out.

        Parameters
        ----------
        z : array, shape (b, d)
            Coordinates of phi.

        Returns
        -------
        array, shape (b,)
            Normalised but for the evidence; minus infinity outside the priors.
        """
        parts = side_by_side(self._log_density, _chunks(z))
        return np.concatenate(parts) if parts else np.empty(0)

    @property
    def theta_is_cheap(self) -> bool:
        """Whether a draw of theta costs little beside the density of phi."""
        return self.robust is None and self.limits is None

    def weighed(self, z: FloatArray, rng: np.random.Generator) -> tuple[FloatArray, FloatArray]:
        """Log densities, shape (b,), and a draw of theta given each phi, as `theta` has it."""

        def part(piece: _Piece) -> tuple[FloatArray, FloatArray]:
            solution = self.solution(piece[0])
            return self._log_density(piece[0], solution), self._theta(piece, solution)

        density, theta = zip(*side_by_side(part, _with_generators(z, rng)), strict=True)
        return np.concatenate(density), np.concatenate(theta)

    def theta(self, z: FloatArray, rng: np.random.Generator) -> FloatArray:
        """Exact draws of all coefficients and moduli given phi.

        Parameters
        ----------
        z : array, shape (b, d)
            Draws of phi, in coordinates.
        rng : numpy Generator

        Returns
        -------
        array, shape (b, k + h)
            Coefficients in the order of `Split.coefficients`, then host moduli.
        """
        return np.concatenate(side_by_side(self._theta, _with_generators(z, rng)))

    def draw(self, z: FloatArray, rng: np.random.Generator) -> dict[str, FloatArray]:
        """Exact draws of everything given phi, in the parameters' own units.

        Parameters
        ----------
        z : array, shape (b, d)
            Draws of phi, in coordinates.
        rng : numpy Generator

        Returns
        -------
        dict
            One array of shape (b,) per parameter and host modulus.
        """
        return self.named(z, self.theta(z, rng))

    def focus(self, low: FloatArray, high: FloatArray) -> None:
        """Tabulate star sums more finely where scatters lie between two points of phi.

        Parameters
        ----------
        low, high : array, shape (d,)
            Corners of the box in coordinates; folded ones may straddle zero.
        """
        for scatter, tabulated in self._tabulated():
            if scatter in self.split.phi_names:
                ends = self.split.value(scatter, np.stack([low, high]))
                place = self.split.phi_names.index(scatter)
                bottom = 0.0 if low[place] * high[place] <= 0.0 else float(ends.min())
                tabulated.focus(bottom**2, float(ends.max()) ** 2)

    def _tabulated(self) -> Iterator[tuple[str, Tabulated]]:
        """Every set of tabulated sums, with its scatter."""
        for block in self.blocks:
            if isinstance(block, SharedBlock):
                yield from zip(block.scatters, block.rows, strict=True)
            elif isinstance(block, CoupledBlock | TwoScatterBlock):
                yield block.scatter, block.rows
            elif isinstance(block, ScatterBlock) and not isinstance(block.rows, Rows):
                yield block.scatter, block.rows

    def solution(self, z: FloatArray) -> Solution:
        """Theta and the evidence of all rows, given phi."""
        total, values = self.constant.repeated(len(z)), partial(self.split.value, z=z)
        for block in self.blocks:
            block.add_to(total, values)
        if self.robust is not None:
            given = self.split.known_values(z)
            return self.robust.solution(total, self.split.known, given, values)
        return solve(total, self.split.known, self.split.known_values(z))

    def _log_density(self, z: FloatArray, solution: Solution | None = None) -> FloatArray:
        solution = self.solution(z) if solution is None else solution
        total = solution.log_evidence + self.split.log_prior(z)
        if self.limits is not None:
            values = partial(self.split.value, z=z)
            total = total + self.limits.log_factor(solution, values)
        if self.parallaxes is not None:
            total = total + self.log_parallaxes(z).sum(axis=1)
        return np.where(np.isnan(total), -np.inf, total)

    def log_parallaxes(self, z: FloatArray) -> FloatArray:
        """Log density of each parallax star or cluster of them, shape (b, g)."""
        if self.parallaxes is None:
            return np.empty((len(z), 0))
        return self.parallaxes.log_density(partial(self.split.value, z=z))

    def _theta(self, piece: _Piece, solution: Solution | None = None) -> FloatArray:
        z, rng = piece
        white = rng.standard_normal((len(z), len(self.split.theta) + self.frame.hosts))
        solution = self.solution(z) if solution is None else solution
        if self.robust is not None:
            values = partial(self.split.value, z=z)
            coefficients, local = self.robust.draw(solution, values, white)
        else:
            coefficients, local = solution.draw(white)
        if self.limits is not None:
            values = partial(self.split.value, z=z)
            self.limits.redraw(solution, values, local, white[:, -self.frame.hosts :])
        moduli = self.frame.modulus(local, coefficients)
        return np.concatenate([coefficients, moduli], axis=1)

    def named(self, z: FloatArray, theta: FloatArray) -> dict[str, FloatArray]:
        """Draws of phi, shape (b, d), and `theta` in the parameters' own units.

        Returns
        -------
        dict
            One array of shape (b,) per parameter and host modulus.
        """
        columns = np.ascontiguousarray(theta.T)
        coefficients = columns[: len(self.split.coefficients)]
        draws: dict[str, FloatArray] = {}
        for name, value in zip(self.split.coefficients, coefficients, strict=True):
            draws[name] = 10.0 ** (0.2 * value) if name in self.split.logarithmic else value
        draws |= _derived(self.split, coefficients)
        for name in (*self.split.phi_names, *self.split.fixed):
            draws.setdefault(name, self.split.value(name, z))
        for host, modulus in zip(self.ladder.hosts, columns[len(coefficients) :], strict=True):
            draws[with_group("modulus", host)] = modulus
        return draws

    def coordinates(self, values: Mapping[str, float]) -> FloatArray:
        """Coordinates of phi at the given parameter values, shape (d,)."""
        return np.array([c.coordinate(values[c.name]) for c in self.split.phi])


def posterior(ladder: Ladder, before: Posterior | None = None) -> Posterior:
    """Assemble the posterior of a ladder.

    Parameters
    ----------
    ladder : Ladder
    before : Posterior, optional
        That of a similar ladder: star sums that the difference does not touch
        are taken over.
    """
    parts = split(ladder)
    names = parts.coefficients
    frame = host_frame(ladder, len(names))
    constant = no_moments(1, frame.hosts, len(names), coupled_hosts(ladder))
    constant = constant + known_rows(ladder, frame, parts)
    blocks: list[Block] = []
    earlier = () if before is None else before.blocks
    integrated = population_blocks(ladder, frame, names, earlier)
    blocks += integrated
    correlated = None if integrated else supernova_data(ladder, frame, names)
    if correlated is not None:
        reach = {name: _largest(ladder, name) for name in ladder.choices.peak_scatters}
        block = supernova_block(ladder, correlated, parts.fixed, reach, earlier)
        if isinstance(block, Moments):
            constant = constant + block
        else:
            blocks.append(block)
    done = ("peaks", "flow") if integrated else correlated_samples(ladder)
    found = list(ladder_rows(ladder, frame, names, but=done))
    robust = robust_hosts(ladder, frame)
    summed = None if robust is not None else _star_block(ladder, frame, names)
    if summed is not None:
        blocks.append(summed)
    elif robust is None:
        found += plain_rows(ladder, frame)
    for rows_, scatter in found:
        if scatter is None or scatter in parts.fixed:
            known = 0.0 if scatter is None else parts.fixed[scatter]
            constant = constant + rows_.moments(np.array([known**2]))
        else:
            largest = _largest(ladder, scatter)
            kept = None if before is None else _kept(before.blocks, rows_, scatter, largest)
            blocks.append(kept or ScatterBlock(reduced(rows_, largest), scatter, largest))
    limits = limits_of(ladder, frame, names)
    stars = parallax_terms(ladder)
    return Posterior(ladder, parts, frame, tuple(blocks), constant, stars, limits, robust)


def _star_block(ladder: Ladder, frame: Frame, names: tuple[str, ...]) -> Block | None:
    """The Cepheids as a block, where sums over them depend on more than one scatter."""
    stars = ladder.cepheids
    if stars is None:
        return None
    errors = input_errors(ladder, stars)
    if star_by_star(ladder):
        return star_terms(ladder, frame, names)
    if errors is not None:
        return noisy_block(ladder, frame, stars, errors)
    if shared_photometry(ladder):
        return shared_block(ladder, frame, stars, partial(_largest, ladder))
    return None


def _with_generators(z: FloatArray, rng: np.random.Generator) -> list[_Piece]:
    """Pieces with a generator each, so that threads draw the same numbers as one would."""
    parts = _chunks(z)
    return list(zip(parts, rng.spawn(len(parts)), strict=True))


def _chunks(values: FloatArray) -> list[FloatArray]:
    """Pieces for two threads to share: the same whether there is one or two."""
    pairs = -(-len(values) // (2 * _CHUNK))
    size = _CHUNK if len(values) < _WORTH_HALVING else -(-len(values) // (2 * pairs))
    return [values[start : start + size] for start in range(0, len(values), size)]


def _kept(
    blocks: tuple[Block, ...], rows_: Rows, scatter: str, largest: float
) -> ScatterBlock | None:
    """The block of the same rows among those of an earlier posterior."""
    for block in blocks:
        if (
            isinstance(block, ScatterBlock)
            and block.scatter == scatter
            and block.largest >= largest
            and block.holds(rows_)
        ):
            return block
    return None


def _derived(parts: Split, coefficients: FloatArray) -> dict[str, FloatArray]:
    """The intercept a = log10 H0 - 0.2 M - 5, which the expansion alone determines."""
    places = {name: place for place, name in enumerate(parts.coefficients)}
    if "peak_magnitude" not in places or "hubble_constant" not in parts.logarithmic:
        return {}
    if "hubble_constant" not in places:
        return {}
    rate = coefficients[places["hubble_constant"]]
    return {"intercept": 0.2 * (rate - coefficients[places["peak_magnitude"]]) - 5.0}


def _largest(ladder: Ladder, scatter: str) -> float:
    """A variance that the scatter's prior makes very unlikely to be exceeded."""
    prior = ladder.choices.prior(scatter)
    return min(prior.bounds[1], prior.centre + _FARTHEST * prior.sd) ** 2
