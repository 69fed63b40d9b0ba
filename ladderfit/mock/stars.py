"""Simulated Cepheids, star by star: period, colour, dust, metallicity, light, photometry."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from astropy.table import MaskedColumn, Table

from ladderfit.mock.plan import Host, Plan
from ladderfit.mock.tables import number_column, text_column
from ladderfit.samples import BoolArray, FloatArray

BANDS = ("V", "I", "H")

# Dust: A_I / E(V-I); A_V follows from the definition of the excess, A_H from Plan.ratio.
_INFRARED = 1.45
# Intrinsic colour (V-I)_0 at 10 d, its slope with log P and its width; (I-H)_0 over (V-I)_0.
_COLOUR, _COLOUR_SLOPE, _COLOUR_WIDTH, _COLOUR_RATIO = 0.72, 0.26, 0.07, 1.05
# Number of stars per unit log P falls as 10^(-_DECLINE log P).
_DECLINE = 1.3
# Photometric error per band: floor, error at a magnitude, that magnitude, growth per magnitude.
_ERRORS = {
    "V": (0.012, 0.080, 26.0, 0.16),
    "I": (0.012, 0.080, 25.0, 0.16),
    "H": (0.020, 0.220, 24.0, 0.16),
}


@dataclass(frozen=True)
class Stars:
    """True properties of simulated stars, each of shape (n,).

    Attributes
    ----------
    period : array
        Observed period, of the overtone where there is one [d].
    fundamental : array
        Period of the fundamental mode [d].
    overtone : array of bool
        Whether the star pulsates in the first overtone.
    metallicity : array
        12+log(O/H).
    magnitudes : mapping of str to array
        Apparent magnitude in V, I, H with dust, without noise [mag].
    outlier : array of bool, or None
        Whether the star does not follow the relation; None where all do.
    """

    period: FloatArray
    fundamental: FloatArray
    overtone: np.ndarray[tuple[int], np.dtype[np.bool_]]
    metallicity: FloatArray
    magnitudes: dict[str, FloatArray]
    outlier: BoolArray | None = None


def periods(rng: np.random.Generator, size: int, shortest: float, longest: float) -> FloatArray:
    """Draw periods [d] whose number per unit log P declines, between two bounds."""
    low, high = 10.0 ** (-_DECLINE * np.log10([shortest, longest]))
    return np.asarray((low + (high - low) * rng.random(size)) ** (-1.0 / _DECLINE))


def overtone_period(fundamental: FloatArray) -> FloatArray:
    """Period of the first overtone [d]: about 0.7 of the fundamental one, less for longer ones."""
    return np.asarray(fundamental * (0.72 - 0.027 * np.log10(fundamental)))


def absolute_index(plan: Plan, fundamental: FloatArray, metallicity: FloatArray) -> FloatArray:
    """Mean absolute Wesenheit magnitude at a period and metallicity [mag]."""
    dex = np.log10(fundamental / plan.pivot)
    return np.asarray(
        plan.zero_point + plan.slope * dex + plan.metallicity * (metallicity - plan.reference)
    )


def shine(
    plan: Plan,
    rng: np.random.Generator,
    fundamental: FloatArray,
    metallicity: FloatArray,
    modulus: FloatArray,
    reddening: float,
    *,
    in_anchor: bool = False,
) -> dict[str, FloatArray]:
    """Apparent magnitudes through dust, without noise.

    The star's own deviation from the relation is one draw per star in the index;
    colour and dust then spread it over the bands, so that H - ratio (V-I) knows neither.

    Parameters
    ----------
    fundamental, metallicity, modulus : array, shape (n,)
        Period [d], 12+log(O/H) and true distance modulus [mag].
    reddening : float
        Mean colour excess E(V-I) [mag].
    in_anchor : bool
        Whether they are parallax stars or in a geometric anchor.

    Returns
    -------
    dict of str to array, shape (n,)
        V, I and H [mag].
    """
    n, wrong = len(fundamental), plan.breakage
    index = absolute_index(plan, fundamental, metallicity) + plan.scatter * rng.normal(size=n)
    if in_anchor:
        index = index + wrong.slope_in_anchors * np.log10(fundamental / plan.pivot)
    colour = _COLOUR + _COLOUR_SLOPE * np.log10(fundamental / 10.0)
    colour = colour + _COLOUR_WIDTH * rng.normal(size=n)
    excess = rng.exponential(reddening, n)
    h = index + plan.ratio * colour
    i = h + _COLOUR_RATIO * colour
    v = i + colour
    dust = {"V": _INFRARED + 1.0, "I": _INFRARED, "H": plan.ratio + wrong.dust_ratio}
    modulus = modulus - wrong.brightening(modulus)
    bare = {"V": v, "I": i, "H": h}
    return {band: modulus + bare[band] + dust[band] * excess for band in BANDS}


def host_stars(plan: Plan, rng: np.random.Generator, host: Host) -> Stars:
    """The Cepheids observed in one galaxy."""
    n = host.cepheids
    fundamental = periods(rng, n, host.shortest, plan.longest)
    radius = rng.random(n)
    metallicity = np.round(host.metallicity - host.gradient * radius, 3)
    modulus = np.full(n, host.modulus)
    stars = _pulsate(
        plan,
        rng,
        fundamental,
        metallicity,
        modulus,
        host.reddening,
        host.overtones,
        in_anchor=host.geometric_error is not None,
    )
    if plan.contamination is None:
        return stars
    off, shift = plan.contamination.draw(rng, stars.period)
    light = {band: values + shift for band, values in stars.magnitudes.items()}
    return replace(stars, magnitudes=light, outlier=off)


def milky_way_stars(plan: Plan, rng: np.random.Generator) -> tuple[Stars, FloatArray]:
    """Cepheids of the Milky Way, and their true moduli [mag], uniform over the plan's range."""
    n = plan.parallax_stars
    fundamental = periods(rng, n, 4.5, 45.0)
    metallicity = np.round(rng.normal(plan.reference + 0.04, 0.12, n), 3)
    modulus = rng.uniform(*plan.parallax_moduli, n)
    stars = _pulsate(plan, rng, fundamental, metallicity, modulus, 0.45, 0.2, in_anchor=True)
    return stars, modulus


