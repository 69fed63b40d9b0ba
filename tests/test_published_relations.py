"""Published period-luminosity relations, refitted: Riess 2019, Scowcroft 2011, OGLE-IV.

Cepheids of the Large Magellanic Cloud, whose modulus is given, so that modulus plus
zero point is the line in apparent magnitudes.  Beside each number: "read", "memory"
or "computed", as explained in ``published.py``; tolerances stand in the assertions.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
import pandas as pd
import pytest
from astropy.table import QTable

import ladderfit as lf
from ladderfit.choices import Choices
from ladderfit.classical import (
    Clipped,
    clipped_least_squares,
    line_design,
    ordinary_least_squares,
)
from ladderfit.ladder_file import write_choices
from ladderfit.physics.photometry import wesenheit
from ladderfit.result import Result
from ladderfit.sampling.run import draw

pytestmark = pytest.mark.published

DRAWS = 20_000

# Pietrzynski et al. 2019: 18.477 +- 0.026 (memory).  It sets the scale and nothing else here.
ANCHORS = {"geometric": {"LMC": {"modulus": 18.477, "error": 0.026}}}
WIDE = {"slope": {"normal": [-3.3, 5.0]}, "zero_point": {"normal": [-5.9, 10.0]}}


def apparent(result: Result, log_period: float) -> np.ndarray:
    """Draws of the fundamental line's apparent magnitude at a log10 period [d]."""
    draws = result.draws
    return draws["modulus[LMC]"] + draws["zero_point"] + draws["slope"] * (log_period - 1.0)


# Riess et al. 2019, ApJ 876, 85, table 2: 70 Cepheids.


@pytest.fixture(scope="module")
def riess_2019(published_tables: Path) -> pd.DataFrame:
    table = pd.read_csv(published_tables / "riess2019_table2.csv", dtype={"OGLE": str})
    return table.assign(host="LMC")


def fixed_slope(table: pd.DataFrame) -> Clipped:
    """The zero point at log P = 0 for a slope of -3.26, clipped at 2.7 standard deviations."""
    rest = table["mWH"] + 3.26 * table["logP"]
    return clipped_least_squares(np.ones((len(table), 1)), rest, 2.7)


def test_riess_2019_as_published(riess_2019: pd.DataFrame) -> None:
    # Computed: 68 of 70 stars, s.d. 0.0755 (published 0.075, memory), zero point 15.9145.
    clipped = fixed_slope(riess_2019)
    assert (len(riess_2019), clipped.kept.sum()) == (70, 68)
    assert clipped.fit.residual_sd == pytest.approx(0.0755, abs=0.00006)
    assert clipped.fit.residual_sd == pytest.approx(0.075, abs=0.001)
    assert clipped.fit.values[0] == pytest.approx(15.9145, abs=0.00006)
    # With mu(LMC) = 18.477: -5.8225 at 10 d (computed).
    assert clipped.fit.values[0] - 3.26 - 18.477 == pytest.approx(-5.8225, abs=0.00006)


def test_riess_2019_free_slope(riess_2019: pd.DataFrame) -> None:
    # Computed, least squares on the 68: -3.315 +- 0.039.
    kept = riess_2019[fixed_slope(riess_2019).kept]
    found = ordinary_least_squares(line_design(kept["logP"]), kept["mWH"])
    assert found.values[0] == pytest.approx(-3.315, abs=0.0006)
    assert found.errors[0] == pytest.approx(0.039, abs=0.0006)


RIESS_2019: dict[str, Any] = {
    "title": "Riess et al. 2019",
    "anchors": ANCHORS,
    "cepheids": {
        "columns": {"star": "OGLE", "host": "host", "log_period": "logP"},
        "magnitude": {"band": "W_H", "bands": {"W_H": "mWH"}, "errors": {"W_H": "e_mWH"}},
    },
    "priors": WIDE,
}


def test_riess_2019_hierarchical(riess_2019: pd.DataFrame) -> None:
    """Free slope and scatter, the two stars of the published clip set aside by name."""
    beyond = riess_2019["OGLE"][~fixed_slope(riess_2019).kept]
    aside = [{"star": star, "reason": "beyond 2.7 standard deviations"} for star in beyond]
    ladder = lf.build_ladder(RIESS_2019, {"cepheids": riess_2019})
    result = draw(ladder.change({"cepheids.set_aside": aside}), seed=1, draws=DRAWS)
    assert result.ladder.kept["cepheids"].kept == 68
    assert abs(result.mean("slope") + 3.315) < 0.5 * 0.039
    assert result.sd("slope") == pytest.approx(0.039, rel=0.1)
    # Intrinsic scatter and measurement errors (0.027 mag at the median) make up the s.d.
    error = np.sqrt(result.ladder.cepheids.variance.mean())
    assert np.hypot(result.mean("scatter"), error) == pytest.approx(0.0755, abs=0.003)
    # Fixed at the published slope, the zero point is the classical one.
    fixed = draw(result.ladder.change({"priors.slope": {"fixed": -3.26}}), seed=1, draws=DRAWS)
    line = apparent(fixed, 0.0)
    assert line.mean() == pytest.approx(15.9145, abs=0.5 * 0.0092)  # half its error (computed)
    assert line.std() == pytest.approx(0.0092, rel=0.1)


