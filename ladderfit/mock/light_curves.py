"""Simulated widths and colours of supernovae, and what they do to the peak.

m = mu + M - alpha w + beta c + step with the host's mass + offset of the survey + e
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from ladderfit.mock.tables import number_column, text_column
from ladderfit.names import with_group
from ladderfit.priors import FloatArray

Pair = tuple[float, float]


@dataclass(frozen=True)
class Population:
    """Mean and spread of true width and colour, and the mean and spread of log host mass."""

    width: Pair
    colour: Pair
    log_mass: Pair


@dataclass(frozen=True)
class LightCurves:
    """What is true of light curves, and how they are measured.

    Attributes
    ----------
    alpha, beta, mass_step : float
        Of the relation; the step is centred, at a log mass of `step_at`.
    hosts, expansion : Population
    width_errors, colour_errors : pair of float
        Errors are uniform in these ranges.
    correlations : tuple of float
        Of the errors of peak and width, peak and colour, width and colour.
    offsets : mapping of str to float
        Photometric offset of each survey [mag].
    """

    alpha: float = 0.14
    beta: float = 3.1
    mass_step: float = -0.06
    step_at: float = 10.0
    hosts: Population = Population((0.35, 0.8), (-0.02, 0.08), (9.9, 0.5))
    expansion: Population = Population((-0.1, 1.0), (0.0, 0.09), (10.3, 0.7))
    width_errors: Pair = (0.2, 0.6)
    colour_errors: Pair = (0.02, 0.05)
    correlations: tuple[float, float, float] = (0.2, 0.5, -0.1)
    offsets: Mapping[str, float] = field(
        default_factory=lambda: {"Ennick": 0.0, "Marl": 0.03, "Sedge": -0.02}
    )

    def truth(self) -> dict[str, float]:
        """True values by parameter name."""
        values = {name: float(getattr(self, name)) for name in ("alpha", "beta", "mass_step")}
        for group, population in (("hosts", self.hosts), ("expansion", self.expansion)):
            for name in ("width", "colour"):
                mean, spread = getattr(population, name)
                values[with_group(f"{name}_mean", group)] = mean
                values[with_group(f"{name}_spread", group)] = spread
        for survey, offset in self.offsets.items():
            if offset:
                values[with_group("survey_offset", survey)] = offset
        return values


def light_curve_columns(
    plan: LightCurves,
    population: Population,
    bare: FloatArray,
    stated: FloatArray,
    galaxies: list[str] | None,
    rng: np.random.Generator,
) -> list[object]:
    """Columns of peaks, widths, colours and all that goes with them.

    Parameters
    ----------
    plan : LightCurves
    population : Population
        That the supernovae come from.
    bare : array, shape (n,)
        True peaks without the terms, each one's own scatter included [mag].
    stated : array, shape (n,)
        Errors of the peaks [mag].
    galaxies : list of str, length n, or None
        Supernovae in one galaxy share its mass; None where each has its own.
    rng : Generator
    """
    n = len(bare)
    width = population.width[0] + population.width[1] * rng.normal(size=n)
    colour = population.colour[0] + population.colour[1] * rng.normal(size=n)
    mass = np.round(population.log_mass[0] + population.log_mass[1] * rng.normal(size=n), 2)
    if galaxies is not None:
        mass = mass[[galaxies.index(name) for name in galaxies]]
    survey = np.array(rng.choice(list(plan.offsets), n), dtype=np.str_)
    true = bare - plan.alpha * width + plan.beta * colour
    true += plan.mass_step * np.where(mass >= plan.step_at, 0.5, -0.5)
    true += np.array([plan.offsets[str(name)] for name in survey])
    errors = np.stack(
        [
            stated,
            np.round(rng.uniform(*plan.width_errors, n), 3),
            np.round(rng.uniform(*plan.colour_errors, n), 3),
        ],
        axis=1,
    )
    noise = correlated_noise(plan.correlations, errors, rng)
    seen = np.stack([true, width, colour], axis=1) + noise
    mw, mc, wc = (
        rho * errors[:, i] * errors[:, j]
        for rho, (i, j) in zip(plan.correlations, ((0, 1), (0, 2), (1, 2)), strict=True)
    )
    return [
        number_column("mB", seen[:, 0], 3, "mag", "peak magnitude, not standardised"),
        number_column("e_mB", errors[:, 0], 3, "mag", "error of mB, without the common scatter"),
        number_column("w", seen[:, 1], 3, None, "width of the light curve, 0 is usual"),
        number_column("e_w", errors[:, 1], 3, None, "error of w"),
        number_column("c", seen[:, 2], 3, "mag", "colour at the peak"),
        number_column("e_c", errors[:, 2], 3, "mag", "error of c"),
        number_column("cov_mw", mw, 6, "mag", "covariance of the errors of mB and w"),
        number_column("cov_mc", mc, 6, "mag2", "covariance of the errors of mB and c"),
        number_column("cov_wc", wc, 6, "mag", "covariance of the errors of w and c"),
        number_column("logM", mass, 2, "dex(Msun)", "log10 of the galaxy's stellar mass"),
        text_column("Survey", survey, "survey that observed it"),
    ]


def correlated_noise(
    correlations: tuple[float, float, float], errors: FloatArray, rng: np.random.Generator
) -> FloatArray:
    """Errors of peak, width and colour, shape (n, 3), for standard errors of that shape."""
    first, second, third = correlations
    table = np.array([[1.0, first, second], [first, 1.0, third], [second, third, 1.0]])
    white = rng.normal(size=errors.shape)
    return np.asarray(errors * (white @ np.linalg.cholesky(table).T))
