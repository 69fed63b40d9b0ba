"""Posterior predictive checks: whether the model leaves over what it should.

At every draw the deviations of stars and supernovae are standard normal and
independent if the model is true (`ladderfit.posterior.deviations`, and
`peak_deviations` for supernovae).  A check is a number T of these deviations, such as
their trend with the period; its p-value is the share of draws in which deviations
drawn anew give a T as large (Gelman, Meng & Stern 1996, Statistica Sinica 6, 733).
Small p-values speak against the model.  The same data fitted the model, so that
p-values crowd towards 0.5: under a true model they are small at most as often as they
should be.  Every check is listed.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from ladderfit.checks.statistics import Sample, Statistic, statistics_of
from ladderfit.checks.supernovae import supernova_samples
from ladderfit.posterior.deviations import (
    StarDeviations,
    cepheid_deviations,
    parallax_deviations,
    why_no_parallaxes,
)
from ladderfit.result import Result
from ladderfit.samples import FloatArray, StarSample

DRAWS = 500
_PERIOD: dict[str, tuple[str, ...]] = {"period": ("trend", "scatter", "bend")}
_BY_HOST: dict[str, tuple[str, ...]] = {"distance": ("scatter",), "stated error": ("scatter",)}
_FEW, _MOST = 10, 20  # replications as large after which more are not drawn; rounds of them


@dataclass(frozen=True)
class Check:
    """One check.

    Attributes
    ----------
    sample, about : str
        Whose deviations, and what of them.
    p : float
        Share of replications that deviate at least as much.
    size : int
        Number of objects.
    """

    sample: str
    about: str
    p: float
    size: int

    @property
    def p_words(self) -> str:
        """The p-value with as many digits as it has."""
        return f"{self.p:.{3 if self.p >= 0.01 else 4}f}"


@dataclass(frozen=True, eq=False)
class Checks:
    """All checks of a result.

    Attributes
    ----------
    checks : tuple of Check
    left_out : mapping of str to str
        Samples without checks, and why.
    samples : tuple of Sample
        The deviations behind the checks.
    """

    checks: tuple[Check, ...]
    left_out: Mapping[str, str] = field(default_factory=dict)
    samples: tuple[Sample, ...] = ()

    def table(self) -> pd.DataFrame:
        """One row per check: sample, about, p, size."""
        rows = [(c.sample, c.about, c.p, c.size) for c in self.checks]
        return pd.DataFrame(rows, columns=["sample", "about", "p", "size"])

    @property
    def smallest(self) -> Check:
        """The check with the smallest p-value."""
        return min(self.checks, key=lambda check: check.p)

    def __str__(self) -> str:
        if not self.checks:
            return "no checks: " + "; ".join(self.left_out.values())
        worst, count = self.smallest, len(self.checks)
        wide = max(20, *(len(c.sample) for c in self.checks))
        chance = 1.0 - (1.0 - worst.p) ** count
        form = f"{{:<{wide}}}  {{:<34}}  p = {{:<6}} ({{:,}})"
        lines = [form.format(c.sample, c.about, c.p_words, c.size) for c in self.checks]
        lines += [f"{name}: no checks, as {why}" for name, why in self.left_out.items()]
        return "\n".join(
            [
                *lines,
                f"smallest of {count}: p = {worst.p_words} ({worst.sample}, {worst.about}); "
                f"{count} independent checks of a true model have one as small with a chance "
                f"of {chance:.2f} at most",
            ]
        )


def predictive_checks(result: Result, *, seed: int = 1, draws: int = DRAWS) -> Checks:
    """Check a result against its data.

    Parameters
    ----------
    result : Result
        With its ladder.
    seed : int
        Of the replications.
    draws : int
        How many draws are used, at most.

    Raises
    ------
    LadderfitError
        If the tables behind the result are missing.
    """
    rng = np.random.default_rng(seed)
    chosen = np.linspace(0, result.size - 1, min(draws, result.size)).astype(int)
    some = {name: values[chosen] for name, values in result.draws.items()}
    left_out: dict[str, str] = {}
    samples = tuple(_samples(result, some, rng, left_out))
    found = [
        Check(sample.name, about, p_value(values, statistic, rng), values.shape[1])
        for sample in samples
        for about, values, statistic in statistics_of(sample)
    ]
    return Checks(tuple(found), left_out, samples)


def p_value(deviations: FloatArray, statistic: Statistic, rng: np.random.Generator) -> float:
    """Share of replications whose statistic is at least that of the data.

    Every draw is replicated once, and again while few replications are as large
    (Besag & Clifford 1991, Biometrika 78, 301).

    Parameters
    ----------
    deviations : array, shape (b, n)
    statistic : callable
    rng : Generator
    """
    seen = statistic(deviations)
    as_large = replications = 0
    while as_large < _FEW and replications < _MOST * len(seen):
        again = statistic(rng.standard_normal(deviations.shape))
        as_large += int(np.sum(again >= seen))
        replications += len(seen)
    return (1.0 + as_large) / (1.0 + replications)


def _samples(
    result: Result,
    draws: Mapping[str, FloatArray],
    rng: np.random.Generator,
    left_out: dict[str, str],
) -> Iterator[Sample]:
    ladder, section = result.ladder, result.choices.cepheids
    if section is not None and section.outliers.robust:
        left_out["Cepheids"] = "their deviations are no longer normal by choice"
    elif ladder.cepheids is not None:
        stars = ladder.cepheids
        found = cepheid_deviations(ladder, draws, rng)
        moduli = np.array([result.mean(f"modulus[{host}]") for host in ladder.hosts])
        along = _along(result, stars, found) | {"distance": moduli[stars.host]}
        if found.colour is None and stars.photometry is not None:
            left_out["colours of Cepheids"] = "the error of the colour is not known apart"
        yield Sample("Cepheids", found.magnitude, along, stars.host, _PERIOD | _BY_HOST)
        if found.other is not None:
            period = {"period": stars.log_period}
            yield Sample("colours of Cepheids", found.other, period, stars.host)
    if ladder.parallax_stars is not None:
        why = why_no_parallaxes(ladder)
        if why is not None:
            left_out["parallax stars"] = why
        else:
            stars = ladder.parallax_stars
            found = parallax_deviations(ladder, draws, rng)
            along = _along(result, stars, found)
            if stars.parallax is not None:
                along["parallax"] = stars.parallax
            yield Sample("parallax stars", found.magnitude, along, None, _PERIOD)
            if found.other is not None:
                signal = {"parallax": along["parallax"]}
                yield Sample("parallaxes", found.other, signal)
    yield from supernova_samples(result, draws, left_out)


def _along(result: Result, stars: StarSample, star: StarDeviations) -> dict[str, FloatArray]:
    found = {"period": stars.log_period}
    if star.colour is not None:
        found["colour"] = star.colour
    if result.choices.relation.metallicity != "none":
        found["metallicity"] = stars.metallicity
    return found | {"stated error": np.log(stars.variance)}
