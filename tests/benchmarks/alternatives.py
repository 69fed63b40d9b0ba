"""How long 1,000 alternatives to the reference ladder take, and whether all crews agree.

    .venv/bin/python tests/benchmarks/alternatives.py [--count N] [--workers N] [--cluster]

With ``--cluster`` the same once more on a Dask cluster of this machine, one of whose
workers is killed half way.  Times under load mean nothing; processor time says more.
"""

from __future__ import annotations

import argparse
import os
import signal
import time
from typing import Any

import numpy as np
import pandas as pd
from distributed import LocalCluster
from ladders import reference_ladder

from ladderfit.alternatives import Comparison, run_alternatives

SHORTEST, LONGEST = (5.5, 12.0), (50.0, 80.0)  # d
NEAREST, FARTHEST = (0.026, 0.04), (0.1, 0.14)


def axes(count: int) -> dict[str, list[Any]]:
    """Cuts in period and in redshift: each changes which rows are summed."""
    side = int(np.ceil(np.sqrt(count / 2)))

    def cuts(low: tuple[float, float], high: tuple[float, float]) -> list[list[float]]:
        pairs = [[a, b] for a in np.linspace(*low, side) for b in np.linspace(*high, side)]
        return [[float(a), float(b)] for a, b in pairs][: count // 2]

    periods, redshifts = cuts(SHORTEST, LONGEST), cuts(NEAREST, FARTHEST)
    return {"cepheids.periods": periods, "expansion.redshifts": redshifts}


def timed(words: str, **how: Any) -> Comparison:
    """Run once and print the times."""
    start, ladder = time.perf_counter(), reference_ladder()
    found = run_alternatives(ladder, **how)
    wall = time.perf_counter() - start
    spent = sum(fit.outcome.seconds for fit in found.fits)
    print(
        f"{words}: {len(found.fits):,} alternatives, {len(found.failed)} failed, {wall:.1f} s; "
        f"processor time of the fits {spent:.1f} s; load {os.getloadavg()[0]:.1f}",
        flush=True,
    )
    return found


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--count", type=int, default=1000)
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--cluster", action="store_true")
    chosen = parser.parse_args()
    wanted = {"axes": axes(chosen.count)}
    first = timed(f"{chosen.workers} workers", workers=chosen.workers, **wanted)
    if not chosen.cluster:
        return
    killed: list[int] = []
    with LocalCluster(
        n_workers=2, threads_per_worker=1, dashboard_address=None, silence_logs=50
    ) as cluster:

        def kill(words: str, fraction: float) -> None:
            del words
            if fraction > 0.5 and not killed:
                worker = next(iter(cluster.workers.values()))
                killed.append(worker.process.process.pid)
                os.kill(killed[0], signal.SIGKILL)

        second = timed(
            "Dask, a worker killed", workers=cluster.scheduler_address, progress=kill, **wanted
        )
    third = timed("alone", workers=1, **wanted)
    for other in (second, third):
        pd.testing.assert_frame_equal(first.table(), other.table(), check_exact=True)
    print("the three tables are equal, to the last digit")


if __name__ == "__main__":
    main()
