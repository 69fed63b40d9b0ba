"""Errors of periods and metallicities, against covariances and integrals written out.

For Cepheids in galaxies all data (magnitudes, measured metallicities, moduli of anchors)
are jointly normal given phi: their covariance is written out star by star.  For parallax
stars the true metallicity, or period, and the modulus are integrated on a grid.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest
from relation_ladders import ERRORS_OF_PARALLAX_STARS, log_densities, made, points, shape_of

from ladderfit.ladder import Ladder, build_ladder
from ladderfit.posterior.joint import posterior
from ladderfit.sampling.run import draw

LOG_2PI = np.log(2.0 * np.pi)
FARTHEST = 50.0  # mag; a flat modulus has the density 1 / 50
REFERENCE = 8.69
BEND = np.log10(18.0 / 10.0)
PERIODS = {"cepheids.columns.period_error": "e_P"}
METALS = {"cepheids.columns.metallicity_error": "e_OH"}
CASES: dict[str, dict[str, Any]] = {
    "periods": PERIODS,
    "metallicities": METALS,
    "both": PERIODS | METALS,
    "periods along two slopes": {**PERIODS, "relation.break": 18.0},
    "both on a curve": {**PERIODS, **METALS, "relation.curvature": True},
    "both and their product": {**PERIODS, **METALS, "relation.slope_metallicity": True},
    "groups": {
        **PERIODS,
        **METALS,
        "groups": {"far": {"hosts": ["Q07"]}, "overtones": {"mode": "overtone"}},
        "relation.slopes": ["far"],
        "relation.scatter": ["overtones"],
    },
    "anchors with a shared error": {
        **METALS,
        "anchors.geometric.Orrel.use": True,
        "anchors.shared_errors": {"model": {"error": 0.05, "loads": {"Tavin": 1.0, "Orrel": 0.5}}},
    },
    "in the variance": {**METALS, "relation.metallicity.errors": "in the variance"},
    "ignored": {**METALS, "relation.metallicity.errors": "ignored"},
}


@dataclass(frozen=True)
class Star:
    """One star's place in the relation."""

    x: float
    metals: float  # less the reference
    overtone: bool
    far: bool

    def light(self, value: Mapping[str, float]) -> float:
        """Absolute magnitude."""
        x = self.x
        total = value["zero_point"] + value["metallicity"] * self.metals
        if "slope_beyond" in value:
            total += value["slope"] * min(x, BEND) + value["slope_beyond"] * max(x - BEND, 0.0)
        else:
            total += value["slope"] * x
        total += value.get("curvature", 0.0) * x**2
        total += value.get("slope_metallicity", 0.0) * x * self.metals
        total += value["overtone_offset"] * self.overtone
        return total + value.get("slope_offset[far]", 0.0) * x * self.far

    def per_dex_of_period(self, value: Mapping[str, float]) -> float:
        slope = value["slope"]
        if "slope_beyond" in value and self.x > BEND:
            slope = value["slope_beyond"]
        slope += 2.0 * value.get("curvature", 0.0) * self.x
        slope += value.get("slope_metallicity", 0.0) * self.metals
        return slope + value.get("slope_offset[far]", 0.0) * self.far

    def per_dex_of_metals(self, value: Mapping[str, float]) -> float:
        return value["metallicity"] + value.get("slope_metallicity", 0.0) * self.x


