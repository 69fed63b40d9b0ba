"""Riess et al. 2016, ApJ 826, 56: what the Cepheids of M31 do to the ladder on NGC 4258.

M31 has neither an anchor's distance here nor a supernova: its 372 stars of table 4 tell
the slope alone (their metallicity is one number).  The published fit has them in.  The
choices are those of ``test_published_ladder``; M31's stars carry no names, so that all
stars are numbered.

                          slope    Z       H0     moduli minus table 5: mean, s.d., worst
    without M31, computed -3.077  -0.173  72.42   0.002  0.069  0.231
    with M31, computed    -3.229  -0.166  70.98   0.045  0.070  0.191

(computed: plain weighted least squares, below; errors of H0 2.4 and 2.3).
"""

from __future__ import annotations

from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
import pandas as pd
import pytest
from published import RIESS_2016_TABLE_5
from test_published_ladder import (
    ANCHOR,
    CHOICES,
    INTERCEPT,
    METALLICITY_PRIOR,
    NO_SCATTERS,
    WESENHEIT_RATIO,
    peaks,
)

import ladderfit as lf
from ladderfit.classical import weighted_least_squares
from ladderfit.result import Result
from ladderfit.sampling.run import draw

pytestmark = pytest.mark.published

HOSTS = list(RIESS_2016_TABLE_5["host"])
GLOBALS = ["zero_point", "slope", "metallicity", "peak_magnitude"]
DRAWS = 8000


class Fits(NamedTuple):
    """One table of Cepheids, fitted twice."""

    cepheids: pd.DataFrame
    result: Result
    values: pd.Series
    errors: pd.Series

    def hubble_constant(self) -> float:
        """Of the least squares."""
        magnitude = self.values["peak_magnitude"] + 25.0 + 5.0 * INTERCEPT["value"]
        return float(10.0 ** (0.2 * magnitude))


def least_squares(cepheids: pd.DataFrame) -> tuple[pd.Series, pd.Series]:
    """Estimates and errors of all but H0, from one weighted system."""
    hosts, table = list(dict.fromkeys(cepheids["Gal"])), peaks()
    names = [*GLOBALS, *(f"modulus[{host}]" for host in hosts)]
    stars = np.zeros((len(cepheids), len(names)))
    stars[:, 0] = 1.0
    stars[:, 1] = np.log10(cepheids["period_d"]) - 1.0
    stars[:, 2] = cepheids["OH12"] - 8.9
    stars[:, 4:] = cepheids["Gal"].to_numpy()[:, None] == np.array(hosts)
    ones = np.zeros((len(table), len(names)))
    ones[:, 3] = 1.0
    ones[:, 4:] = table["host"].to_numpy()[:, None] == np.array(hosts)
    given = np.zeros((2, len(names)))
    given[0, names.index("modulus[N4258]")] = given[1, 2] = 1.0
    mean, deviation = METALLICITY_PRIOR["normal"]
    index = cepheids["F160W"] - WESENHEIT_RATIO * cepheids["V_minus_I"]
    data = np.concatenate([index, table["mB"], [ANCHOR["modulus"], mean]])
    errors = [cepheids["e_tot"], table["e_mB_plus_5aB"], [ANCHOR["error"], deviation]]
    found = weighted_least_squares(np.vstack([stars, ones, given]), data, np.concatenate(errors))
    return pd.Series(found.values, names), pd.Series(found.errors, names)


def fitted(cepheids: pd.DataFrame, scatters: dict[str, Any]) -> Fits:
    section = CHOICES["cepheids"]
    columns = {role: name for role, name in section["columns"].items() if role != "star"}
    choices = {
        **CHOICES,
        "cepheids": {**section, "columns": columns},
        "priors": {**CHOICES["priors"], **scatters},
    }
    ladder = lf.build_ladder(choices, {"cepheids": cepheids, "supernovae": peaks()})
    result = draw(ladder, seed=1, draws=DRAWS)
    return Fits(cepheids, result, *least_squares(cepheids))


@pytest.fixture(scope="module")
def table(published_tables: Path) -> pd.DataFrame:
    return pd.read_csv(published_tables / "riess2016_table4.csv")


@pytest.fixture(scope="module")
def without(table: pd.DataFrame) -> Fits:
    return fitted(table[table["Gal"] != "M31"], NO_SCATTERS)


@pytest.fixture(scope="module")
def with_m31(table: pd.DataFrame) -> Fits:
    return fitted(table, NO_SCATTERS)


def modulus_differences(values: pd.Series) -> np.ndarray:
    """Moduli minus those of table 5."""
    ours = values[[f"modulus[{host}]" for host in HOSTS]].to_numpy()
    return ours - RIESS_2016_TABLE_5["mu_cepheid"].to_numpy()


