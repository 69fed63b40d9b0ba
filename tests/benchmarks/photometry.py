"""Riess et al. 2016 under each photometric treatment, in one table, with what each costs.

    LADDERFIT_TABLES=FOLDER python tests/benchmarks/photometry.py

NGC 4258 is the only anchor, as in tests/test_published_ladder.py.  The table gives total
errors alone; a free ratio needs the colour's, for which 0.10 mag is assumed here (an
assumption, not a published number), the rest of each total error being F160W's.  The
shared term loads each star with its total error, as crowding would; the limits are each
host's faintest F160W.  Costs are processor times of 4,000 draws over those of the plain
fit, in the same process.
"""

from __future__ import annotations

import os
import sys
import time
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from test_published_ladder import CHOICES, WESENHEIT_RATIO, peaks

import ladderfit as lf
from ladderfit.checks.completeness import propose_period_cuts
from ladderfit.checks.predictive import predictive_checks
from ladderfit.ladder import Ladder
from ladderfit.result import Result
from ladderfit.sampling.run import draw

COLOUR_ERROR = 0.10  # mag, assumed
ROWS = ("hubble_constant", "slope", "metallicity", "zero_point", "reddening_ratio")
BANDS = {
    "cepheids.magnitude.errors": {"F160W": "e_H", "V-I": "e_VI"},
}


def cepheids(folder: Path) -> pd.DataFrame:
    """Table 4 without M31, its total errors split under the assumption above."""
    table = pd.read_csv(folder / "riess2016_table4.csv", dtype={"ID": str})
    table = table[table["Gal"] != "M31"].reset_index(drop=True)
    table["e_VI"] = COLOUR_ERROR
    table["e_H"] = np.sqrt(table["e_tot"] ** 2 - (WESENHEIT_RATIO * COLOUR_ERROR) ** 2)
    return table


def plain_ladder(folder: Path) -> Ladder:
    """NGC 4258 and 19 hosts, both scatters free: with none, other terms would stand in for it."""
    return lf.build_ladder(CHOICES, {"cepheids": cepheids(folder), "supernovae": peaks()})


def treatments(base: Ladder, *, limits: bool = True) -> dict[str, Mapping[str, Any]]:
    """Changes by name of the treatment; those with limits take a fit to find."""
    stars, faintest = base.cepheids, {}
    for place, host in enumerate(base.hosts):
        faintest[host] = float(stars.photometry.band[stars.host == place].max())
    free = {
        how: {**BANDS, "relation.reddening": {"colours": how}}
        for how in ("in the variance", "one population", "intrinsic relation")
    }
    found: dict[str, Mapping[str, Any]] = {
        "plain": {},
        **{f"ratio free, {how}": changes for how, changes in free.items()},
        "shared, 0.1 per mag of error": {
            "cepheids.shared": {"crowding": {"loading": "e_tot", "error": 0.1}}
        },
        "shared, width free": {"cepheids.shared": {"crowding": {"loading": "e_tot"}}},
    }
    if limits:
        changes = {"cepheids.completeness": {"band": "F160W", "limits": faintest}}
        cuts = propose_period_cuts(draw(base.change(changes), seed=1))
        found |= {"limits at the faintest": changes, "limits cut": cuts.changes}
    return found


def timed(ladder: Ladder, repeats: int = 3) -> tuple[Result, float]:
    """The result, and the least processor time of a few runs [s]."""
    found = []
    for _ in range(repeats):
        start = time.process_time()
        result = draw(ladder, seed=1, draws=4000)
        found.append(time.process_time() - start)
    return result, min(found)


def table(folder: Path, repeats: int = 3) -> pd.DataFrame:
    """One row per treatment: mean and sd of the main numbers, stars, cost, smallest p."""
    base, rows = plain_ladder(folder), {}
    for name, changes in treatments(base).items():
        result, cost = timed(base.change(changes), repeats)
        checks = predictive_checks(result)
        row: dict[str, Any] = {
            key: f"{result.mean(key):.3f} ± {result.sd(key):.3f}" if key in result.draws else ""
            for key in ROWS
        }
        row |= {
            "stars": len(result.ladder.cepheids),
            "cost": cost,
            "k": result.diagnostics.pareto_k,
        }
        row |= {"smallest p": f"{checks.smallest.p:.3f} of {len(checks.checks)}"}
        rows[name] = row
    found = pd.DataFrame.from_dict(rows, orient="index")
    found["cost"] = (found["cost"] / found.loc["plain", "cost"]).round(1)
    return found


if __name__ == "__main__":
    repeats = int(sys.argv[1]) if len(sys.argv) > 1 else 3
    print(table(Path(os.environ["LADDERFIT_TABLES"]), repeats).to_string())
