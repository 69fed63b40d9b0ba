"""Riess et al. 2016, ApJ 826, 56: M31 in and out, metallicity dropped, each anchor, at once.

One ladder file, one command, one table.  Cepheids of table 4 with those of M31, peaks
of table 5.  Anchors: NGC 4258 as in ``test_published_ladder``, and M31 at 24.36 +- 0.08
mag (eclipsing binaries; Vilardell et al. 2010 as used there, memory).  The numbers of
each row are held against plain weighted least squares, written out here.
"""

from __future__ import annotations

import copy
from pathlib import Path
from typing import Any

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

from ladderfit.choices import Choices
from ladderfit.classical import weighted_least_squares
from ladderfit.cli import main
from ladderfit.ladder_file import write_choices

pytestmark = pytest.mark.published

M31 = {"modulus": 24.36, "error": 0.08}
AXES: dict[str, Any] = {
    "cepheids.set_aside": [[{"host": "M31", "reason": "no supernova there"}]],
    "relation.metallicity": ["none"],
    "anchors.geometric.N4258.use": [False],
    "anchors.geometric.M31.use": [False],
}
DRAWS = 4000


@pytest.fixture(scope="module")
def stars(published_tables: Path) -> pd.DataFrame:
    table = pd.read_csv(published_tables / "riess2016_table4.csv", dtype={"ID": str})
    return table.assign(ID=[f"star {i}" for i in range(1, len(table) + 1)])


@pytest.fixture(scope="module")
def table(stars: pd.DataFrame, tmp_path_factory: pytest.TempPathFactory) -> pd.DataFrame:
    """The command's one table."""
    folder = tmp_path_factory.mktemp("riess2016")
    stars.to_csv(folder / "table4.csv", index=False)
    peaks().to_csv(folder / "table5.csv", index=False)
    choices = copy.deepcopy(CHOICES)
    choices["cepheids"]["table"], choices["supernovae"]["table"] = "table4.csv", "table5.csv"
    choices["anchors"]["geometric"]["M31"] = M31
    choices["priors"] |= NO_SCATTERS
    choices["alternatives"] = AXES
    write_choices(Choices.from_mapping(choices), folder / "riess2016.toml")
    out = folder / "out"
    options = ["--draws", str(DRAWS), "--workers", "1", "--out", str(out)]
    assert main(["alternatives", str(folder / "riess2016.toml"), *options]) == 0
    return pd.read_csv(out / "alternatives.csv")


def least_squares(
    stars: pd.DataFrame, anchors: dict[str, dict[str, float]], metallicity: bool
) -> tuple[float, float, float, float]:
    """H0 with its error, and the slope with its error, from one dense weighted system."""
    supernovae = peaks()
    hosts = list(dict.fromkeys([*stars["Gal"], *supernovae["host"]]))
    terms = ["slope", *(["metallicity"] if metallicity else []), "zero_point", "peak"]
    k = len(terms)
    x = np.zeros((len(stars), k + len(hosts)))
    x[:, 0] = np.log10(stars["period_d"]) - 1.0
    x[:, k - 2] = 1.0
    if metallicity:
        x[:, 1] = stars["OH12"] - 8.9
    x[:, k:] = stars["Gal"].to_numpy()[:, None] == np.array(hosts)
    sn = np.zeros((len(supernovae), k + len(hosts)))
    sn[:, k - 1] = 1.0
    sn[:, k:] = supernovae["host"].to_numpy()[:, None] == np.array(hosts)
    given = np.zeros((len(anchors) + 1, k + len(hosts)))
    for row, host in enumerate(anchors):
        given[row, k + hosts.index(host)] = 1.0
    prior, width = METALLICITY_PRIOR["normal"]
    given[-1, 1 if metallicity else 0] = 1.0
    last = (prior, width) if metallicity else (-3.3, 0.5)  # the default prior of the slope
    index = stars["F160W"] - WESENHEIT_RATIO * stars["V_minus_I"]
    moduli = [anchor["modulus"] for anchor in anchors.values()]
    data = np.concatenate([index, supernovae["mB"], moduli, [last[0]]])
    wide = [anchor["error"] for anchor in anchors.values()]
    errors = [stars["e_tot"], supernovae["e_mB_plus_5aB"], wide, [last[1]]]
    found = weighted_least_squares(np.vstack([x, sn, given]), data, np.concatenate(errors))
    h0 = 10.0 ** (0.2 * (found.values[k - 1] + 25.0 + 5.0 * INTERCEPT["value"]))
    error = np.hypot(found.errors[k - 1], 5.0 * INTERCEPT["error"]) * 0.2 * np.log(10.0) * h0
    return float(h0), float(error), float(found.values[0]), float(found.errors[0])


BOTH = {"N4258": ANCHOR, "M31": M31}
ROWS: dict[str, tuple[dict[str, dict[str, float]], bool, bool]] = {
    "baseline": (BOTH, True, True),
    "cepheids.set_aside": ({"N4258": ANCHOR}, True, False),
    "relation.metallicity": (BOTH, False, True),
    "anchors.geometric.N4258.use": ({"M31": M31}, True, True),
    "anchors.geometric.M31.use": ({"N4258": ANCHOR}, True, True),
}


def test_one_table(table: pd.DataFrame, stars: pd.DataFrame) -> None:
    assert list(table["axis"]) == list(ROWS)
    assert (table["status"] == "done").all()
    outside = int((stars["Gal"] != "M31").sum())
    assert list(table["cepheids_kept"]) == [len(stars), outside, *[len(stars)] * 3]
    assert (table["supernovae_kept"] == len(RIESS_2016_TABLE_5)).all()
    known = table["log_evidence"].notna()  # the same stars and anchors: metallicity alone
    assert list(known) == [True, False, True, False, False]


@pytest.mark.parametrize("axis", list(ROWS))
def test_each_row_is_the_least_squares(table: pd.DataFrame, stars: pd.DataFrame, axis: str) -> None:
    anchors, metallicity, with_m31 = ROWS[axis]
    kept = stars if with_m31 else stars[stars["Gal"] != "M31"]
    h0, error, slope, slope_error = least_squares(kept, anchors, metallicity)
    row = table.set_index("axis").loc[axis]
    few = 5.0 / np.sqrt(DRAWS)
    # the relation's weak default priors, and H0's curvature, are worth less than 0.1 errors
    assert row["hubble_constant"] == pytest.approx(h0, abs=(few + 0.1) * error)
    assert row["hubble_constant_sd"] == pytest.approx(error, rel=0.1)
    assert row["slope"] == pytest.approx(slope, abs=(few + 0.02) * slope_error)
    assert row["slope_sd"] == pytest.approx(slope_error, rel=0.06)


def test_what_moves_it(table: pd.DataFrame) -> None:
    """As published: without M31 flatter and with a larger H0 (test_published_m31)."""
    rows = table.set_index("axis")
    assert rows.loc["cepheids.set_aside", "slope_shift"] > 1.0
    assert rows.loc["anchors.geometric.M31.use", "hubble_constant"] == pytest.approx(70.98, abs=0.3)
    assert rows.loc["cepheids.set_aside", "hubble_constant"] == pytest.approx(72.42, abs=0.3)
