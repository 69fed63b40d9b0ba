"""The parallax stars' share of the log density."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from ladderfit.choices import LARGEST_MODULUS, DistancePrior
from ladderfit.kernels.arrow import LOG_2PI
from ladderfit.kernels.quadrature import log_parallax_integrals
from ladderfit.ladder import Ladder
from ladderfit.posterior.cepheids import Values
from ladderfit.posterior.errors_in_inputs import InputErrors, input_errors
from ladderfit.relations import design, scatters
from ladderfit.samples import FloatArray, IntArray, StarSample

VOLUME_TILT = 0.6 * float(np.log(10.0))


def log_modulus_norm(prior: DistancePrior) -> float:
    """Log of the integral of the unnormalised distance prior from 0 to the largest modulus."""
    if prior == "flat in modulus":
        return float(np.log(LARGEST_MODULUS))
    return float(VOLUME_TILT * LARGEST_MODULUS - np.log(VOLUME_TILT))


def tilt_of(prior: DistancePrior) -> float:
    """The prior of a modulus is exp(tilt mu): 0, or 0.6 ln 10 where uniform in volume."""
    return 0.0 if prior == "flat in modulus" else VOLUME_TILT


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
    prior : str
        Prior of each star's distance.
    errors : InputErrors or None
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
    prior: DistancePrior
    errors: InputErrors | None

    def log_density(self, values: Values) -> FloatArray:
        """Log density of every star, shape (b, n), at the given parameter values."""
        coefficients = np.stack([values(name) for name in self.coefficients], axis=1)
        scatter2 = np.stack([values(name) ** 2 for name in self.scatters], axis=1)
        distance_like = self.magnitude - coefficients @ self.design.T
        variance = self.variance + scatter2[:, self.scatter_of]
        extra = 0.0 - log_modulus_norm(self.prior)
        measured: FloatArray | float = extra
        if self.errors is not None:
            spread = values("metallicity_spread") if self._population else None
            effect = self.errors.effect(coefficients, spread)
            variance = variance + effect.variance
            if effect.pull is not None and effect.weight is not None:
                off = values("parallax_metallicity")[:, None] - self.metallicity
                distance_like = distance_like - effect.pull * off
                measured = extra + 0.5 * (np.log(effect.weight) - effect.weight * off**2 - LOG_2PI)
        parallax = self.parallax - values("parallax_offset")[:, None]
        return measured + log_parallax_integrals(
            distance_like, variance, parallax, self.parallax_error, tilt_of(self.prior)
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
    return ParallaxTerms(
        tuple(columns),
        np.stack(list(columns.values()), axis=1),
        stars.magnitude,
        stars.variance,
        stars.parallax,
        stars.parallax_error,
        np.zeros(len(stars)) if reference == "none" else stars.metallicity - reference.reference,
        names,
        which,
        section.distance_prior,
        _active_errors(ladder, stars, tuple(columns)),
    )


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
