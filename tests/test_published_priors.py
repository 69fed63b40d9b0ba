"""The parallax sample of Riess et al. 2021 under each distance prior.

Table 1 of ApJ 908, L6, slope, metallicity and scatter held as in the paper.  The
table gives no positions, so no disc; and no selection is stated with it.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from test_published_parallaxes import CHOICES, METALLICITY, SCATTER, SLOPE

import ladderfit as lf
from ladderfit.sensitivity.distance_priors import along_distance_priors, comparison

pytestmark = pytest.mark.published

PRIORS = {
    "flat in modulus": "flat in modulus",
    "uniform in volume": "uniform in volume",
    "exponential, 1 kpc": {"exponential": 1.0},
    "exponential, 2 kpc": {"exponential": 2.0},
    "exponential, 4 kpc": {"exponential": 4.0},
}
# Computed, by the grid below: zero point [mag] and offset [mas] at 10 d and [Fe/H] = 0.
EXPECTED = {
    "flat in modulus": (-5.9325, 0.0164),
    "uniform in volume": (-5.9818, 0.0274),
    "exponential, 1 kpc": (-5.9405, 0.0183),
    "exponential, 2 kpc": (-5.9608, 0.0228),
    "exponential, 4 kpc": (-5.9713, 0.0251),
}


@pytest.fixture(scope="module")
def stars(published_tables: Path) -> pd.DataFrame:
    table = pd.read_csv(published_tables / "riess2021_table1.csv", keep_default_na=False)
    kept = table[table["note"] != "f"]
    return kept.astype(dict.fromkeys(kept.columns.drop(["name", "note"]), float))


def on_a_grid(stars: pd.DataFrame, log_prior) -> tuple[float, float]:
    """Posterior means of zero point and offset, every star's modulus summed over."""
    zero_point, offset = np.linspace(-6.10, -5.78, 33), np.linspace(-0.020, 0.060, 33)
    log_posterior = -0.5 * ((zero_point + 5.9) / 5.0) ** 2
    log_posterior = log_posterior[:, None] - 0.5 * offset**2
    step = np.linspace(-8.0, 8.0, 161)
    for star in stars.itertuples():
        absolute = zero_point + SLOPE * (star.logP - 1.0) + METALLICITY * star.FeH
        width = np.hypot(star.e_mWH, SCATTER)
        mu = (star.mWH - absolute)[:, None] + width * step
        weight = -0.5 * step**2 + log_prior(mu)
        gap = star.plx_EDR3_L21corr_mas - 10.0 ** (2.0 - 0.2 * mu)
        miss = (gap[:, None, :] - offset[None, :, None]) / star.e_plx_EDR3_mas
        terms = weight[:, None, :] - 0.5 * miss**2
        top = terms.max(axis=2)
        log_posterior = log_posterior + top
        log_posterior = log_posterior + np.log(np.exp(terms - top[..., None]).sum(axis=2))
    weight = np.exp(log_posterior - log_posterior.max())
    weight = weight / weight.sum()
    return float(weight.sum(axis=1) @ zero_point), float(weight.sum(axis=0) @ offset)


def log_prior(prior):
    def density(mu: np.ndarray) -> np.ndarray:
        distance = 10.0 ** (0.2 * mu - 2.0)
        if prior == "flat in modulus":
            return np.zeros_like(mu)
        if prior == "uniform in volume":
            return 3.0 * np.log(distance)
        return 3.0 * np.log(distance) - distance / prior["exponential"]

    return density


def test_riess_2021_under_each_distance_prior(stars: pd.DataFrame) -> None:
    ladder = lf.build_ladder(CHOICES, {"anchors.parallaxes": stars})
    found = comparison(along_distance_priors(ladder, PRIORS, seed=1, draws=20_000))
    print(f"\n{found.round(4)}")
    assert list(found.index) == list(PRIORS)
    for name, prior in PRIORS.items():
        zero_point, offset = on_a_grid(stars, log_prior(prior))
        assert (zero_point, offset) == pytest.approx(EXPECTED[name], abs=6e-4), name
        row = found.loc[name]
        limit = 5.0 / np.sqrt(20_000)  # Monte Carlo error
        assert abs(row["zero_point"] - zero_point) < limit * row["zero_point_sd"], name
        assert abs(row["parallax_offset"] - offset) < limit * row["parallax_offset_sd"], name


def test_what_the_data_say_of_the_length(stars: pd.DataFrame) -> None:
    """A free length settles between the fixed ones; the disc is left out without positions."""
    ladder = lf.build_ladder(CHOICES, {"anchors.parallaxes": stars})
    free = ladder.change(
        {
            "anchors.parallaxes.distance_prior": {"exponential": 2.0},
            "priors.distance_length": {"log_normal": [2.0, 2.0]},
        }
    )
    result = lf.draw(free, seed=1, draws=4000)
    assert result.mean("distance_length") == pytest.approx(0.75, abs=0.03)
    assert result.mean("zero_point") == pytest.approx(-5.927, abs=0.005)
    assert "disc, 2.5 and 0.1 kpc" not in along_distance_priors(ladder, draws=500)