@pytest.mark.parametrize(
    ("case", "stars", "slope", "metallicity", "hubble", "differences"),
    [
        ("without", 1114, -3.077, -0.173, 72.42, (0.002, 0.069, 0.231)),
        ("with_m31", 1486, -3.229, -0.166, 70.98, (0.045, 0.070, 0.191)),
    ],
)
def test_table_of_the_docstring(
    case: str,
    stars: int,
    slope: float,
    metallicity: float,
    hubble: float,
    differences: tuple[float, float, float],
    request: pytest.FixtureRequest,
) -> None:
    """The computed numbers to their last digit, and the posterior's within 5 errors of drawing."""
    fits: Fits = request.getfixturevalue(case)
    assert fits.result.ladder.kept["cepheids"].kept == stars
    assert fits.values["slope"] == pytest.approx(slope, abs=0.0006)
    assert fits.values["metallicity"] == pytest.approx(metallicity, abs=0.0006)
    assert fits.hubble_constant() == pytest.approx(hubble, abs=0.006)
    off = modulus_differences(fits.values)
    found = (off.mean(), off.std(ddof=1), np.abs(off).max())
    np.testing.assert_allclose(found, differences, rtol=0.0, atol=0.0006)
    for name, error in fits.errors.items():
        limit = 5.0 * error / np.sqrt(DRAWS)
        assert fits.result.mean(name) == pytest.approx(fits.values[name], abs=limit), name
        assert fits.result.sd(name) == pytest.approx(error, rel=0.05), name
    magnitudes = 5.0 * np.log10(fits.result.draws["hubble_constant"])
    error = np.hypot(fits.errors["peak_magnitude"], 5.0 * INTERCEPT["error"])
    limit = 5.0 * error / np.sqrt(DRAWS)
    assert magnitudes.mean() == pytest.approx(5.0 * np.log10(fits.hubble_constant()), abs=limit)
    assert magnitudes.std() == pytest.approx(error, rel=0.05)


@pytest.mark.parametrize(("case", "tolerance"), [("without", 0.8), ("with_m31", 1.6)])
def test_published_hubble_constant(
    case: str, tolerance: float, request: pytest.FixtureRequest
) -> None:
    # NGC 4258 alone: 72.25 +- 2.51 (read).  The tolerances are 0.3 and 0.6 of that error.
    fits: Fits = request.getfixturevalue(case)
    assert fits.result.mean("hubble_constant") == pytest.approx(72.25, abs=tolerance)
    assert fits.result.sd("hubble_constant") == pytest.approx(2.51, rel=0.15)


def test_published_slope_needs_m31(without: Fits, with_m31: Fits) -> None:
    # Slope -3.26 (memory; its error is 0.02 with M31 in, computed).
    assert abs(with_m31.result.mean("slope") + 3.26) < 2.0 * with_m31.errors["slope"]
    assert abs(without.result.mean("slope") + 3.26) > 4.0 * without.errors["slope"]


def test_metallicity_does_not_hear_of_m31(without: Fits, with_m31: Fits) -> None:
    assert with_m31.cepheids.loc[with_m31.cepheids["Gal"] == "M31", "OH12"].nunique() == 1
    shift = with_m31.result.shift_from(without.result)
    assert abs(shift.loc["metallicity", "in_errors"]) < 0.25
    assert abs(shift.loc["modulus[N4258]", "change"]) < 0.005


def test_why_the_hubble_constant_moves(without: Fits, with_m31: Fits) -> None:
    """The hosts' Cepheids have longer periods than those of NGC 4258: the slope does it.

    A steeper slope makes them brighter by its change times the difference in mean log
    period, and so puts the hosts further away.
    """
    moved = modulus_differences(with_m31.values) - modulus_differences(without.values)
    table = without.cepheids
    weighted = table.assign(weight=table["e_tot"] ** -2, x=np.log10(table["period_d"]))
    means = weighted.groupby("Gal")[["x", "weight"]].apply(
        lambda stars: np.average(stars["x"], weights=stars["weight"])
    )
    longer = means[HOSTS].to_numpy() - means["N4258"]
    steeper = with_m31.values["slope"] - without.values["slope"]
    # The peaks pull at the moduli of the two hosts whose Cepheids tell least.
    told = RIESS_2016_TABLE_5["e_mu_cepheid"].to_numpy() < 0.11
    assert told.sum() == 17
    np.testing.assert_allclose(moved[told], -steeper * longer[told], rtol=0.0, atol=0.01)
    assert np.average(longer) > 0.2


def test_free_scatter_says_the_same(table: pd.DataFrame, with_m31: Fits) -> None:
    """Scatter of stars and supernovae on top of the published total errors."""
    free = fitted(table, {})
    shift = free.result.shift_from(with_m31.result)
    for name in ("slope", "metallicity", "peak_magnitude", "hubble_constant"):
        assert abs(shift.loc[name, "in_errors"]) < 0.5, name
