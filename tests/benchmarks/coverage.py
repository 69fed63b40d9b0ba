"""Coverage of the sample: the right fit and two wrong ones, with their processor time.

``python tests/benchmarks/coverage.py [LADDERS [WORKERS]]``
"""

from __future__ import annotations

import sys
import time
from typing import Any

import ladderfit as lf
from ladderfit.coverage import run_coverage
from ladderfit.coverage.words import statement
from ladderfit.shipped import sample_ladder

SEED = 1503  # chosen before the first run of this script
HOSTS = ("Cadvo", "Dornash", "Elquist", "Fenoru", "Galvesh", "Hestrin")
DEPTH = 0.1  # mag by which a host's limit lies above its faintest star in H


def limits(ladder: lf.Ladder, depth: float = DEPTH) -> dict[str, Any]:
    """Magnitude limits of the far hosts that leave all their stars but the faintest."""
    stars = ladder.cepheids
    if stars is None or stars.photometry is None:
        raise TypeError("a ladder without colours of Cepheids")
    found = {}
    for host in HOSTS:
        band = stars.photometry.band[stars.host == ladder.hosts.index(host)]
        found[host] = round(float(band.max()) - depth, 2)
    return {"cepheids.completeness": {"band": "H", "limits": found}}


def main(size: int, workers: int) -> None:
    """Run and print."""
    ladder = lf.read_ladder(sample_ladder())
    limited = ladder.change(limits(ladder))
    left_out = {"cepheids.completeness": None}
    cases: dict[str, tuple[lf.Ladder, dict[str, Any]]] = {
        "right": (ladder, {}),
        "scatter 30 % too small": (ladder, {"told": {"scatter": 0.7}}),
        "limits of hosts left out": (limited, {"changes": left_out}),
    }
    for name, (each, faults) in cases.items():
        begin = time.perf_counter()
        experiment = run_coverage(each, size, seed=SEED, workers=workers, **faults)
        wall = time.perf_counter() - begin
        print(f"\n== {name}: {wall:.0f} s on {workers} processes, ", end="")
        print(f"{experiment.seconds:.0f} s of processor time")
        print(statement(experiment), flush=True)


if __name__ == "__main__":
    asked = [int(word) for word in sys.argv[1:]]
    main(*(*asked, *(1000, 2)[len(asked) :]))
