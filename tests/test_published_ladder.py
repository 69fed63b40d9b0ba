"""A published ladder, refitted: Riess et al. 2016, ApJ 826, 56.

Cepheids of NGC 4258 and 19 supernova hosts (table 4; M31 left out), peaks of
table 5, NGC 4258 as the only anchor.  What the published numbers mean:

* The errors of table 4 are total errors: they hold the dispersion of the relation
  already (memory).  The table agrees: of 1,114 stars none lies beyond 2.75 errors, as
  after a clip at 2.7 (memory), and chi squared is near its expectation (computed, below).
  The errors of table 5's peaks hold the scatter of the supernovae (memory).  So both
  scatters are 0 in the fit that repeats the published treatment.
* Table 5 gives m_B + 5 a_B.  The intercept a_B is one number for all hosts, so
  its error is shared: it enters once, as the intercept of the expansion.
* The moduli of table 5 come from the fit to all anchors, ours from NGC 4258 alone.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from published import RIESS_2016_TABLE_5

import ladderfit as lf
from ladderfit.result import Result
from ladderfit.sampling.run import draw

INTERCEPT = {"value": 0.71273, "error": 0.00176}  # a_B, memory
WESENHEIT_RATIO = 0.39  # on F555W-F814W, memory
ANCHOR = {"modulus": 29.387, "error": 0.057}  # NGC 4258 as then in use, memory
METALLICITY_PRIOR = {
    "normal": [-0.14, 0.25]
}  # of the computed fit; published -0.14 +- 0.06, memory
NO_SCATTERS = {"scatter": {"fixed": 0.0}, "peak_scatter": {"fixed": 0.0}}

CHOICES: dict[str, Any] = {
    "title": "Riess et al. 2016, NGC 4258 alone",
    "cepheids": {
        "columns": {"star": "ID", "host": "Gal", "period": "period_d", "metallicity": "OH12"},
        "magnitude": {
            "wesenheit": {"band": "F160W", "colour": "V-I", "ratio": WESENHEIT_RATIO},
            "bands": {"F160W": "F160W", "V-I": "V_minus_I"},
            "errors": {"total": "e_tot"},
        },
    },
    "relation": {"metallicity": {"reference": 8.9, "scale": "12+log(O/H)"}},
    "anchors": {"geometric": {"N4258": ANCHOR}},
    "supernovae": {
        "columns": {"name": "sn", "host": "host", "peak": "mB", "peak_error": "e_mB_plus_5aB"},
    },
    "expansion": {"intercept": INTERCEPT},
    "priors": {"metallicity": METALLICITY_PRIOR},
}


def peaks() -> pd.DataFrame:
    """Table 5 with m_B itself, the shared intercept taken off."""
    shared = 5.0 * INTERCEPT["value"]
    return RIESS_2016_TABLE_5.assign(mB=RIESS_2016_TABLE_5["mB_plus_5aB"] - shared)


@pytest.fixture(scope="module")
def cepheids(published_tables: Path) -> pd.DataFrame:
    table = pd.read_csv(published_tables / "riess2016_table4.csv", dtype={"ID": str})
    return table[table["Gal"] != "M31"]


def fitted(cepheids: pd.DataFrame, scatters: dict[str, Any]) -> Result:
    choices = {**CHOICES, "priors": {**CHOICES["priors"], **scatters}}
    ladder = lf.build_ladder(choices, {"cepheids": cepheids, "supernovae": peaks()})
    return draw(ladder, seed=1, draws=8000)


@pytest.fixture(scope="module")
def as_published(cepheids: pd.DataFrame) -> Result:
    return fitted(cepheids, NO_SCATTERS)


@pytest.fixture(scope="module")
def free_scatters(cepheids: pd.DataFrame) -> Result:
    return fitted(cepheids, {})


def modulus_differences(result: Result) -> np.ndarray:
    """Posterior means of the host moduli minus table 5."""
    ours = [result.mean(f"modulus[{host}]") for host in RIESS_2016_TABLE_5["host"]]
    return np.array(ours) - RIESS_2016_TABLE_5["mu_cepheid"].to_numpy()


@pytest.mark.published
def test_all_stars_take_part(as_published: Result) -> None:
    kept = as_published.ladder.kept
    assert (kept["cepheids"].kept, kept["cepheids"].total) == (1114, 1114)
    assert (kept["supernovae"].kept, kept["supernovae"].total) == (19, 19)


@pytest.mark.published
@pytest.mark.parametrize("treatment", ["as_published", "free_scatters"])
def test_hubble_constant(treatment: str, request: pytest.FixtureRequest) -> None:
    # Computed (plain weighted least squares): 72.4 +- 2.4.  Published for this anchor
    # alone: 72.25 +- 2.51 (read).
    result: Result = request.getfixturevalue(treatment)
    assert abs(result.mean("hubble_constant") - 72.4) < 0.8
    assert 2.0 < result.sd("hubble_constant") < 2.8


@pytest.mark.published
@pytest.mark.parametrize("treatment", ["as_published", "free_scatters"])
def test_host_moduli(treatment: str, request: pytest.FixtureRequest) -> None:
    difference = modulus_differences(request.getfixturevalue(treatment))
    assert abs(difference.mean()) < 0.03
    assert difference.std(ddof=1) < 0.1


@pytest.mark.published
def test_equals_the_plain_least_squares(as_published: Result) -> None:
    # Computed: H0 72.4 +- 2.4, slope -3.077 +- 0.042, moduli minus table 5: mean 0.002,
    # standard deviation 0.069, worst 0.23.  The same model, so close agreement.
    assert as_published.mean("hubble_constant") == pytest.approx(72.4, abs=0.15)
    assert as_published.sd("hubble_constant") == pytest.approx(2.4, abs=0.1)
    assert as_published.mean("slope") == pytest.approx(-3.077, abs=0.005)
    assert as_published.sd("slope") == pytest.approx(0.042, abs=0.002)
    difference = modulus_differences(as_published)
    assert difference.mean() == pytest.approx(0.002, abs=0.005)
    assert difference.std(ddof=1) == pytest.approx(0.069, abs=0.003)
    assert np.abs(difference).max() == pytest.approx(0.23, abs=0.01)


@pytest.mark.published
def test_equals_least_squares_written_out(as_published: Result, cepheids: pd.DataFrame) -> None:
    """A second route here, by one dense system: every mean within 5 Monte Carlo errors."""
    values, covariance = written_out(cepheids)
    hosts = RIESS_2016_TABLE_5["host"]
    names = ["slope", "metallicity", "peak_magnitude", *(f"modulus[{host}]" for host in hosts)]
    for name in names:
        error = np.sqrt(covariance.loc[name, name])
        limit = 5.0 * error / np.sqrt(as_published.size)
        assert as_published.mean(name) == pytest.approx(values[name], abs=limit), name
        assert as_published.sd(name) == pytest.approx(error, rel=0.05), name
    magnitudes = 5.0 * np.log10(as_published.draws["hubble_constant"])
    limit = 5.0 * np.std(magnitudes) / np.sqrt(as_published.size)
    expected = values["peak_magnitude"] + 25.0 + 5.0 * INTERCEPT["value"]
    assert np.mean(magnitudes) == pytest.approx(expected, abs=limit)


def written_out(cepheids: pd.DataFrame) -> tuple[pd.Series, pd.DataFrame]:
    """Estimates and covariance of all parameters but H0, from one design matrix."""
    table = peaks()
    hosts = ["N4258", *table["host"]]
    moduli = [f"modulus[{host}]" for host in hosts]
    names = ["zero_point", "slope", "metallicity", "peak_magnitude", *moduli]
    of_star = (cepheids["Gal"].to_numpy()[:, None] == np.array(hosts)).astype(float)
    of_peak = (table["host"].to_numpy()[:, None] == np.array(hosts)).astype(float)
    stars = np.zeros((len(cepheids), 4))
    stars[:, 0] = 1.0
    stars[:, 1] = np.log10(cepheids["period_d"]) - 1.0
    stars[:, 2] = cepheids["OH12"] - 8.9
    ones = np.tile([0.0, 0.0, 0.0, 1.0], (len(table), 1))
    given = np.zeros((2, len(names)))
    given[0, names.index("modulus[N4258]")] = given[1, 2] = 1.0
    design = np.vstack([np.hstack([stars, of_star]), np.hstack([ones, of_peak]), given])
    index = cepheids["F160W"] - WESENHEIT_RATIO * cepheids["V_minus_I"]
    mean, deviation = METALLICITY_PRIOR["normal"]
    y = np.concatenate([index, table["mB"], [ANCHOR["modulus"], mean]])
    errors = [cepheids["e_tot"], table["e_mB_plus_5aB"], [ANCHOR["error"], deviation]]
    error = np.concatenate(errors)
    weighted = design / error[:, None]
    values, *_ = np.linalg.lstsq(weighted, y / error)
    covariance = np.linalg.inv(weighted.T @ weighted)
    return pd.Series(values, names), pd.DataFrame(covariance, names, names)


@pytest.mark.published
def test_the_published_errors_are_total_errors(cepheids: pd.DataFrame) -> None:
    """Why no scatter is added: the residuals of table 4 are as large as its errors say."""
    values, _ = written_out(cepheids)
    predicted = (
        np.array([values[f"modulus[{host}]"] for host in cepheids["Gal"]])
        + values["zero_point"]
        + values["slope"] * (np.log10(cepheids["period_d"]) - 1.0)
        + values["metallicity"] * (cepheids["OH12"] - 8.9)
    )
    index = cepheids["F160W"] - WESENHEIT_RATIO * cepheids["V_minus_I"]
    pull = (index - predicted) / cepheids["e_tot"]
    assert np.abs(pull).max() < 2.75
    assert np.sum(pull**2) / len(pull) == pytest.approx(1.0, abs=0.15)


@pytest.mark.published
def test_the_only_anchor_keeps_its_own_modulus(as_published: Result) -> None:
    """Nothing else in the ladder tells the distance of NGC 4258."""
    limit = 5.0 * ANCHOR["error"] / np.sqrt(as_published.size)
    assert as_published.mean("modulus[N4258]") == pytest.approx(ANCHOR["modulus"], abs=limit)
    assert as_published.sd("modulus[N4258]") == pytest.approx(ANCHOR["error"], rel=0.05)


def test_third_rung_alone() -> None:
    """Table 5 alone: its moduli as anchors, its peaks, the published intercept.

    Computed: weighted mean of (m_B + 5 a_B) - mu -15.688 +- 0.032, so H0 = 72.85 and
    M_B = -19.252.  The intercept's error, 5 x 0.00176 mag, comes on top in H0.
    """
    table = RIESS_2016_TABLE_5
    moduli = {
        row.host: {"modulus": row.mu_cepheid, "error": row.e_mu_cepheid}
        for row in table.itertuples()
    }
    choices = {
        "anchors": {"geometric": moduli},
        "supernovae": CHOICES["supernovae"],
        "expansion": CHOICES["expansion"],
        "priors": {"peak_scatter": {"fixed": 0.0}},
    }
    result = draw(lf.build_ladder(choices, {"supernovae": peaks()}), seed=1, draws=40_000)
    error = np.sum(1.0 / (table["e_mB_plus_5aB"] ** 2 + table["e_mu_cepheid"] ** 2)) ** -0.5
    assert error == pytest.approx(0.032, abs=0.0006)
    limit = 0.0006 + 5.0 * error / np.sqrt(result.size)  # rounding and Monte Carlo error
    assert result.mean("peak_magnitude") == pytest.approx(-19.252, abs=limit)
    assert result.sd("peak_magnitude") == pytest.approx(error, rel=0.018)
    assert result.mean("hubble_constant") == pytest.approx(72.85, abs=0.05)
    magnitudes = 5.0 * np.log10(result.draws["hubble_constant"])
    together = np.hypot(error, 5.0 * INTERCEPT["error"])
    assert together / error > 1.03  # so that the next line would miss its absence
    assert np.std(magnitudes) == pytest.approx(together, rel=0.018)
    limit = 5.0 * INTERCEPT["error"] / np.sqrt(result.size)
    assert result.mean("intercept") == pytest.approx(INTERCEPT["value"], abs=limit)
    assert result.sd("intercept") == pytest.approx(INTERCEPT["error"], rel=0.018)
