"""The joint posterior of a ladder: log density of phi, and exact draws of theta given phi."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import partial
from typing import Protocol

import numpy as np

from ladderfit.kernels.arrow import Moments, Rows, Solution, no_moments, rows, solve
from ladderfit.kernels.compiling import side_by_side
from ladderfit.kernels.coupled import CoupledData, coupled_rows
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
from ladderfit.posterior.limits import Limits, limits_of
from ladderfit.posterior.moduli import log_modulus_norm, tilt_of
from ladderfit.posterior.parallaxes import ParallaxTerms, parallax_terms
from ladderfit.posterior.populations import population_blocks
from ladderfit.posterior.robust import RobustHosts, robust_hosts
from ladderfit.posterior.shared import SharedBlock, shared_block
from ladderfit.posterior.split import Split, shared_photometry, split
from ladderfit.posterior.star_terms import star_by_star, star_terms
from ladderfit.posterior.supernovae import correlated_samples, ladder_rows
from ladderfit.samples import FloatArray

_CHUNK = 512  # draws evaluated at once: their sums stay in the processor's cache
_FARTHEST = 8.0  # prior widths up to which a scatter's sums are tabulated


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
        white = rng.standard_normal((len(z), len(self.split.theta) + self.frame.hosts))
        parts = list(zip(_chunks(z), _chunks(white), strict=True))
        pieces = side_by_side(lambda part: self._draw(*part), parts)
        return {name: np.concatenate([piece[name] for piece in pieces]) for name in pieces[0]}

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

    def _log_density(self, z: FloatArray) -> FloatArray:
        solution = self.solution(z)
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

    def _draw(self, z: FloatArray, white: FloatArray) -> dict[str, FloatArray]:
        solution = self.solution(z)
        if self.robust is not None:
            values = partial(self.split.value, z=z)
            coefficients, local = self.robust.draw(solution, values, white)
        else:
            coefficients, local = solution.draw(white)
        if self.limits is not None:
            values = partial(self.split.value, z=z)
            self.limits.redraw(solution, values, local, white[:, -self.frame.hosts :])
        draws: dict[str, FloatArray] = {}
        for place, name in enumerate(self.split.coefficients):
            value = coefficients[:, place]
            draws[name] = 10.0 ** (0.2 * value) if name in self.split.logarithmic else value
        draws |= _derived(self.split, coefficients)
        for name in (*self.split.phi_names, *self.split.fixed):
            draws.setdefault(name, self.split.value(name, z))
        moduli = self.frame.modulus(local, coefficients)
        for place, host in enumerate(self.ladder.hosts):
            draws[with_group("modulus", host)] = moduli[:, place]
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
    constant = constant + _anchors(ladder, frame, names) + _theta_prior(parts, frame)
    constant = constant + _distances(ladder, frame)
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


def _chunks(values: FloatArray) -> list[FloatArray]:
    return [values[start : start + _CHUNK] for start in range(0, len(values), _CHUNK)]


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
    rate = coefficients[:, places["hubble_constant"]]
    return {"intercept": 0.2 * (rate - coefficients[:, places["peak_magnitude"]]) - 5.0}


def _largest(ladder: Ladder, scatter: str) -> float:
    """A variance that the scatter's prior makes very unlikely to be exceeded."""
    prior = ladder.choices.prior(scatter)
    return min(prior.bounds[1], prior.centre + _FARTHEST * prior.sd) ** 2


def _anchors(ladder: Ladder, frame: Frame, names: tuple[str, ...]) -> Moments:
    """Geometric moduli; what several have in common is a coefficient of its own."""
    anchors = ladder.geometric
    host = np.array([anchor.host for anchor in anchors], dtype=int)
    modulus = np.array([anchor.modulus for anchor in anchors], dtype=float)
    variance = np.array([anchor.error**2 for anchor in anchors], dtype=float)
    columns = np.zeros((len(anchors), len(names)))
    for name, shared in ladder.choices.anchors.shared_errors.items():
        place = with_group("shared_error", name)
        if place in names:
            loads = [shared.loads.get(anchor.name, 0.0) for anchor in anchors]
            columns[:, names.index(place)] = shared.error * np.array(loads)
    if ladder.anchor_covariance is None:
        return frame.modulus_rows(host, columns, modulus, variance).moments(np.zeros(1))
    whole, coupled = frame.columns(host, columns, modulus), coupled_hosts(ladder)
    data = CoupledData(host, whole, ladder.anchor_covariance, frame.hosts, coupled)
    return coupled_rows(data, None).moments(np.zeros(1))


def _theta_prior(parts: Split, frame: Frame) -> Moments:
    columns = np.zeros((len(parts.theta), len(parts.coefficients)))
    for row, name in enumerate(parts.theta):
        columns[row, parts.coefficients.index(name)] = 1.0
    mean = np.array([prior.mean for prior in parts.theta_prior], dtype=float)
    variance = np.array([prior.deviation**2 for prior in parts.theta_prior], dtype=float)
    nowhere = np.full(len(parts.theta), -1)
    return rows(nowhere, columns, mean, variance, frame.hosts).moments(np.zeros(1))


def _distances(ladder: Ladder, frame: Frame) -> Moments:
    """The prior of the moduli, exp(tilt mu) from 0 to the largest modulus.

    The closed form integrates over the whole line; moduli within the bounds by
    many of their errors make the difference nil.
    """
    width = frame.centroid.shape[1]
    prior = ladder.choices.hosts.distance_prior
    tilt, hosts = tilt_of(prior), frame.hosts
    empty = no_moments(1, hosts, width)
    cross, square = empty.cross, empty.square
    cross[:, :, -1] = tilt
    pull = -tilt * frame.centroid.sum(axis=0)
    square[:, :-1, -1] = square[:, -1, :-1] = pull
    constant = np.array([tilt * frame.origin.sum() - hosts * log_modulus_norm(prior)])
    return Moments(empty.local, cross, square, constant)
