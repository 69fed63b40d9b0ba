r"""The colours of stars, where the ratio of total to selective absorption is free.

Of a star with intrinsic colour c_1 x + k + d (d normal with the intrinsic scatter
tau) and excess E of dust about the mean of its host (normal with the spread sigma),
magnitude and true colour are

    m = mu + M + R C + eta d + e ,     C = k + c_1 x + d + E ,

so that intrinsic colour counts R + eta times and dust R times (Mandel et al. 2017,
ApJ 842, 93, for supernovae).  M is then the relation of the index m - R C, as for a
fixed ratio.  The measured index u = m - R c and the measured colour c, whose
errors may share a band, are jointly normal: integrated over d and E,

    var u  = s_m^2 - 2 R s_mc + R^2 s_c^2 + eta^2 tau^2   (and the relation's scatter),
    cov    = s_mc - R s_c^2 + eta tau^2 ,     var c = s_c^2 + tau^2 + sigma^2 ,

of which u given c, and c alone, make two independent rows.  The mean colour k of
each host has a wide normal prior and is integrated out.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from ladderfit.choices import Reddening
from ladderfit.ladder import Ladder
from ladderfit.samples import FloatArray, IntArray, StarSample

Values = Callable[[str], FloatArray]

RATIO, SLOPE = "reddening_ratio", "intrinsic_colour_slope"
SCATTER, TERM = "intrinsic_colour_scatter", "intrinsic_colour_term"
SPREAD = "reddening_spread"
PARALLAX_SPREAD, PARALLAX_COLOUR = "parallax_reddening_spread", "parallax_colour"
MEAN_COLOUR, MEAN_COLOUR_SD = 1.0, 3.0  # mag: prior of a host's mean colour


@dataclass(frozen=True, eq=False)
class ColourEffect:
    """What colours do at given parameter values, each of shape (b, n).

    Attributes
    ----------
    index : array
        The measured index u [mag].
    variance : array
        Of u given the colour, without the relation's scatter [mag^2].
    pull : array or None
        Change of the mean of u per magnitude of colour above its mean; None without
        populations.
    weight : array or None
        Inverse variance of the colour about its mean [1/mag^2].
    """

    index: FloatArray
    variance: FloatArray
    pull: FloatArray | None
    weight: FloatArray | None


@dataclass(frozen=True, eq=False)
class Colours:
    """Colours of one sample, arrays of shape (n,) in mag or mag^2.

    Attributes
    ----------
    band, colour, band_variance, colour_variance, covariance : array
    treatment : Reddening
    spread : str
        Name of the parameter that spreads this sample's reddening.
    """

    band: FloatArray
    colour: FloatArray
    band_variance: FloatArray
    colour_variance: FloatArray
    covariance: FloatArray
    treatment: Reddening
    spread: str

    def only(self, chosen: IntArray) -> Colours:
        """The same for some of the stars."""
        return Colours(
            self.band[chosen],
            self.colour[chosen],
            self.band_variance[chosen],
            self.colour_variance[chosen],
            self.covariance[chosen],
            self.treatment,
            self.spread,
        )

    def at(self, values: Values) -> ColourEffect:
        """The effect at given parameter values, `values(name)` of shape (b,)."""
        ratio = values(RATIO)[:, None]
        index = self.band - ratio * self.colour
        noise = self.band_variance - ratio * (2.0 * self.covariance - ratio * self.colour_variance)
        if not self.treatment.population:
            return ColourEffect(index, noise, None, None)
        shared = self.covariance - ratio * self.colour_variance
        spread = values(self.spread)[:, None] ** 2
        if self.treatment.intrinsic:
            term, tau2 = values(TERM)[:, None], values(SCATTER)[:, None] ** 2
            noise = noise + term**2 * tau2
            shared = shared + term * tau2
            spread = spread + tau2
        weight = 1.0 / (self.colour_variance + spread)
        pull = shared * weight
        return ColourEffect(index, noise - pull * shared, pull, weight)


def colours_of(ladder: Ladder, stars: StarSample | None) -> Colours | None:
    """The colours of a sample where the ratio is free, or None."""
    treatment = ladder.choices.relation.reddening
    if stars is None or treatment == "fixed":
        return None
    light = stars.photometry
    if (
        light is None
        or light.band_variance is None
        or light.colour_variance is None
        or light.covariance is None
    ):
        raise TypeError("a free ratio without the errors of its colour")  # refused by the choices
    return Colours(
        light.band,
        light.colour,
        light.band_variance,
        light.colour_variance,
        light.covariance,
        treatment,
        SPREAD if stars.parallax is None else PARALLAX_SPREAD,
    )


def colour_parameters(ladder: Ladder) -> tuple[str, ...]:
    """Parameters of the colours that are no linear coefficients."""
    treatment = ladder.choices.relation.reddening
    samples = (ladder.cepheids, ladder.parallax_stars)
    if treatment == "fixed" or all(stars is None for stars in samples):
        return ()
    names = [RATIO]
    if treatment.intrinsic:
        names += [SCATTER, TERM]
    if treatment.population and ladder.cepheids is not None:
        names.append(SPREAD)
    if treatment.population and ladder.parallax_stars is not None:
        names += [PARALLAX_COLOUR, PARALLAX_SPREAD]
    return tuple(names)


def colour_coefficients(ladder: Ladder) -> tuple[str, ...]:
    """Linear coefficients of the colours: their slope with log period, where they have one."""
    treatment = ladder.choices.relation.reddening
    samples = (ladder.cepheids, ladder.parallax_stars)
    if treatment == "fixed" or not treatment.population or all(s is None for s in samples):
        return ()
    return (SLOPE,)
