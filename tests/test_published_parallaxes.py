"""The parallax sample of Riess et al. 2021, ApJ 908, L6, table 1, refitted.

74 Milky Way Cepheids with EDR3 parallaxes, corrected after Lindegren et al. 2021.  Note
f marks stars without a usable parallax; g and h are flagged in the paper.  The magnitude
mWH is used as published (its count-rate term is inside).  The zero point is stated at
10 d and [Fe/H] = 0, the metallicities being tabulated as [Fe/H].

The paper's offset is photometric minus measured parallax; ``parallax_offset`` is what a
measured parallax has too much.  So the published sign is the other one.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd
import pytest
from scipy.optimize import minimize

import ladderfit as lf
from ladderfit.ladder import Ladder
from ladderfit.result import Result
from ladderfit.sampling.run import draw

pytestmark = pytest.mark.published

DRAWS = 20_000
SLOPE, METALLICITY, SCATTER = -3.26, -0.17, 0.06  # held, as in the paper

CHOICES: dict[str, Any] = {
    "title": "Riess et al. 2021",
    "relation": {"metallicity": {"reference": 0.0, "scale": "[Fe/H]"}},
    "anchors": {
        "parallaxes": {
            "columns": {
                "star": "name",
                "log_period": "logP",
                "metallicity": "FeH",
                "parallax": "plx_EDR3_L21corr_mas",
                "parallax_error": "e_plx_EDR3_mas",
            },
            "magnitude": {"band": "W_H", "bands": {"W_H": "mWH"}, "errors": {"W_H": "e_mWH"}},
            "corrected": True,
            "distance_prior": "flat in modulus",
        }
    },
    "priors": {
        "slope": {"fixed": SLOPE},
        "metallicity": {"fixed": METALLICITY},
        "scatter": {"fixed": SCATTER},
        "zero_point": {"normal": [-5.9, 5.0]},
        "parallax_offset": {"normal": [0.0, 1.0]},  # mas: a hundred times the posterior's width
    },
}
BOTH_FREE = {
    "priors.slope": {"normal": [-3.3, 5.0]},
    "priors.metallicity": {"normal": [-0.2, 5.0]},
}

# Computed (least squares in parallax, below): M and the paper's offset [microarcsec].
ALL = {"zero_point": (-5.925, 0.024), "offset": (-15.1, 5.8)}
WITHOUT_FLAGGED = {"offset": (-18.1, 5.9)}
TOLERANCE = {"zero_point": 0.01, "offset": 2.0}  # mag, microarcsec


@pytest.fixture(scope="module")
def stars(published_tables: Path) -> pd.DataFrame:
    table = pd.read_csv(published_tables / "riess2021_table1.csv", keep_default_na=False)
    kept = table[table["note"] != "f"]
    numbers = kept.columns.drop(["name", "note"])
    return kept.astype(dict.fromkeys(numbers, float))


@pytest.fixture(scope="module")
def unflagged(stars: pd.DataFrame) -> pd.DataFrame:
    return stars[stars["note"] == ""]


def ladder(stars: pd.DataFrame) -> Ladder:
    return lf.build_ladder(CHOICES, {"anchors.parallaxes": stars})


def paper_offset(result: Result) -> float:
    """Photometric minus measured parallax [microarcsec]."""
    return -1000.0 * result.mean("parallax_offset")


def test_riess_2021(stars: pd.DataFrame) -> None:
    result = draw(ladder(stars), seed=1, draws=DRAWS)
    assert len(result.ladder.parallax_stars) == 67
    for name, found in (
        ("zero_point", result.mean("zero_point")),
        ("offset", paper_offset(result)),
    ):
        assert found == pytest.approx(ALL[name][0], abs=TOLERANCE[name]), name
    assert result.sd("zero_point") == pytest.approx(ALL["zero_point"][1], rel=0.05)
    assert 1000.0 * result.sd("parallax_offset") == pytest.approx(ALL["offset"][1], rel=0.05)
    assert paper_offset(result) == pytest.approx(-14.0, abs=6.0)  # published -14 +- 6, memory


def test_riess_2021_without_the_flagged_stars(unflagged: pd.DataFrame) -> None:
    result = draw(ladder(unflagged), seed=1, draws=DRAWS)
    assert len(result.ladder.parallax_stars) == 64
    value, error = WITHOUT_FLAGGED["offset"]
    assert paper_offset(result) == pytest.approx(value, abs=TOLERANCE["offset"])
    assert 1000.0 * result.sd("parallax_offset") == pytest.approx(error, rel=0.05)


def test_riess_2021_slope_and_metallicity_free(unflagged: pd.DataFrame) -> None:
    # Computed, without the flagged stars: slope -3.32 +- 0.07, metallicity -0.18 +- 0.13.
    result = draw(ladder(unflagged).change(BOTH_FREE), seed=1, draws=DRAWS)
    for name, (value, error) in {"slope": (-3.32, 0.07), "metallicity": (-0.18, 0.13)}.items():
        assert abs(result.mean(name) - value) < 0.5 * error, name
        assert result.sd(name) == pytest.approx(error, rel=0.1), name


# Where the reference numbers come from, and why the posterior is not exactly there.


def misfit(stars: pd.DataFrame, parameters: npt.NDArray[np.float64], evidence: bool) -> float:
    """-2 ln likelihood of zero point and offset, linearised in the photometric parallax.

    Without the logarithm of the variance (`evidence`) it is chi squared, which a larger
    variance makes smaller: it leans to larger photometric parallaxes, a fainter zero point.
    """
    zero_point, offset = parameters[:2]
    slope, metallicity = parameters[2:] if len(parameters) > 2 else (SLOPE, METALLICITY)
    absolute = zero_point + slope * (stars["logP"] - 1.0) + metallicity * stars["FeH"]
    photometric = 10.0 ** (2.0 - 0.2 * (stars["mWH"] - absolute))
    spread = 0.2 * np.log(10.0) * photometric * np.sqrt(stars["e_mWH"] ** 2 + SCATTER**2)
    variance = stars["e_plx_EDR3_mas"] ** 2 + spread**2
    terms = (stars["plx_EDR3_L21corr_mas"] - photometric - offset) ** 2 / variance
    return float(np.sum(terms + np.log(variance) if evidence else terms))


def best(stars: pd.DataFrame, *, evidence: bool, free: bool = False) -> npt.NDArray[np.float64]:
    start = [-5.9, 0.015, SLOPE, METALLICITY] if free else [-5.9, 0.015]
    found = minimize(
        lambda parameters: misfit(stars, parameters, evidence),
        start,
        method="Nelder-Mead",
        options={"xatol": 1e-7, "fatol": 1e-9, "maxiter": 5000},
    )
    assert found.success
    return np.asarray(found.x)


def test_least_squares_in_parallax_gives_the_computed_values(
    stars: pd.DataFrame, unflagged: pd.DataFrame
) -> None:
    zero_point, offset = best(stars, evidence=False)
    assert zero_point == pytest.approx(-5.925, abs=0.0006)
    assert -1000.0 * offset == pytest.approx(-15.1, abs=0.06)
    assert -1000.0 * best(unflagged, evidence=False)[1] == pytest.approx(-18.1, abs=0.06)
    _, _, slope, metallicity = best(unflagged, evidence=False, free=True)
    assert slope == pytest.approx(-3.32, abs=0.006)
    assert metallicity == pytest.approx(-0.18, abs=0.006)


def test_the_posterior_is_where_the_whole_likelihood_has_it(stars: pd.DataFrame) -> None:
    """With the logarithm of the variance the linearised form finds the posterior's mean."""
    result = draw(ladder(stars), seed=1, draws=DRAWS)
    zero_point, offset = best(stars, evidence=True)
    # A tenth of the errors: linearising, and mode for mean.
    assert result.mean("zero_point") == pytest.approx(zero_point, abs=0.0024)
    assert result.mean("parallax_offset") == pytest.approx(offset, abs=0.00058)
    chi_squared = best(stars, evidence=False)
    assert result.mean("zero_point") < chi_squared[0] - 0.005


def test_uniform_in_volume_moves_both(stars: pd.DataFrame) -> None:
    """The other prior, without a selection: brighter and a larger offset, by the same stars."""
    flat = ladder(stars)
    volume = flat.change({"anchors.parallaxes.distance_prior": "uniform in volume"})
    shift = draw(volume, seed=1, draws=DRAWS).shift_from(draw(flat, seed=1, draws=DRAWS))
    assert shift.loc["zero_point", "in_errors"] < -1.0
    assert shift.loc["parallax_offset", "in_errors"] > 1.0
