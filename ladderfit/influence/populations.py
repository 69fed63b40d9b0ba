"""Cepheids whose inputs have errors, each taken out of its host.

Where metallicities are integrated over a host's population, the host's mean
metallicity links its stars; it is integrated anew without the star.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from ladderfit.influence.given import Given, Taken
from ladderfit.influence.sets import cut
from ladderfit.kernels.arrow import LOG_2PI, Moments
from ladderfit.posterior.cepheids import NoisyBlock
from ladderfit.posterior.errors_in_inputs import MEAN_SD, Effect
from ladderfit.samples import FloatArray, IntArray


def stars_of_host(given: Given, block: NoisyBlock, host: int) -> Iterator[Taken]:
    """Every star of a host, each taken out alone, in the order of the sample."""
    own = cut(block, host)
    if own is None:
        return
    effect, variance = _at(given, own)
    columns = np.column_stack([own.columns, own.y])
    if effect.pull is None or effect.weight is None:
        for star in range(len(own.y)):
            one = slice(star, star + 1)
            yield given.rows_out(columns[one], variance[:, one], np.array([host]))
        return
    linked = _linked(own, effect, variance)
    whole = linked.integrated(linked.sums, linked.constant)
    for star in range(len(own.y)):
        left = linked.without(star)
        yield given.replaced(_exchanged(given.solution.moments, host, whole, left))


def _at(given: Given, own: NoisyBlock) -> tuple[Effect, FloatArray]:
    """What the errors do, and the variances, shape (s, n)."""
    known = np.zeros((len(given.z), own.columns.shape[1]))
    for place, name in enumerate(own.coefficients):
        if name is not None:
            known[:, place] = given.value(name)
    population = own.errors.population and own.errors.metallicity_error is not None
    spread = given.value("metallicity_spread") if population else None
    effect = own.errors.effect(known, spread)
    scatter2 = np.stack([given.value(name) ** 2 for name in own.scatters], axis=1)
    return effect, own.variance + effect.variance + scatter2[:, own.scatter_of]


@dataclass(frozen=True, eq=False)
class _Linked:
    """Sums over a host's stars of products of [1, X, y, pull], the mean not yet integrated."""

    star: FloatArray
    variance: FloatArray
    weight: FloatArray
    off: FloatArray
    sums: FloatArray
    constant: FloatArray

    def integrated(self, sums: FloatArray, constant: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Products of [1, X, y], shape (s, q, q), and the constant, with the mean gone."""
        last = sums[:, -1, :]
        size = last[:, -1]
        rest = sums - last[:, :, None] * last[:, None, :] / size[:, None, None]
        return rest[:, :-1, :-1], constant - 0.5 * np.log(size * MEAN_SD**2)

    def without(self, star: int) -> tuple[FloatArray, FloatArray]:
        """The same for all stars but one."""
        row, weight, off = self.star[:, star], self.weight[:, star], self.off[star]
        variance = self.variance[:, star]
        sums = self.sums - row[:, :, None] * row[:, None, :] / variance[:, None, None]
        sums[:, -1, -1] -= weight
        sums[:, -1, -2] -= weight * off
        sums[:, -2, -1] -= weight * off
        sums[:, -2, -2] -= weight * off**2
        constant = self.constant + 0.5 * (np.log(variance) - np.log(weight)) + LOG_2PI
        return self.integrated(sums, constant)


def _linked(own: NoisyBlock, effect: Effect, variance: FloatArray) -> _Linked:
    pull, weight = effect.pull, effect.weight
    if pull is None or weight is None:  # the caller has made sure
        raise AssertionError
    batch, n = variance.shape
    centre = float(own.metallicity.mean())
    off = own.metallicity - centre
    star = np.empty((batch, n, own.columns.shape[1] + 3))
    star[:, :, 0] = 1.0
    star[:, :, 1:-2] = own.columns
    star[:, :, -2] = own.y + pull * off
    star[:, :, -1] = pull
    sums = np.swapaxes(star / variance[:, :, None], 1, 2) @ star
    mean = weight @ off - centre * MEAN_SD**-2
    sums[:, -1, -1] += weight.sum(axis=1) + MEAN_SD**-2
    sums[:, -1, -2] += mean
    sums[:, -2, -1] += mean
    sums[:, -2, -2] += weight @ off**2 + centre**2 * MEAN_SD**-2
    constant = 0.5 * (np.log(weight).sum(axis=1) - np.log(variance).sum(axis=1)) - n * LOG_2PI
    return _Linked(star, variance, weight, off, sums, constant)


def _exchanged(
    total: Moments,
    host: int,
    before: tuple[FloatArray, FloatArray],
    after: tuple[FloatArray, FloatArray],
) -> Moments:
    """Moments with one host's products exchanged; uncoupled hosts are eliminated at once."""
    change, constant = after[0] - before[0], total.constant + after[1] - before[1]
    square = total.square + change[:, 1:, 1:]
    local, cross = total.local.copy(), total.cross.copy()
    local[:, host] += change[:, 0, 0]
    cross[:, host] += change[:, 0, 1:]
    return replace(total, local=local, cross=cross, square=square, constant=constant)


def places_of_host(block: NoisyBlock, host: int) -> IntArray:
    """Places of a host's stars in the sample."""
    for number, start, stop in block.slices:
        if number == host:
            return np.arange(start, stop)
    return np.empty(0, dtype=np.int64)
