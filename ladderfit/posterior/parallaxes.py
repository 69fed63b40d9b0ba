"""The parallax stars' share of the log density.

Each star, or each cluster of stars that share a modulus, contributes the integral
over its modulus, divided by the chance D that it enters the sample; without a
selection D is the norm of the distance prior.  Stars of a cluster are one star to
the quadrature: the product of their normals in modulus is one normal, and so is
that of their normals in parallax.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from ladderfit.choices import Parallaxes, Selection
from ladderfit.kernels import detection
from ladderfit.kernels.quadrature import LOG_2PI
from ladderfit.ladder import Ladder
from ladderfit.posterior.cepheids import Values
from ladderfit.posterior.colours import PARALLAX_COLOUR, SLOPE, Colours, colours_of
from ladderfit.posterior.errors_in_inputs import InputErrors, input_errors
from ladderfit.posterior.families import PARALLAXES, Family, families, outliers_of
from ladderfit.posterior.moduli import Distances, Sharing, distances_of, product, sharing_of
from ladderfit.posterior.offsets import offset_terms
from ladderfit.relations import design, scatters
from ladderfit.samples import FloatArray, IntArray, StarSample


@dataclass(frozen=True)
class Mixed:
    """Of every star, shape (b, n): its log density, and the log odds of being an outlier."""

    log_density: FloatArray
    log_odds: FloatArray


@dataclass(frozen=True, eq=False)
class ParallaxTerms:
    """The stars with parallaxes, ready for the quadrature.

    Attributes
    ----------
    coefficients : tuple of str, length k
        The relation's coefficients that these stars depend on.
    design : array, shape (n, k)
        Their columns.
    magnitude, variance, parallax, parallax_error, metallicity : array, shape (n,)
        Metallicities less their reference.
    scatters : tuple of str
    scatter_of : array of int, shape (n,)
        Which of the scatters each star has.
    errors : InputErrors or None
    offsets : mapping of str to array, shape (n + e,)
        Columns of what parallaxes are shifted by; the last e are clusters' own.
    shared_variance : array, shape (n,)
        Shared errors beyond their modes [mas^2].
    error_scale : bool
        Whether the stars' parallax errors have a scale.
    cluster_parallax, cluster_error : array, shape (e,)
        Clusters' own parallaxes [mas].
    distances : Distances
    sharing : Sharing or None
        None where no two stars share a modulus.
    selection : Selection or None
    headroom : array, shape (n,), or None
        Limit minus magnitude, in the selection's band [mag].
    colours : Colours or None
        Where the ratio is free.
    x : array, shape (n,)
        log10 of period over pivot.
    families : tuple of Family
        Laws of outliers; empty where these are not modelled.
    family_of : array of int, shape (n,)
        Which of them each star has.
    """

    coefficients: tuple[str, ...]
    design: FloatArray
    magnitude: FloatArray
    variance: FloatArray
    parallax: FloatArray
    parallax_error: FloatArray
    metallicity: FloatArray
    scatters: tuple[str, ...]
    scatter_of: IntArray
    errors: InputErrors | None
    offsets: Mapping[str, FloatArray]
    shared_variance: FloatArray
    error_scale: bool
    cluster_parallax: FloatArray
    cluster_error: FloatArray
    distances: Distances
    sharing: Sharing | None
    selection: Selection | None
    headroom: FloatArray | None
    colours: Colours | None
    x: FloatArray
    families: tuple[Family, ...] = ()
    family_of: IntArray = field(default_factory=lambda: np.empty(0, dtype=np.int64))

    def log_density(self, values: Values) -> FloatArray:
        """Log density of every star or cluster, shape (b, g), at the given parameter values."""
        a, v, measured = self._magnitudes(values)
        offset, err = self._parallaxes(values)
        rate = np.zeros(len(a))
        if self.distances.kind == detection.EXPONENTIAL:
            rate = 1.0 / values("distance_length")
        if self.families:
            return measured + self._mixture(values, a, v, offset, err, rate).log_density
        chance = self._log_chance(a, v, offset, err, rate)
        n = len(self.parallax)
        plx = np.concatenate([self.parallax, self.cluster_parallax]) - offset
        if self.sharing is None:
            return measured - chance + self.distances.log_integrals(a, v, plx[:, :n], err, rate)
        own = np.broadcast_to(self.cluster_error, (len(a), len(self.cluster_error)))
        err = np.concatenate([np.broadcast_to(err, (len(a), n)), own], axis=1)
        order, starts = self.sharing.order, self.sharing.starts
        a, v, apart = product(a[:, order], v[:, order], starts)
        places = self.sharing.parallax_order
        plx, square, apart_plx = product(
            plx[:, places], err[:, places] ** 2, self.sharing.parallax_starts
        )
        total = apart + apart_plx - chance
        total = total + self.distances.log_integrals(a, v, plx, np.sqrt(square), rate)
        if isinstance(measured, float):
            return total
        return total + np.add.reduceat(measured[:, order], starts[:-1], axis=1)

    def log_odds(self, values: Values) -> FloatArray:
        """Log of a star's odds of being an outlier, shape (b, n); of a mixture alone."""
        a, v, _ = self._magnitudes(values)
        offset, err = self._parallaxes(values)
        rate = np.zeros(len(a))
        if self.distances.kind == detection.EXPONENTIAL:
            rate = 1.0 / values("distance_length")
        return self._mixture(values, a, v, offset, err, rate).log_odds

    def _mixture(
        self,
        values: Values,
        a: FloatArray,
        v: FloatArray,
        offset: FloatArray,
        err: FloatArray,
        rate: FloatArray,
    ) -> Mixed:
        """Both kinds of stars, each with its integral and its chance of being in the sample."""
        fraction, width, shift = (
            np.stack([values(name) for name in names], axis=1)[:, self.family_of]
            for names in zip(*(family.own for family in self.families), strict=True)
        )
        plx = self.parallax - offset
        logs, chances = [], []
        for share, off, extra in ((1.0 - fraction, 0.0, 0.0), (fraction, shift, width**2)):
            place, spread = a - off, v + extra
            with np.errstate(divide="ignore"):
                weight = np.log(share)
            logs.append(weight + self.distances.log_integrals(place, spread, plx, err, rate))
            chances.append(weight + self._log_chance(place, spread, offset, err, rate))
        total, chance = np.logaddexp(*logs), np.logaddexp(*chances)
        return Mixed(total - chance, logs[1] - logs[0])

    def measured(self, values: Values) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
        """What each star says of its modulus: by its magnitude and by its parallax.

        Returns
        -------
        near, variance : array, shape (b, n)
            Apparent minus absolute magnitude [mag], and its variance [mag^2].
        parallax, error : array, shape (b, n)
            Without offsets, and its error [mas].
        """
        near, variance, _ = self._magnitudes(values)
        offset, error = self._parallaxes(values)
        parallax = self.parallax - offset[:, : len(self.parallax)]
        return near, variance, parallax, np.broadcast_to(error, parallax.shape)

    def _magnitudes(self, values: Values) -> tuple[FloatArray, FloatArray, FloatArray | float]:
        """Apparent minus absolute magnitudes, variances, and the density of what else is measured.

        That is of metallicities and colours, where they have populations.
        """
        coefficients = np.stack([values(name) for name in self.coefficients], axis=1)
        scatter2 = np.stack([values(name) ** 2 for name in self.scatters], axis=1)
        measured: FloatArray | float = 0.0
        index, own = self.magnitude[None, :], self.variance[None, :]
        if self.colours is not None:
            told = self.colours.at(values)
            index, own = told.index, told.variance
            if told.pull is not None and told.weight is not None:
                mean = values(PARALLAX_COLOUR)[:, None] + values(SLOPE)[:, None] * self.x
                off = self.colours.colour - mean
                index = index - told.pull * off
                measured = 0.5 * (np.log(told.weight) - told.weight * off**2 - LOG_2PI)
        distance_like = index - coefficients @ self.design.T
        variance = own + scatter2[:, self.scatter_of]
        if self.errors is not None:
            spread = values("metallicity_spread") if self._population else None
            effect = self.errors.effect(coefficients, spread)
            variance = variance + effect.variance
            if effect.pull is not None and effect.weight is not None:
                off = values("parallax_metallicity")[:, None] - self.metallicity
                distance_like = distance_like - effect.pull * off
                density = 0.5 * (np.log(effect.weight) - effect.weight * off**2 - LOG_2PI)
                measured = measured + density
        return distance_like, variance, measured

    def _parallaxes(self, values: Values) -> tuple[FloatArray, FloatArray]:
        """Offsets, shape (b, n + e), and errors of the stars, shape (b, n) or (1, n) [mas]."""
        amounts = np.stack([values(name) for name in self.offsets], axis=1)
        offset = amounts @ np.stack(list(self.offsets.values()))
        variance = self.parallax_error[None, :] ** 2
        if self.error_scale:
            variance = variance * values("parallax_error_scale")[:, None] ** 2
        return offset, np.sqrt(variance + self.shared_variance)

    def _log_chance(
        self, a: FloatArray, v: FloatArray, offset: FloatArray, err: FloatArray, rate: FloatArray
    ) -> FloatArray:
        """Log of D, shape (b, g); without a selection, of the prior's norm."""
        chosen, n = self.selection, len(self.parallax)
        if chosen is None:
            return self.distances.log_norm(rate)
        order = np.arange(n) if self.sharing is None else self.sharing.order
        starts = np.arange(n + 1) if self.sharing is None else self.sharing.starts
        magnitude = parallax = None
        if self.headroom is not None:
            width = np.sqrt(v + chosen.softness**2)
            magnitude = ((a + self.headroom)[:, order], width[:, order])
        if chosen.parallax_min is not None:
            least = chosen.parallax_min - offset[:, :n]
            parallax = (least[:, order], np.broadcast_to(err, least.shape)[:, order])
        distances = self.distances
        return detection.log_detection(
            starts,
            magnitude,
            parallax,
            distances.kind,
            rate,
            distances.sight,
            distances.tables,
            distances.flat,
        )

    @property
    def _population(self) -> bool:
        return (
            self.errors is not None
            and self.errors.population
            and self.errors.metallicity_error is not None
        )


