"""Which numbers the prior makes: sensitivity to the power of prior and likelihood.

A prior density raised to a power a little above or below 1 is a slightly stronger or
weaker prior; the draws are reweighted accordingly and each number's distribution is
compared with the one before (Kallioinen, Paananen, Buerkner & Vehtari 2024, Stat.
Comput. 34, 57).  The measure is the cumulative Jensen-Shannon distance per doubling
of the power.  Priors are raised all together and one by one, and so is the likelihood.

Priors of what belongs to the data are left alone: errors that anchors or parallaxes
share, populations of metallicity, moduli of hosts and of parallax stars.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from arviz_stats.base import array_stats

from ladderfit.names import HEADLINE, base_name, parameter
from ladderfit.predictive.likelihood import log_terms
from ladderfit.priors import Prior
from ladderfit.result import Result
from ladderfit.samples import FloatArray

SENSITIVE = 0.05  # Kallioinen et al. 2024
STEP = 1.01  # the powers are this and its inverse
BY_DATA = "made by the data"
BY_PRIOR = "made by the prior"
BY_BOTH = "prior and data pull apart"
BY_NEITHER = "moved by neither"


@dataclass(frozen=True, eq=False, repr=False)
class PriorSensitivity:
    """How much each number owes to priors and to data.

    Attributes
    ----------
    table : DataFrame
        One row per parameter: ``prior`` and ``likelihood`` (sensitivities),
        ``prior_shift`` and ``likelihood_shift`` (change of the mean per doubling of
        the power, in posterior standard deviations), ``largest`` (the prior it owes
        most to) and ``verdict``.
    components : DataFrame
        Sensitivity of each parameter (row) to each prior alone (column).
    shifts, widths : DataFrame
        The same as change of the mean per doubling of the power, in posterior standard
        deviations, and as relative change of the standard deviation.
    priors : mapping of str to Prior
        The priors, by parameter.
    """

    table: pd.DataFrame
    components: pd.DataFrame
    shifts: pd.DataFrame
    widths: pd.DataFrame
    priors: dict[str, Prior]

    def __repr__(self) -> str:
        """How many numbers a prior makes; `sentences` has the words."""
        made = int(np.sum(self.table["prior"] > SENSITIVE))
        return f"<PriorSensitivity: {made} of {len(self.table)} parameters feel their priors>"

    def sentences(self) -> list[str]:
        """Which numbers the priors make, in words; one sentence if none."""
        found = []
        for name, row in self.table.iterrows():
            if row["prior"] <= SENSITIVE:
                continue
            found.append(self._sentence(str(name), row))
        if not found:
            largest = float(np.max(self.table["prior"].to_numpy(), initial=0.0))
            found.append(
                f"No number owes much to its priors: the largest sensitivity is {largest:.3f}, "
                f"and {SENSITIVE:g} would be worth a look."
            )
        return found

    def _sentence(self, name: str, row: pd.Series[Any]) -> str:
        words, of = parameter(name).words, str(row["largest"])
        prior = self.priors[of]
        source = "its own prior" if of == name else f"the prior of the {parameter(of).words} ({of})"
        place = list(self.shifts.columns).index(of), list(self.shifts.index).index(name)
        mean, width = (each.to_numpy()[place[::-1]] for each in (self.shifts, self.widths))
        verdict = {
            BY_PRIOR: "the data have little to say of it",
            BY_BOTH: "the data pull against it",
        }.get(str(row["verdict"]), "the data would move it too")
        return (
            f"The {words} ({name}) owes to {source}, {prior}: at twice that prior's power its "
            f"mean would move by {mean:+.2f} of its error and the error by "
            f"{100.0 * width:+.0f} %, to first order; {verdict}."
        )


def prior_sensitivity(result: Result) -> PriorSensitivity:
    """Sensitivity of every headline parameter to priors and likelihood.

    Parameters
    ----------
    result : Result
        With its ladder.

    Raises
    ------
    LadderfitError
        If the ladder's posterior holds more than is known here, or its tables are missing.
    """
    terms = log_terms(result)
    wanted = {
        name: values
        for name, values in terms.draws.items()
        if base_name(name) in HEADLINE and np.ptp(values) > 0.0
    }
    together = np.sum(list(terms.priors.values()), axis=0) if terms.priors else None
    components: dict[str, dict[str, float]] = {}
    shifts: dict[str, dict[str, float]] = {}
    widths: dict[str, dict[str, float]] = {}
    rows: dict[str, tuple[float, float, float, float, str, str]] = {}
    for name, values in wanted.items():
        one = {of: sensitivity(values, density) for of, density in terms.priors.items()}
        moved = {of: shift(values, density) for of, density in terms.priors.items()}
        components[name], shifts[name] = one, moved
        widths[name] = {of: narrowing(values, density) for of, density in terms.priors.items()}
        prior = 0.0 if together is None else sensitivity(values, together)
        by_prior = 0.0 if together is None else shift(values, together)
        data = sensitivity(values, terms.likelihood)
        by_data = shift(values, terms.likelihood)
        largest = max(one, key=lambda of: one[of], default="")
        rows[name] = (prior, data, by_prior, by_data, largest, verdict(prior, data))
    columns = ["prior", "likelihood", "prior_shift", "likelihood_shift", "largest", "verdict"]
    return PriorSensitivity(
        pd.DataFrame.from_dict(rows, orient="index", columns=columns),
        pd.DataFrame.from_dict(components, orient="index"),
        pd.DataFrame.from_dict(shifts, orient="index"),
        pd.DataFrame.from_dict(widths, orient="index"),
        {name: result.choices.prior(name) for name in terms.priors},
    )


def sensitivity(values: FloatArray, log_density: FloatArray, step: float = STEP) -> float:
    """Cumulative Jensen-Shannon distance per doubling of a component's power.

    Parameters
    ----------
    values, log_density : array, shape (n,)
        Draws of a number, and the log of the component that is raised.
    step : float
        The component is raised to this power and to its inverse.
    """
    if np.ptp(log_density) == 0.0 or np.ptp(values) == 0.0:
        return 0.0
    lower, upper = (_raised(log_density, power) for power in (1.0 / step, step))
    found = array_stats.power_scale_sense(values[None], lower[None], upper[None], 1.0 / step, step)
    return float(found)


def shift(values: FloatArray, log_density: FloatArray) -> float:
    """Change of the mean per doubling of a component's power, in standard deviations.

    The derivative of the mean with respect to the power is the covariance of the
    number with the log of the component.
    """
    spread = float(np.std(values))
    if spread == 0.0:
        return 0.0
    centred = log_density - log_density.mean()
    return float(np.mean((values - values.mean()) * centred)) * math.log(2.0) / spread


def narrowing(values: FloatArray, log_density: FloatArray) -> float:
    """Relative change of the standard deviation per doubling of a component's power.

    To first order, like `shift`: half the covariance of the squared deviation with
    the log of the component, over the variance.
    """
    square = (values - values.mean()) ** 2
    variance = float(square.mean())
    if variance == 0.0:
        return 0.0
    centred = log_density - log_density.mean()
    return 0.5 * float(np.mean(square * centred)) * math.log(2.0) / variance


def verdict(prior: float, likelihood: float) -> str:
    """What a pair of sensitivities says."""
    if prior <= SENSITIVE:
        return BY_DATA if likelihood > SENSITIVE else BY_NEITHER
    return BY_BOTH if likelihood > SENSITIVE else BY_PRIOR


def _raised(log_density: FloatArray, power: float) -> FloatArray:
    """Normalised weights of the component at another power."""
    log_weight = (power - 1.0) * log_density
    weight = np.exp(log_weight - log_weight.max())
    return np.asarray(weight / weight.sum())
