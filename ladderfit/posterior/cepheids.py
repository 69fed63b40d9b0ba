"""Blocks of rows: what a set of data adds to the moments, given phi.

Where the variance depends on a scatter alone the sums are tabulated
(`ScatterBlock`).  Where an input of the relation has errors they depend on
coefficients too, and are summed star by star (`NoisyBlock`).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from ladderfit.kernels.arrow import LOG_2PI, Moments, Rows
from ladderfit.kernels.reduced import ReducedRows
from ladderfit.ladder import Ladder
from ladderfit.posterior.errors_in_inputs import MEAN_SD, InputErrors
from ladderfit.posterior.frame import Frame, star_columns, star_rows
from ladderfit.relations import scatters
from ladderfit.samples import FloatArray, IntArray, StarSample

Values = Callable[[str], FloatArray]  # name of a parameter of phi -> its values, shape (b,)


class Block(Protocol):
    """Anything that can add its rows to the moments."""

    def add_to(self, total: Moments, values: Values) -> None:
        """Add the sums at the given parameter values to `total`, in place."""


@dataclass(frozen=True, eq=False)
class ScatterBlock:
    """Rows widened by one scatter, whose square is tabulated up to `largest`."""

    rows: Rows | ReducedRows
    scatter: str
    largest: float = np.inf

    def holds(self, rows: Rows) -> bool:
        """Whether these are the very same rows."""
        mine = self.rows.rows if isinstance(self.rows, ReducedRows) else self.rows
        return (
            mine.slices == rows.slices
            and mine.hosts == rows.hosts
            and np.array_equal(mine.variance, rows.variance)
            and np.array_equal(mine.columns, rows.columns)
        )

    def add_to(self, total: Moments, values: Values) -> None:
        """Add the sums at the scatter's values to `total`, in place."""
        self.rows.add_to(total, values(self.scatter) ** 2)


@dataclass(frozen=True, eq=False)
class NoisyBlock:
    """Cepheids of which periods or metallicities have errors.

    Attributes
    ----------
    columns : array, shape (n, k)
        Design columns in the frame.
    y, variance, metallicity : array, shape (n,)
        Magnitude in the frame, its variance, and the metallicity less its reference.
    slices : tuple of (host, start, stop)
    scatters : tuple of str
    scatter_of : array of int, shape (n,)
    coefficients : tuple of str or None, length k
        Names of the coefficients that enter the variance; None where one does not.
    errors : InputErrors
    """

    columns: FloatArray
    y: FloatArray
    variance: FloatArray
    metallicity: FloatArray
    slices: tuple[tuple[int, int, int], ...]
    scatters: tuple[str, ...]
    scatter_of: IntArray
    coefficients: tuple[str | None, ...]
    errors: InputErrors

    def add_to(self, total: Moments, values: Values) -> None:
        """Add the sums at the given scatters, spread and coefficients to `total`, in place."""
        batch = len(total.constant)
        known = np.zeros((batch, self.columns.shape[1]))
        for place, name in enumerate(self.coefficients):
            if name is not None:
                known[:, place] = values(name)
        spread = values("metallicity_spread") if self._population else None
        effect = self.errors.effect(known, spread)
        scatter2 = np.stack([values(name) ** 2 for name in self.scatters], axis=1)
        variance = self.variance + effect.variance + scatter2[:, self.scatter_of]
        for host, start, stop in self.slices:
            part = slice(start, stop)
            pull = None if effect.pull is None else effect.pull[:, part]
            weight = None if effect.weight is None else effect.weight[:, part]
            self._add_host(total, host, part, variance[:, part], pull, weight)

    @property
    def _population(self) -> bool:
        return self.errors.population and self.errors.metallicity_error is not None

    def _add_host(
        self,
        total: Moments,
        host: int,
        part: slice,
        variance: FloatArray,
        pull: FloatArray | None,
        precision: FloatArray | None,
    ) -> None:
        """One host's stars; its mean metallicity, if any, is integrated out on the spot."""
        batch, n = variance.shape
        columns, metallicity = self.columns[part], self.metallicity[part]
        centre = float(metallicity.mean())
        off = metallicity - centre
        y = np.broadcast_to(self.y[part], (batch, n))
        if pull is not None:
            y = y + pull * off  # the pull towards the host's mean, moved to the left
        # columns of one star: [1 (local), design, y, pull (mean metallicity)]
        star = np.zeros((batch, n, columns.shape[1] + 3))
        star[:, :, 0] = 1.0
        star[:, :, 1:-2] = columns
        star[:, :, -2] = y
        if pull is not None:
            star[:, :, -1] = pull
        sums = np.swapaxes(star / variance[:, :, None], 1, 2) @ star
        constant = -0.5 * (np.log(variance).sum(axis=1) + n * LOG_2PI)
        if pull is not None and precision is not None:
            sums[:, -1, -1] += precision.sum(axis=1) + MEAN_SD**-2
            mean = precision @ off - centre * MEAN_SD**-2
            sums[:, -1, -2] += mean
            sums[:, -2, -1] += mean
            sums[:, -2, -2] += precision @ off**2 + centre**2 * MEAN_SD**-2
            last = sums[:, -1, :]
            size = last[:, -1]
            sums = sums - last[:, :, None] * last[:, None, :] / size[:, None, None]
            constant += 0.5 * (np.log(precision).sum(axis=1) - n * LOG_2PI)
            constant -= 0.5 * np.log(size * MEAN_SD**2)
        total.local[:, host] += sums[:, 0, 0]
        total.cross[:, host] += sums[:, 0, 1:-1]
        total.square[:] += sums[:, 1:-1, 1:-1]
        total.constant[:] += constant