def written_out(ladder: Ladder, known: Mapping[str, float]) -> float:
    """Log density of phi (given as parameter values), by one covariance of all data."""
    stars = ladder.cepheids
    assert stars is not None
    relation, n = ladder.choices.relation, len(stars)
    assert relation.metallicity != "none"
    mode = relation.metallicity.errors
    metal_errors = None if mode == "ignored" else stars.metallicity_error
    free = [name for name in posterior(ladder).split.coefficients if name not in known]
    priors = {name: ladder.choices.prior(name) for name in free}
    value = {**{name: prior.mean for name, prior in priors.items()}, **known}
    places = [
        Star(
            stars.log_period[i] - 1.0,
            stars.metallicity[i] - REFERENCE,
            bool(stars.overtone[i]),
            ladder.hosts[stars.host[i]] == "Q07",
        )
        for i in range(n)
    ]
    grouped = bool(relation.scatter_groups)
    scatter = [
        value["scatter[overtones]"] if grouped and star.overtone else value["scatter"]
        for star in places
    ]
    variance = stars.variance + np.array(scatter) ** 2
    if stars.log_period_error is not None:
        slopes = np.array([star.per_dex_of_period(value) for star in places])
        variance = variance + (slopes * stars.log_period_error) ** 2
    on_metals = np.array([star.per_dex_of_metals(value) for star in places])
    population = metal_errors is not None and mode == "population"
    if metal_errors is not None and not population:
        variance = variance + (on_metals * metal_errors) ** 2
    # the data: magnitudes, then metallicities where they have populations, then anchors
    anchors = ladder.geometric
    count = n * (2 if population else 1) + len(anchors)
    mean, covariance = np.zeros(count), np.zeros((count, count))
    data, moduli = np.zeros(count), np.zeros((count, len(ladder.hosts)))
    data[:n], moduli[np.arange(n), stars.host] = stars.magnitude, 1.0
    if population:
        average = [Star(s.x, 0.0, s.overtone, s.far) for s in places]
        mean[:n] = [star.light(value) for star in average]
        tau2 = value["metallicity_spread"] ** 2
        data[n : 2 * n] = stars.metallicity - REFERENCE
        for i in range(n):
            covariance[i, i] = variance[i] + on_metals[i] ** 2 * tau2
            covariance[n + i, n + i] = tau2 + metal_errors[i] ** 2
            covariance[i, n + i] = covariance[n + i, i] = on_metals[i] * tau2
            for j in np.flatnonzero(stars.host == stars.host[i]):  # the host's mean: 1 dex
                covariance[i, j] += on_metals[i] * on_metals[j]
                covariance[n + i, n + j] += 1.0
                covariance[i, n + j] += on_metals[i]
                covariance[n + j, i] += on_metals[i]
    else:
        average = places
        mean[:n] = [star.light(value) for star in places]
        covariance[np.arange(n), np.arange(n)] = variance
    for place, anchor in enumerate(anchors, start=count - len(anchors)):
        data[place], moduli[place, anchor.host] = anchor.modulus, 1.0
        covariance[place, place] = anchor.error**2
    for name in free:
        column = np.zeros(count)
        if name.startswith("shared_error"):
            shared = ladder.choices.anchors.shared_errors["model"]
            loads = [shared.loads.get(anchor.name, 0.0) for anchor in anchors]
            column[count - len(anchors) :] = shared.error * np.array(loads)
        else:
            up = {**value, name: value[name] + 1.0}
            column[:n] = [star.light(up) - star.light(value) for star in average]
        covariance = covariance + priors[name].deviation ** 2 * np.outer(column, column)
    prior = sum(
        float(ladder.choices.prior(name).log_density(np.array(at))) for name, at in known.items()
    )
    return prior + _flat(data - mean, covariance, moduli)


def _flat(gap: np.ndarray, covariance: np.ndarray, moduli: np.ndarray) -> float:
    """Log normal density with moduli integrated over flat priors."""
    inverse = np.linalg.inv(covariance)
    precision, pull = moduli.T @ inverse @ moduli, moduli.T @ inverse @ gap
    chi2 = gap @ inverse @ gap - pull @ np.linalg.solve(precision, pull)
    logs = np.linalg.slogdet(covariance)[1] + np.linalg.slogdet(precision)[1]
    hosts = moduli.shape[1]
    return float(-0.5 * (chi2 + logs + (len(gap) - hosts) * LOG_2PI) - hosts * np.log(FARTHEST))


@pytest.mark.parametrize("case", CASES)
@pytest.mark.parametrize("seed", [1, 2])
def test_cepheids_against_a_covariance_written_out(case: str, seed: int) -> None:
    ladder = made(seed, parallaxes=False, stars=6).built(CASES[case])
    found = posterior(ladder)
    places = points(np.random.default_rng(seed), found.split.phi_names)
    expected = [written_out(ladder, place) for place in places]
    np.testing.assert_allclose(log_densities(found, places), expected, rtol=0.0, atol=1e-9)


def test_the_reference_tells_the_treatments_apart() -> None:
    """A negative control: 0.1 dex of error matter far more than the tolerance."""
    ladders = [
        made(1, parallaxes=False, stars=6).built(
            {**METALS, "relation.metallicity.errors": treatment}
        )
        for treatment in ("population", "in the variance", "ignored")
    ]
    names = posterior(ladders[0]).split.phi_names
    place = points(np.random.default_rng(1), names, 2)
    shapes = []
    for ladder in ladders:
        own = posterior(ladder).split.phi_names
        known = [{k: v for k, v in p.items() if k in (*own, "metallicity")} for p in place]
        shapes.append(shape_of(np.array([written_out(ladder, k) for k in known]))[1])
    assert abs(shapes[0] - shapes[1]) > 1e-3
    assert abs(shapes[1] - shapes[2]) > 1e-3


# --- parallax stars ----------------------------------------------------------------------


def normal(x: Any, mean: Any, sd: Any) -> Any:
    return np.exp(-0.5 * ((x - mean) / sd) ** 2) / (sd * np.sqrt(2.0 * np.pi))