def photometry(stars: Stars, rng: np.random.Generator) -> dict[str, MaskedColumn]:
    """Measured magnitudes and their stated errors; the errors follow the true brightness."""
    columns = {}
    for band in BANDS:
        floor, error, faint, growth = _ERRORS[band]
        true = stars.magnitudes[band]
        grown = error * 10.0 ** (growth * (true - faint))
        spread = np.exp(0.15 * rng.normal(size=len(true)))
        stated = np.round(np.hypot(floor, grown) * spread, 3)
        measured = true + stated * rng.normal(size=len(true))
        columns[band] = number_column(f"{band}mag", measured, 3, "mag", f"mean {band} magnitude")
        columns[f"e_{band}"] = number_column(f"e_{band}", stated, 3, "mag", f"error of {band}mag")
    return columns


def star_table(names: list[str], stars: Stars, rng: np.random.Generator) -> Table:
    """Table of stars with names, periods, modes, metallicities and photometry."""
    seen = photometry(stars, rng)
    columns = [
        text_column("ID", names, "star"),
        number_column("P", stars.period, 4, "d", "period of pulsation"),
        text_column("Mode", np.where(stars.overtone, "1O", "F"), "F fundamental, 1O overtone"),
        number_column("OH", stars.metallicity, 3, "dex", "12+log(O/H)"),
        *(seen[key] for band in BANDS for key in (band, f"e_{band}")),
    ]
    if stars.outlier is not None:
        told = np.where(stars.outlier, "yes", "no")
        columns.append(text_column("outlier", told, "whether it was simulated as an outlier"))
    return Table(columns)


def _pulsate(
    plan: Plan,
    rng: np.random.Generator,
    fundamental: FloatArray,
    metallicity: FloatArray,
    modulus: FloatArray,
    reddening: float,
    overtones: float,
    *,
    in_anchor: bool,
) -> Stars:
    overtone = (rng.random(len(fundamental)) < overtones) & (fundamental < plan.overtone_limit)
    period = np.where(overtone, overtone_period(fundamental), fundamental)
    magnitudes = shine(plan, rng, fundamental, metallicity, modulus, reddening, in_anchor=in_anchor)
    return Stars(period, fundamental, overtone, metallicity, magnitudes)