def active_coefficients(ladder: Ladder, stars: StarSample) -> dict[str, FloatArray]:
    """The design columns that are not zero throughout for the parallax stars, by name."""
    columns = design(ladder.choices, stars, ladder.hosts)
    return {name: column for name, column in columns.items() if np.any(column != 0.0)}


def parallax_terms(ladder: Ladder) -> ParallaxTerms | None:
    """Collect the parallax stars of a ladder, if it has any."""
    stars, section = ladder.parallax_stars, ladder.choices.anchors.parallaxes
    if stars is None or section is None:
        return None
    if stars.parallax is None or stars.parallax_error is None:
        raise TypeError("a parallax sample without parallaxes")
    columns = active_coefficients(ladder, stars)
    reference = ladder.choices.relation.metallicity
    names, which = scatters(ladder.choices, stars, ladder.hosts)
    offsets = offset_terms(ladder.choices, stars, ladder.hosts)
    named = _named_clusters(section, stars)
    measured = [section.clusters[name] for _, name in named]
    own = np.array([float(cluster.offset) for cluster in measured])
    sharing = sharing_of(stars, [place for place, _ in named])
    outliers = outliers_of(ladder.choices, PARALLAXES)
    laws, law_of = families(ladder, stars, outliers, PARALLAXES) if outliers else ((), which)
    return ParallaxTerms(
        families=laws,
        family_of=law_of,
        coefficients=tuple(columns),
        design=np.stack(list(columns.values()), axis=1),
        magnitude=stars.magnitude,
        variance=stars.variance,
        parallax=stars.parallax,
        parallax_error=stars.parallax_error,
        metallicity=np.zeros(len(stars))
        if reference == "none"
        else stars.metallicity - reference.reference,
        scatters=names,
        scatter_of=which,
        errors=_active_errors(ladder, stars, tuple(columns)),
        offsets={
            name: np.concatenate([column, own if name == "parallax_offset" else 0.0 * own])
            for name, column in offsets.columns.items()
        },
        shared_variance=offsets.variance,
        error_scale=ladder.choices.states_prior("parallax_error_scale"),
        cluster_parallax=np.array([cluster.parallax for cluster in measured]),
        cluster_error=np.array([cluster.error for cluster in measured]),
        distances=distances_of(section, stars, sharing),
        sharing=sharing,
        selection=section.selection,
        headroom=stars.extras.headroom,
        colours=colours_of(ladder, stars),
        x=stars.log_period - float(np.log10(ladder.choices.relation.pivot)),
    )