def parallax_ladder(seed: int, changes: Mapping[str, Any]) -> Ladder:
    return made(seed, stars=3).built(changes)


def over_modulus(ladder: Ladder, i: int, light: np.ndarray, place: Mapping[str, float]) -> Any:
    """The integral over one star's modulus on a grid, for each absolute magnitude."""
    stars = ladder.parallax_stars
    assert stars is not None
    root = np.sqrt(stars.variance[i] + place["scatter"] ** 2)
    centre = stars.magnitude[i] - light.mean()
    reach = 9.0 * root + np.ptp(light)
    mu = np.linspace(centre - reach, centre + reach, 3001)
    by_parallax = normal(
        stars.parallax[i],
        10.0 ** (2.0 - 0.2 * mu) + place["parallax_offset"],
        stars.parallax_error[i],
    )
    values = normal(stars.magnitude[i], mu[None, :] + light[:, None], root) * by_parallax
    return np.trapezoid(values, mu, axis=1) / FARTHEST


def star_at(ladder: Ladder, i: int, x: float, metals: float) -> Star:
    stars = ladder.parallax_stars
    assert stars is not None
    return Star(x, metals, bool(stars.overtone[i]), far=False)


@pytest.mark.parametrize("product", [False, True], ids=["metallicity", "with its product"])
def test_parallax_stars_against_integrals_over_true_metallicities(product: bool) -> None:
    changes = {"anchors.parallaxes.columns.metallicity_error": "e_OH"}
    ladder = parallax_ladder(4, {**changes, "relation.slope_metallicity": product})
    found, stars = posterior(ladder), ladder.parallax_stars
    assert stars is not None
    assert stars.metallicity_error is not None
    for place in points(np.random.default_rng(4), found.split.phi_names, 2):
        got = found.log_parallaxes(found.coordinates(place)[None, :])[0]
        mean, spread = place["parallax_metallicity"], place["metallicity_spread"]
        for i in range(len(stars)):
            o, error = stars.metallicity[i] - REFERENCE, stars.metallicity_error[i]
            true = np.linspace(mean - 9.0 * spread, mean + 9.0 * spread, 401)
            x = stars.log_period[i] - 1.0
            light = np.array([star_at(ladder, i, x, each).light(place) for each in true])
            inside = normal(true, mean, spread) * normal(o, true, error)
            whole = np.trapezoid(inside * over_modulus(ladder, i, light, place), true)
            assert got[i] == pytest.approx(np.log(whole), abs=1e-6)


@pytest.mark.parametrize("broken", [False, True], ids=["one slope", "far from the break"])
def test_parallax_stars_against_integrals_over_true_periods(broken: bool) -> None:
    """Exact along a line; with a break, for stars whose error does not reach it."""
    changes: dict[str, Any] = {"anchors.parallaxes.columns.period_error": "e_P"}
    ladder = parallax_ladder(6, {**changes, **({"relation.break": 18.0} if broken else {})})
    found, stars = posterior(ladder), ladder.parallax_stars
    assert stars is not None
    assert stars.log_period_error is not None
    for place in points(np.random.default_rng(6), found.split.phi_names, 2):
        got = found.log_parallaxes(found.coordinates(place)[None, :])[0]
        for i in range(len(stars)):
            x, error = stars.log_period[i] - 1.0, stars.log_period_error[i]
            if broken and abs(x - BEND) < 8.0 * error:
                continue
            true = np.linspace(x - 9.0 * error, x + 9.0 * error, 301)
            metals = stars.metallicity[i] - REFERENCE
            light = np.array([star_at(ladder, i, each, metals).light(place) for each in true])
            inside = normal(x, true, error) * over_modulus(ladder, i, light, place)
            assert got[i] == pytest.approx(np.log(np.trapezoid(inside, true)), abs=1e-6)


# --- limits ------------------------------------------------------------------------------


def _with_errors_of(metals: float, *, parallaxes: bool) -> Ladder:
    found = made(8, parallaxes=parallaxes)
    for table in found.tables.values():
        table["e_OH"] = metals
    more = ERRORS_OF_PARALLAX_STARS if parallaxes else {}
    return found.built({**METALS, **{k: v for k, v in more.items() if "metal" in k}})


