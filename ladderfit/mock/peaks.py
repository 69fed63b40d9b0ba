"""Simulated supernovae: in galaxies with Cepheids, and carried along by the expansion."""

from __future__ import annotations

import numpy as np
from astropy.table import Table

from ladderfit.mock.light_curves import light_curve_columns
from ladderfit.mock.plan import Plan
from ladderfit.mock.tables import number_column, text_column
from ladderfit.priors import FloatArray

LIGHT = 299792.458  # km/s
_SOLAR_MOTION = 369.0  # km/s, between the frames of the Sun and of the background radiation


def luminosity_distance(redshift: FloatArray, h0: float, q0: float, j0: float) -> FloatArray:
    """Luminosity distance [Mpc] to third order in redshift, for a flat universe (Visser 2004)."""
    second = 0.5 * (1.0 - q0)
    third = (1.0 - q0 - 3.0 * q0**2 + j0) / 6.0
    series = 1.0 + second * redshift - third * redshift**2
    return np.asarray(LIGHT * redshift * series / h0)


def peak_in_flow(
    truth: tuple[float, float, float, float],
    redshift: FloatArray,
    heliocentric: FloatArray,
    velocity: FloatArray,
) -> FloatArray:
    """Mean peak magnitude at an observed redshift, given each object's own velocity.

    Parameters
    ----------
    truth : tuple of float
        Standard peak magnitude [mag], H0 [km/s/Mpc], q0 and j0.
    redshift, heliocentric : array, shape (n,)
        Observed, in the frame of the background radiation and of the Sun.
    velocity : array, shape (n,)
        Peculiar velocity along the line of sight [km/s].
    """
    peak, h0, q0, j0 = truth
    cosmic = (1.0 + redshift) / (1.0 + velocity / LIGHT) - 1.0
    distance = luminosity_distance(cosmic, h0, q0, j0) * (1.0 + heliocentric) / (1.0 + cosmic)
    return np.asarray(peak + 25.0 + 5.0 * np.log10(distance))


def host_supernovae(plan: Plan, rng: np.random.Generator) -> Table:
    """Standardised peaks of the supernovae in the plan's galaxies."""
    where = [host for host in plan.hosts for _ in range(host.supernovae)]
    n = len(where)
    stated = np.round(rng.uniform(0.04, 0.11, n), 3)
    modulus = np.array([host.modulus for host in where])
    true = modulus + plan.peak_magnitude + plan.peak_scatter * rng.normal(size=n)
    return Table(
        [
            text_column("SN", [f"ES-{number:03d}" for number in range(1, n + 1)], "supernova"),
            text_column("Galaxy", [host.name for host in where], "host galaxy"),
            *_measured_columns(plan, "hosts", true, stated, [host.name for host in where], rng),
        ]
    )


def flow_supernovae(plan: Plan, rng: np.random.Generator) -> Table:
    """Supernovae that follow the expansion, sorted by redshift.

    The observed redshifts are laid out first and the peculiar velocities drawn
    around them, so that a cut in observed redshift selects nothing else.
    """
    low, high = plan.flow_redshifts
    inside = low + (high - low) * rng.beta(1.2, 2.2, plan.flow)
    nearby = rng.random(plan.flow_outside) < 0.7
    outside = np.where(
        nearby,
        rng.uniform(0.010, low, plan.flow_outside),
        rng.uniform(high, high + 0.03, plan.flow_outside),
    )
    redshift = np.sort(np.round(np.concatenate([inside, outside]), 5))
    n = len(redshift)
    solar = _SOLAR_MOTION * rng.uniform(-1.0, 1.0, n)
    heliocentric = np.round((1.0 + redshift) * (1.0 + solar / LIGHT) - 1.0, 5)
    velocity = plan.peculiar_velocity * rng.normal(size=n)
    truth = (plan.peak_magnitude, plan.hubble_constant, plan.q0, plan.j0)
    true = peak_in_flow(truth, redshift, heliocentric, velocity)
    true = true + plan.peak_scatter * rng.normal(size=n)
    stated = np.round(rng.uniform(0.05, 0.14, n), 3)
    table = Table(
        [
            text_column("SN", [f"EF-{number:03d}" for number in range(1, n + 1)], "supernova"),
            number_column("zcmb", redshift, 5, None, "redshift, background radiation at rest"),
            number_column("zhel", heliocentric, 5, None, "redshift, Sun at rest"),
            *_measured_columns(plan, "expansion", true, stated, None, rng),
        ]
    )
    if plan.light_curves is None:
        return table
    return table[plan.breakage.found(np.asarray(table["c"]))]


def _measured_columns(
    plan: Plan,
    group: str,
    true: FloatArray,
    stated: FloatArray,
    galaxies: list[str] | None,
    rng: np.random.Generator,
) -> list[object]:
    """Peaks as measured: standardised, or with the widths and colours of their light curves."""
    light = plan.light_curves
    if light is None:
        return _peak_columns(true, stated, rng)
    population = light.hosts if group == "hosts" else light.expansion
    return light_curve_columns(light, population, true, stated, galaxies, rng)


def _peak_columns(true: FloatArray, stated: FloatArray, rng: np.random.Generator) -> list[object]:
    measured = true + stated * rng.normal(size=len(true))
    return [
        number_column("mB", measured, 3, "mag", "standardised peak magnitude"),
        number_column("e_mB", stated, 3, "mag", "error of mB, without the common scatter"),
    ]