def plain_rows(ladder: Ladder, frame: Frame) -> list[tuple[Rows, str]]:
    """The Cepheids' rows, one set per scatter, errors of the inputs left aside."""
    stars = ladder.cepheids
    if stars is None:
        return []
    names, which = scatters(ladder.choices, stars, ladder.hosts)
    return [
        (star_rows(ladder, frame, stars, which == place), name) for place, name in enumerate(names)
    ]


def noisy_block(ladder: Ladder, frame: Frame, stars: StarSample, errors: InputErrors) -> NoisyBlock:
    """The Cepheids as one block whose variances depend on coefficients."""
    names, which = scatters(ladder.choices, stars, ladder.hosts)
    columns, coefficient_names = star_columns(ladder, stars)
    width = frame.centroid.shape[1]
    wide = np.zeros((len(stars), width))
    wide[:, : columns.shape[1]] = columns
    edges = np.searchsorted(stars.host, np.arange(frame.hosts + 1))
    slices = tuple(
        (host, int(edges[host]), int(edges[host + 1]))
        for host in range(frame.hosts)
        if edges[host + 1] > edges[host]
    )
    metallicity = np.zeros(len(stars))
    reference = ladder.choices.relation.metallicity
    if reference != "none":
        metallicity = stars.metallicity - reference.reference
    wider = padded(errors, width)
    sensitive = wider.sensitive
    labels = tuple(
        name if sensitive[place] else None for place, name in enumerate(coefficient_names)
    )
    return NoisyBlock(
        columns=wide - frame.centroid[stars.host],
        y=stars.magnitude - frame.origin[stars.host],
        variance=stars.variance,
        metallicity=metallicity,
        slices=slices,
        scatters=names,
        scatter_of=which,
        coefficients=(*labels, *[None] * (width - len(labels))),
        errors=wider,
    )


def padded(errors: InputErrors, width: int) -> InputErrors:
    """The same with columns of zero for coefficients that are not the relation's."""

    def pad(slope: FloatArray | None) -> FloatArray | None:
        if slope is None:
            return None
        return np.pad(slope, ((0, 0), (0, width - slope.shape[1])))

    return InputErrors(
        pad(errors.period_slope),
        errors.period_error,
        pad(errors.metallicity_slope),
        errors.metallicity_error,
        errors.population,
    )