def test_riess_2019_without_the_clip(riess_2019: pd.DataFrame) -> None:
    """All 70: the slope stays, so the test above does not hang on the two stars."""
    result = draw(lf.build_ladder(RIESS_2019, {"cepheids": riess_2019}), seed=1, draws=DRAWS)
    assert abs(result.mean("slope") + 3.315) < 0.5 * 0.039
    assert result.mean("scatter") > 0.075


# Scowcroft et al. 2011, ApJ 743, 76, table 1: 85 Cepheids at 3.6 and 4.5 microns.


class Mid(NamedTuple):
    """Slope, apparent magnitude at 10 d and residual s.d., computed and published, and errors."""

    computed: tuple[float, float, float]
    published: tuple[float, float, float]
    errors: tuple[float, float]


# 6 < P < 60 d, least squares on 80 stars (computed); published from memory.
SCOWCROFT = {
    "36": Mid((-3.306, 12.703, 0.110), (-3.31, 12.70, 0.108), (0.054, 0.018)),
    "45": Mid((-3.207, 12.694, 0.116), (-3.21, 12.69, 0.116), (0.057, 0.019)),
}


@pytest.fixture(scope="module")
def scowcroft_2011(published_tables: Path) -> pd.DataFrame:
    return pd.read_csv(published_tables / "scowcroft2011_table1.csv").assign(host="LMC")


def scowcroft(table: pd.DataFrame, band: str, periods: list[float]) -> Result:
    choices: dict[str, Any] = {
        "title": "Scowcroft et al. 2011",
        "anchors": ANCHORS,
        "cepheids": {
            "columns": {"star": "name", "host": "host", "period": "period_d"},
            "periods": periods,
            "magnitude": {
                "band": "mid",
                "bands": {"mid": f"m{band}"},
                "errors": {"mid": f"e_m{band}"},
            },
        },
        "priors": WIDE,
    }
    return draw(lf.build_ladder(choices, {"cepheids": table}), seed=1, draws=DRAWS)


@pytest.mark.parametrize("band", SCOWCROFT)
def test_scowcroft_2011_under_its_cut(scowcroft_2011: pd.DataFrame, band: str) -> None:
    result = scowcroft(scowcroft_2011, band, [6.0, 60.0])
    assert result.ladder.kept["cepheids"].kept == 80
    expected = SCOWCROFT[band]
    level = apparent(result, 1.0)
    for slope, magnitude, scatter in (expected.computed, expected.published):
        assert abs(result.mean("slope") - slope) < 0.1 * expected.errors[0]
        assert abs(level.mean() - magnitude) < 0.25 * expected.errors[1]
        assert result.mean("scatter") == pytest.approx(scatter, abs=0.005)
    assert result.sd("slope") == pytest.approx(expected.errors[0], rel=0.1)
    assert level.std() == pytest.approx(expected.errors[1], rel=0.1)


def test_scowcroft_2011_without_its_cut(scowcroft_2011: pd.DataFrame) -> None:
    # All 85: -3.145 +- 0.052 (computed); five stars beyond 60 d move the slope by 3 errors.
    result = scowcroft(scowcroft_2011, "36", [0.0, 1000.0])
    assert result.ladder.kept["cepheids"].kept == 85
    assert abs(result.mean("slope") + 3.145) < 0.1 * 0.052
    assert result.sd("slope") == pytest.approx(0.052, rel=0.1)
    assert result.mean("slope") > -3.306 + 2.5 * 0.054


# OGLE-IV, Soszynski et al. 2015, AcA 65, 297: W = I - 1.55 (V - I), both modes in one ladder.

# Computed, least squares with a clip at 3 standard deviations, each mode alone.  For the
# fundamental mode -3.314 and 15.89 in the literature (memory; papers agree within 0.01).
FUNDAMENTAL = {"stars": 2223, "slope": (-3.3147, 0.0079), "level": (15.8887, 0.0050), "sd": 0.0776}
OVERTONE = {"stars": 1604, "slope": (-3.437, 0.008), "level": (15.396, 0.003), "sd": 0.0796}

# The table gives no errors.  The same small one for all: the scatters take up the rest.
OGLE_ERROR = 0.02  # mag

OGLE: dict[str, Any] = {
    "title": "OGLE-IV Cepheids of the LMC",
    "anchors": ANCHORS,
    "cepheids": {
        "columns": {"star": "id", "host": "host", "period": "period_d", "mode": "mode"},
        "overtones": "offset",
        "magnitude": {
            "wesenheit": {"band": "I", "colour": ["V", "I"], "ratio": 1.55},
            "bands": {"V": "V", "I": "I"},
            "errors": {"total": "e_W"},
        },
    },
    "groups": {"overtone": {"mode": "overtone"}},
    "relation": {"scatter": ["overtone"], "slopes": ["overtone"]},
    "priors": WIDE,
}


