"""One ladder under every treatment of outliers: numbers, evidence and cost in one table.

    python tests/outlier_treatments.py

prints the sample, and Riess et al. 2016 (ApJ 826, 56) where LADDERFIT_TABLES names the
folder of published tables.  The cost is processor time over that of the plain fit; its
tables of sums, built once, count in neither.
"""

from __future__ import annotations

import os
import time
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pandas as pd

from ladderfit.checks.outliers import outlier_table
from ladderfit.choices.outliers import CLIPPING, MIXTURE, STUDENT
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.sampling.run import draw
from ladderfit.shipped import sample_ladder

KEY = "cepheids.outliers.treatment"
TREATMENTS = {
    "none": {KEY: "none"},
    "mixture": {KEY: MIXTURE},
    "mixture, offset free": {KEY: MIXTURE, "priors.outlier_offset": {"normal": [0.0, 1.0]}},
    "Student-t": {KEY: STUDENT},
    "Student-t, 4 degrees": {KEY: STUDENT, "priors.degrees_of_freedom": {"fixed": 4.0}},
    "clipped at 3, as in older papers": {KEY: CLIPPING},
    "clipped at 2.7, as in older papers": {KEY: CLIPPING, "cepheids.outliers.threshold": 2.7},
}
SHOWN = ("hubble_constant", "slope", "zero_point", "scatter")


def treatments(ladder: Ladder, draws: int = 4000) -> pd.DataFrame:
    """One row per treatment: mean and sd of headline numbers, stars off, evidence, cost."""
    for changes in TREATMENTS.values():
        draw(ladder.change(changes), seed=1, draws=200)  # compile
    found = dict(_rows(ladder, draws))
    table = pd.DataFrame.from_dict(found, orient="index")
    table["cost"] = table["seconds"] / table["seconds"]["none"]
    table["log_evidence"] -= table["log_evidence"]["none"]
    return table.drop(columns="seconds")


def _rows(ladder: Ladder, draws: int) -> Iterator[tuple[str, dict[str, float]]]:
    for words, changes in TREATMENTS.items():
        changed = ladder.change(changes)
        start = time.process_time()
        result = draw(changed, seed=1, draws=draws)
        row = {"seconds": time.process_time() - start}
        for name in SHOWN:
            row[name], row[f"sd {name}"] = result.mean(name), result.sd(name)
        stars = outlier_table(result)
        row["off"] = 0.0 if stars is None else float(np.nansum(stars.probability > 0.5))
        row["aside"] = float(len(ladder.cepheids) - len(changed.cepheids))
        row["pareto_k"] = result.diagnostics.pareto_k
        same = row["aside"] == 0.0  # evidences compare fits to identical data alone
        row["log_evidence"] = result.diagnostics.log_evidence if same else np.nan
        yield words, row


def riess_2016(folder: Path) -> Ladder:
    """NGC 4258 and 19 hosts of supernovae, scatters free."""
    from test_published_ladder import CHOICES, peaks

    from ladderfit.ladder import build_ladder

    table = pd.read_csv(folder / "riess2016_table4.csv", dtype={"ID": str})
    stars = table[table["Gal"] != "M31"]
    return build_ladder(CHOICES, {"cepheids": stars, "supernovae": peaks()})


if __name__ == "__main__":
    pd.set_option("display.width", 250, "display.max_columns", 30, "display.precision", 3)
    print(treatments(read_ladder(sample_ladder())))
    if "LADDERFIT_TABLES" in os.environ:
        print(treatments(riess_2016(Path(os.environ["LADDERFIT_TABLES"]))))