def parallax_parameters(ladder: Ladder) -> tuple[str, ...]:
    """Parameters of the parallaxes that are no coefficients of the relation."""
    stars, section = ladder.parallax_stars, ladder.choices.anchors.parallaxes
    if stars is None or section is None:
        return ()
    names = [*offset_terms(ladder.choices, stars, ladder.hosts).columns]
    if ladder.choices.states_prior("parallax_error_scale"):
        names.append("parallax_error_scale")
    if section.exponential is not None:
        names.append("distance_length")
    return tuple(names)


def _named_clusters(section: Parallaxes, stars: StarSample) -> list[tuple[int, str]]:
    """Clusters of the sample that have a parallax of their own: number and name."""
    known = enumerate(stars.extras.clusters)
    return [(place, name) for place, name in known if name in section.clusters]


def _active_errors(
    ladder: Ladder, stars: StarSample, active: tuple[str, ...]
) -> InputErrors | None:
    """Errors of the inputs, their sensitivities cut down to the active coefficients."""
    errors = input_errors(ladder, stars)
    if errors is None:
        return None
    every = tuple(design(ladder.choices, stars, ladder.hosts))
    places = [every.index(name) for name in active]
    return replace(
        errors,
        period_slope=None if errors.period_slope is None else errors.period_slope[:, places],
        metallicity_slope=None
        if errors.metallicity_slope is None
        else errors.metallicity_slope[:, places],
    )