@pytest.fixture(scope="module")
def ogle(published_tables: Path) -> pd.DataFrame:
    table = pd.read_csv(published_tables / "ogle4_lmc_cepheids.csv")
    return table.assign(host="LMC", e_W=OGLE_ERROR, W=wesenheit(table.I, table.V, table.I, 1.55))


@pytest.fixture(scope="module")
def clips(ogle: pd.DataFrame) -> dict[str, tuple[pd.DataFrame, Clipped]]:
    """By mode: its stars with both magnitudes, and the clipped line."""
    found = {}
    for mode in ("F", "1O"):
        stars = ogle[(ogle["mode"] == mode) & ogle["W"].notna()]
        design = line_design(np.log10(stars["period_d"]))
        found[mode] = (stars, clipped_least_squares(design, stars["W"], 3.0))
    return found


@pytest.fixture(scope="module")
def both_modes(
    ogle: pd.DataFrame,
    clips: dict[str, tuple[pd.DataFrame, Clipped]],
    tmp_path_factory: pytest.TempPathFactory,
) -> Result:
    """One ladder file for the stars that the two clips keep; the 172 others are set aside."""
    folder = tmp_path_factory.mktemp("ogle")
    units = {"period_d": "d", "V": "mag", "I": "mag", "e_W": "mag"}
    columns = ["id", "host", "mode", *units]
    QTable.from_pandas(ogle[columns], units=units).write(folder / "cepheids.ecsv")
    beyond = pd.concat([stars["id"][~clipped.kept] for stars, clipped in clips.values()])
    aside = [{"star": star, "reason": "beyond 3 standard deviations"} for star in beyond]
    choices = {**OGLE, "cepheids": {**OGLE["cepheids"], "table": "cepheids.ecsv"}}
    whole = Choices.from_mapping(choices).change({"cepheids.set_aside": aside})
    write_choices(whole, folder / "ogle.toml")
    return draw(lf.read_ladder(folder / "ogle.toml"), seed=1, draws=DRAWS)


@pytest.mark.parametrize(("mode", "expected"), [("F", FUNDAMENTAL), ("1O", OVERTONE)])
def test_ogle_as_in_older_papers(
    clips: dict[str, tuple[pd.DataFrame, Clipped]], mode: str, expected: dict[str, Any]
) -> None:
    _, clipped = clips[mode]
    digit = 0.00006 if mode == "F" else 0.0006
    assert clipped.kept.sum() == expected["stars"]
    for place, name in enumerate(("slope", "level")):
        value, error = expected[name]
        assert clipped.fit.values[place] == pytest.approx(value, abs=digit)
        assert clipped.fit.errors[place] == pytest.approx(error, abs=digit)
    assert clipped.fit.residual_sd == pytest.approx(expected["sd"], abs=0.00006)


def test_ogle_both_modes_in_one_ladder(both_modes: Result) -> None:
    assert both_modes.ladder.kept["cepheids"].kept == 2223 + 1604
    draws = both_modes.draws
    slopes = {"F": draws["slope"], "1O": draws["slope"] + draws["slope_offset[overtone]"]}
    level = apparent(both_modes, 0.0)
    levels = {"F": level, "1O": level + draws["overtone_offset"] - draws["slope_offset[overtone]"]}
    scatters = {"F": "scatter", "1O": "scatter[overtone]"}
    for mode, expected in (("F", FUNDAMENTAL), ("1O", OVERTONE)):
        for name, found in (("slope", slopes[mode]), ("level", levels[mode])):
            value, error = expected[name]
            assert abs(found.mean() - value) < 0.5 * error, (mode, name)
            assert found.std() == pytest.approx(error, rel=0.1), (mode, name)
        whole = np.hypot(both_modes.mean(scatters[mode]), OGLE_ERROR)
        assert whole == pytest.approx(expected["sd"], abs=0.0005)
    # Literature, fundamental mode: -3.314, 15.89 (memory).
    assert both_modes.mean("slope") == pytest.approx(-3.314, abs=0.01)
    assert level.mean() == pytest.approx(15.89, abs=0.01)


def test_ogle_outliers_matter(ogle: pd.DataFrame, both_modes: Result) -> None:
    """The negative control: with nothing set aside the clipped values are not found again."""
    result = draw(lf.build_ladder(OGLE, {"cepheids": ogle}), seed=1, draws=DRAWS)
    kept = result.ladder.kept["cepheids"]
    assert (kept.total, kept.kept) == (4256, 2223 + 1604 + 172)
    assert sum(kept.reasons.values()) == 257  # without V or without I
    assert result.mean("scatter") > 2.0 * both_modes.mean("scatter")
    value, error = FUNDAMENTAL["slope"]
    assert abs(result.mean("slope") - value) > 2.0 * error