@pytest.mark.parametrize("parallaxes", [False, True])
def test_tiny_errors_are_none(parallaxes: bool) -> None:
    """At one spread: what the measured metallicities say of the spread itself is no part of it."""
    with_errors, without = (
        _with_errors_of(1e-7, parallaxes=parallaxes),
        made(8, parallaxes=parallaxes).built(),
    )
    found, plain = posterior(with_errors), posterior(without)
    if not parallaxes:  # there the metallicity term is in theta without errors
        plain = posterior(without.change({"priors.metallicity": {"uniform": [-5.0, 5.0]}}))
        found = posterior(with_errors.change({"priors.metallicity": {"uniform": [-5.0, 5.0]}}))
    places = points(np.random.default_rng(8), found.split.phi_names)
    held = ("metallicity_spread", "parallax_metallicity")
    places = [
        {**place, **{name: places[0][name] for name in held if name in place}} for place in places
    ]
    a, b = (shape_of(log_densities(each, places)) for each in (found, plain))
    np.testing.assert_allclose(a, b, rtol=0.0, atol=1e-5)


def test_a_boundless_population_is_the_variance_alone() -> None:
    """Without a population to lean on, a measured metallicity is taken for what it is."""
    found = made(9, parallaxes=False).built(METALS)
    naive = found.change({"relation.metallicity.errors": "in the variance"})
    places = points(np.random.default_rng(9), posterior(found).split.phi_names)
    places = [{**place, "metallicity_spread": 3e4} for place in places]
    prior = {"priors.metallicity_spread": {"half_normal": 3e4}}
    a, b = (
        shape_of(log_densities(each, places))
        for each in (posterior(found.change(prior)), posterior(naive))
    )
    np.testing.assert_allclose(a, b, rtol=0.0, atol=1e-6)


# --- recovery ----------------------------------------------------------------------------

TRUE_TERM, SPREAD, ERROR = -0.2, 0.08, 0.06
GALAXIES, STARS = 4, 90


def survey(seed: int) -> tuple[dict[str, Any], dict[str, Any]]:
    """Galaxies whose stars spread by 0.08 dex, measured to 0.06 dex."""
    rng = np.random.default_rng([77, seed])
    n = GALAXIES * STARS
    host = np.repeat(np.arange(GALAXIES), STARS)
    log_period = rng.uniform(0.7, 1.8, n)
    true = rng.normal(8.4, 0.2, GALAXIES)[host] + SPREAD * rng.normal(size=n)
    light = -5.9 - 3.3 * (log_period - 1.0) + TRUE_TERM * (true - REFERENCE)
    measured = (
        np.linspace(28.0, 31.0, GALAXIES)[host] + light + np.hypot(0.05, 0.06) * rng.normal(size=n)
    )
    table = {
        "Galaxy": [f"G{place}" for place in host],
        "P": 10.0**log_period,
        "OH": true + ERROR * rng.normal(size=n),
        "e_OH": np.full(n, ERROR),
        "W": measured,
        "e_W": np.full(n, 0.05),
    }
    columns = {"host": "Galaxy", "period": "P", "metallicity": "OH", "metallicity_error": "e_OH"}
    choices = {
        "cepheids": {
            "columns": columns,
            "magnitude": {"band": "W", "bands": {"W": "W"}, "errors": {"W": "e_W"}},
        },
        "relation": {"metallicity": {"reference": REFERENCE, "scale": "12+log(O/H)"}},
        "anchors": {"geometric": {"G0": {"modulus": 28.0, "error": 0.03}}},
        "priors": {"metallicity": {"normal": [-0.2, 5.0]}},
        "sampling": {"draws": 300},
    }
    return choices, {"cepheids": table}


def fitted(seed: int, treatment: str) -> tuple[float, float]:
    """Mean and standard deviation of the metallicity term."""
    choices, tables = survey(seed)
    choices["relation"]["metallicity"]["errors"] = treatment
    result = draw(build_ladder(choices, tables), seed=seed)
    return result.mean("metallicity"), result.sd("metallicity")


@pytest.mark.full
@pytest.mark.parametrize("treatment", ["population", "in the variance"])
def test_the_metallicity_term_is_not_diluted(treatment: str, in_full: bool) -> None:
    """Unbiased by populations; diluted by 0.64 (to -0.128) by the variance alone.

    The mean over 200 mocks (40 in the integration, so with a bound wider by sqrt 5) of
    the posterior means has to lie within 3 of its standard errors of the truth; the
    naive way has to miss it by over 4, or the test could not tell.
    """
    count = 200 if in_full else 40
    means, sds = np.array([fitted(seed, treatment) for seed in range(count)]).T
    miss = (means.mean() - TRUE_TERM) / (means.std(ddof=1) / np.sqrt(count))
    if treatment == "population":
        assert abs(miss) < 3.0
        pulls = (means - TRUE_TERM) / sds
        assert 0.75 < pulls.std(ddof=1) < 1.3  # 40 pulls: 1 +- 0.11
    else:
        assert miss > 4.0
        assert means.mean() == pytest.approx(0.64 * TRUE_TERM, abs=0.035)
