"""A published calibration on a published sample: the Large Magellanic Cloud from parallaxes.

The Milky Way Cepheids of Riess et al. 2021, ApJ 908, L6, table 1, calibrate; the Cepheids of
Riess et al. 2019, ApJ 876, 85, table 2, are the new host.  Both tables give the same magnitude
mWH.  The geometric modulus is that of Pietrzynski et al. 2019, Nature 567, 200: 49.59 kpc, so
18.477 +- 0.026 (the distance read in the abstract).  The metallicity of the new stars,
[Fe/H] = -0.30, is from memory.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from test_published_parallaxes import BOTH_FREE, ladder

from ladderfit.distances.moduli import Distances, distances_of
from ladderfit.sampling.run import draw

pytestmark = pytest.mark.published

METALLICITY = -0.30  # dex, from memory
GEOMETRY = (18.477, 0.026)
COLUMNS = {
    "cepheids.columns.host": "Galaxy",
    "cepheids.columns.star": "OGLE",
    "cepheids.columns.log_period": "logP",
}


@pytest.fixture(scope="module")
def calibrating(published_tables: Path) -> pd.DataFrame:
    table = pd.read_csv(published_tables / "riess2021_table1.csv", keep_default_na=False)
    kept = table[table["note"] == ""]
    return kept.astype(dict.fromkeys(kept.columns.drop(["name", "note"]), float))


@pytest.fixture(scope="module")
def cloud(published_tables: Path) -> pd.DataFrame:
    table = pd.read_csv(published_tables / "riess2019_table2.csv")
    return table.assign(Galaxy="Cloud", FeH=METALLICITY, OGLE=table["OGLE"].astype(str))


def test_fixed_relation_against_the_weighted_mean(
    calibrating: pd.DataFrame, cloud: pd.DataFrame
) -> None:
    """With slope, metallicity term and scatter held, the modulus is a weighted mean."""
    result = draw(ladder(calibrating), seed=1, draws=8000)
    found = distances_of(result, [cloud], changes=COLUMNS)
    weight = 1.0 / (cloud["e_mWH"] ** 2 + 0.06**2)
    level = np.average(cloud["mWH"] + 3.26 * (cloud["logP"] - 1.0), weights=weight)
    expected = level - (result.mean("zero_point") - 0.17 * METALLICITY)
    error = np.hypot(result.sd("zero_point"), weight.sum() ** -0.5)
    assert found.draws["Cloud"].mean() == pytest.approx(expected, abs=0.002)
    assert found.draws["Cloud"].std() == pytest.approx(error, rel=0.05)


def test_the_geometric_distance_is_met(calibrating: pd.DataFrame, cloud: pd.DataFrame) -> None:
    free = BOTH_FREE | {"priors.scatter": {"half_normal": 0.3}}
    result = draw(ladder(calibrating).change(free), seed=1, draws=8000)
    found: Distances = distances_of(result, [cloud], changes=COLUMNS)
    apart = found.draws["Cloud"].mean() - GEOMETRY[0]
    assert abs(apart) < 2.0 * np.hypot(found.draws["Cloud"].std(), GEOMETRY[1])
    metals = calibrating["FeH"]
    outside = not metals.min() <= METALLICITY <= metals.max()
    told = any("outside the calibrated metallicity" in words for words in found.warnings)
    assert told == outside
