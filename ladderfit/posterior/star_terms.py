"""Cepheids of hosts one by one: where sums over stars depend on more than one scatter.

Free ratios, shared photometric errors and errors of the inputs meet here: each host
then has nuisances of its own (mean metallicity, mean colour, amplitudes), which
`ladderfit.kernels.star_sums` integrates out.  A draw costs in proportion to the
number of stars.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from ladderfit.kernels.arrow import Moments
from ladderfit.kernels.star_sums import IntArray, SideRows, StarRows, add_stars
from ladderfit.ladder import Ladder
from ladderfit.posterior.cepheids import Values, padded
from ladderfit.posterior.colours import MEAN_COLOUR, MEAN_COLOUR_SD, SLOPE, Colours, colours_of
from ladderfit.posterior.errors_in_inputs import MEAN_SD, InputErrors, input_errors
from ladderfit.posterior.frame import Frame, star_columns
from ladderfit.posterior.split import shared_photometry
from ladderfit.relations import scatters
from ladderfit.samples import FloatArray, StarSample

_CHUNK = 4_000_000  # elements of a (draws, stars) array held at once


@dataclass(frozen=True, eq=False)
class StarTerms:
    """The Cepheids, ready to be summed star by star; a block of the posterior.

    Attributes
    ----------
    columns : array, shape (n, k)
        Design columns in the frame.
    y, variance, origin, metallicity : array, shape (n,)
        Magnitude in the frame and its variance, what the frame took off it, and the
        metallicity less its reference.
    runs : array of int, shape (runs, 3)
        Host, first star and one past the last.
    scatters, scatter_of : names, and which of them each star has
    coefficients : tuple of str or None, length k
        Names of the coefficients that enter the variance; None where one does not.
    errors : InputErrors or None
    colours : Colours or None
    colour_place : int
        Column of the colours' slope; -1 where there is none.
    x : array, shape (n,)
        log10 of the period less the mean of the host.
    loadings : array, shape (n, terms), or None
    shared : tuple of str
        Names of the amplitudes' standard deviations.
    """

    columns: FloatArray
    y: FloatArray
    variance: FloatArray
    origin: FloatArray
    metallicity: FloatArray
    runs: IntArray
    scatters: tuple[str, ...]
    scatter_of: IntArray
    coefficients: tuple[str | None, ...]
    errors: InputErrors | None
    colours: Colours | None
    colour_place: int
    x: FloatArray
    loadings: FloatArray | None
    shared: tuple[str, ...]

    def add_to(self, total: Moments, values: Values) -> None:
        """Add the sums at the given parameter values to `total`, in place."""
        batch = len(total.constant)
        size = max(1, _CHUNK // max(len(self.y) * (2 + self.nuisances), 1))
        for start in range(0, batch, size):
            at = slice(start, start + size)

            def here(name: str, at: slice = at) -> FloatArray:
                return values(name)[at]

            add_stars(total, self.at(here), self.runs, at)

    def only(self, chosen: IntArray, runs: IntArray) -> StarTerms:
        """The same for some of the stars; `runs` says where their hosts lie among them."""

        def taken(values: FloatArray | None) -> FloatArray | None:
            return None if values is None else values[chosen]

        errors, colours = self.errors, self.colours
        return replace(
            self,
            columns=self.columns[chosen],
            y=self.y[chosen],
            variance=self.variance[chosen],
            origin=self.origin[chosen],
            metallicity=self.metallicity[chosen],
            runs=runs,
            scatter_of=self.scatter_of[chosen],
            errors=None
            if errors is None
            else InputErrors(
                taken(errors.period_slope),
                taken(errors.period_error),
                taken(errors.metallicity_slope),
                taken(errors.metallicity_error),
                errors.population,
            ),
            colours=None if colours is None else colours.only(chosen),
            x=self.x[chosen],
            loadings=taken(self.loadings),
        )

    @property
    def nuisances(self) -> int:
        """How many nuisances each host has."""
        return int(self._metals) + int(self._population) + len(self.shared)

    @property
    def _metals(self) -> bool:
        errors = self.errors
        return errors is not None and errors.population and errors.metallicity_error is not None

    @property
    def _population(self) -> bool:
        return self.colours is not None and self.colours.treatment.population

    def at(self, values: Values) -> StarRows:
        """The rows of all stars at given parameter values, `values(name)` of shape (b,)."""
        scatter2 = np.stack([values(name) ** 2 for name in self.scatters], axis=1)
        variance = scatter2[:, self.scatter_of]
        batch, n = variance.shape
        y = np.broadcast_to(self.y, (batch, n))
        slope = None
        sides: list[SideRows] = []
        nuisances: list[FloatArray] = []
        means: list[FloatArray] = []
        precisions: list[float] = []
        if self.colours is None:
            variance = variance + self.variance
        else:
            effect = self.colours.at(values)
            y, variance = effect.index - self.origin, variance + effect.variance
            if effect.pull is not None and effect.weight is not None:
                mean = self._host_means(self.colours.colour)
                off = self.colours.colour - self._per_star(mean)
                y, slope = y - effect.pull * off, -effect.pull * self.x
                nuisances.append(-effect.pull)
                sides.append(SideRows(0, self.x, off, effect.weight))
                means.append(MEAN_COLOUR - mean)
                precisions.append(MEAN_COLOUR_SD**-2)
        if self.errors is not None:
            found = self.errors.effect(self._known(values, batch), self._spread(values))
            variance = variance + found.variance
            if found.pull is not None and found.weight is not None:
                mean = self._host_means(self.metallicity)
                off = self.metallicity - self._per_star(mean)
                y = y + found.pull * off
                sides.append(SideRows(len(nuisances), None, off, found.weight))
                nuisances.append(found.pull)
                means.append(-mean)
                precisions.append(MEAN_SD**-2)
        for place, name in enumerate(self.shared):
            if self.loadings is not None:
                nuisances.append(values(name)[:, None] * self.loadings[:, place])
                means.append(np.zeros(len(self.runs)))
                precisions.append(1.0)
        return StarRows(
            self.columns,
            np.ascontiguousarray(y),
            1.0 / variance,
            np.stack(nuisances, axis=2) if nuisances else np.empty((batch, n, 0)),
            np.stack(means, axis=1) if means else np.empty((len(self.runs), 0)),
            np.array(precisions, dtype=float),
            self.colour_place if slope is not None else -1,
            slope,
            tuple(sides),
        )

    def _known(self, values: Values, batch: int) -> FloatArray:
        known = np.zeros((batch, self.columns.shape[1]))
        for place, name in enumerate(self.coefficients):
            if name is not None:
                known[:, place] = values(name)
        return known

    def _spread(self, values: Values) -> FloatArray | None:
        return values("metallicity_spread") if self._metals else None

    def _host_means(self, values: FloatArray) -> FloatArray:
        """Mean over each run, shape (runs,)."""
        sums = np.add.reduceat(values, self.runs[:, 1])
        return np.asarray(sums / (self.runs[:, 2] - self.runs[:, 1]))

    def _per_star(self, values: FloatArray) -> FloatArray:
        return np.repeat(values, self.runs[:, 2] - self.runs[:, 1])


def star_terms(ladder: Ladder, frame: Frame, names: tuple[str, ...]) -> StarTerms:
    """The Cepheids of a ladder, star by star; `names` are the system's coefficients."""
    stars = ladder.cepheids
    if stars is None:
        raise TypeError("a ladder without Cepheids")
    width = len(names)
    columns, coefficients = star_columns(ladder, stars)
    wide = np.pad(columns, ((0, 0), (0, width - columns.shape[1])))
    errors = input_errors(ladder, stars)
    sensitive = np.zeros(len(coefficients), bool) if errors is None else errors.sensitive
    labels = [n if s else None for n, s in zip(coefficients, sensitive, strict=True)]
    reference = ladder.choices.relation.metallicity
    scatter_names, which = scatters(ladder.choices, stars, ladder.hosts)
    runs = _runs(stars, frame.hosts)
    sums = np.add.reduceat(stars.log_period, runs[:, 1]) / (runs[:, 2] - runs[:, 1])
    colours = colours_of(ladder, stars)
    population = colours is not None and colours.treatment.population
    terms = shared_photometry(ladder)
    return StarTerms(
        columns=wide - frame.centroid[stars.host],
        y=stars.magnitude - frame.origin[stars.host],
        variance=stars.variance,
        origin=frame.origin[stars.host],
        metallicity=np.zeros(len(stars))
        if reference == "none"
        else stars.metallicity - reference.reference,
        runs=runs,
        scatters=scatter_names,
        scatter_of=which,
        coefficients=(*labels, *[None] * (width - len(labels))),
        errors=None if errors is None else padded(errors, width),
        colours=colours,
        colour_place=names.index(SLOPE) if population else -1,
        x=stars.log_period - np.repeat(sums, runs[:, 2] - runs[:, 1]),
        loadings=stars.loadings if terms else None,
        shared=terms,
    )


def star_by_star(ladder: Ladder) -> bool:
    """Whether the sums of the Cepheids depend on more than scatters and shared errors."""
    return ladder.choices.relation.reddening != "fixed" or (
        bool(shared_photometry(ladder)) and input_errors(ladder, ladder.cepheids) is not None
    )


def _runs(stars: StarSample, hosts: int) -> IntArray:
    edges = np.searchsorted(stars.host, np.arange(hosts + 1))
    runs = [(host, edges[host], edges[host + 1]) for host in range(hosts)]
    return np.array([run for run in runs if run[2] > run[1]], dtype=np.int64).reshape(-1, 3)
