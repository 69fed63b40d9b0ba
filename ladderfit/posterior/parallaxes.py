"""The parallax stars' share of the log density."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ladderfit.choices import LARGEST_MODULUS, DistancePrior
from ladderfit.kernels.quadrature import log_parallax_integrals
from ladderfit.ladder import Ladder
from ladderfit.relations import design_matrix

FloatArray = npt.NDArray[np.float64]

VOLUME_TILT = 0.6 * float(np.log(10.0))


def log_modulus_norm(prior: DistancePrior) -> float:
    """Log of the integral of the unnormalised distance prior from 0 to the largest modulus."""
    if prior == "flat in modulus":
        return float(np.log(LARGEST_MODULUS))
    return float(VOLUME_TILT * LARGEST_MODULUS - np.log(VOLUME_TILT))


def tilt_of(prior: DistancePrior) -> float:
    """The prior of a modulus is exp(tilt mu): 0, or 0.6 ln 10 where uniform in volume."""
    return 0.0 if prior == "flat in modulus" else VOLUME_TILT


@dataclass(frozen=True)
class ParallaxTerms:
    """The stars with parallaxes, ready for the quadrature.

    Attributes
    ----------
    design : array, shape (n, k)
        Columns of the relation's coefficients.
    magnitude, variance, parallax, parallax_error : array, shape (n,)
    prior : str
        Prior of each star's distance.
    """

    design: FloatArray
    magnitude: FloatArray
    variance: FloatArray
    parallax: FloatArray
    parallax_error: FloatArray
    prior: DistancePrior

    def log_density(
        self, coefficients: FloatArray, scatter: FloatArray, offset: FloatArray
    ) -> FloatArray:
        """Per star, shape (b, n); `coefficients` has shape (b, k), the others (b,)."""
        distance_like = self.magnitude - coefficients @ self.design.T
        integral = log_parallax_integrals(
            distance_like,
            self.variance,
            scatter**2,
            self.parallax,
            offset,
            self.parallax_error,
            tilt_of(self.prior),
        )
        return integral - log_modulus_norm(self.prior)


def parallax_terms(ladder: Ladder) -> ParallaxTerms | None:
    """Collect the parallax stars of a ladder, if it has any."""
    stars, section = ladder.parallax_stars, ladder.choices.anchors.parallaxes
    if stars is None or section is None:
        return None
    if stars.parallax is None or stars.parallax_error is None:
        raise TypeError("a parallax sample without parallaxes")
    return ParallaxTerms(
        design_matrix(ladder.choices.relation, stars),
        stars.magnitude,
        stars.variance,
        stars.parallax,
        stars.parallax_error,
        section.distance_prior,
    )
