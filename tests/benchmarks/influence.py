"""Processor time and memory of leave-one-out, anchors and priors.

    OMP_NUM_THREADS=1 .venv/bin/python tests/benchmarks/influence.py

On the reference ladder (3,040 Cepheids in 38 hosts, 75 parallax stars, 42 + 280
supernovae), on the sample with outliers as a mixture, and with a covariance of 1,700
supernovae.
"""

from __future__ import annotations

import resource
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import ladderfit as lf
from ladderfit.shipped import sample_ladder

sys.path[:0] = [str(Path(__file__).parent), str(Path(__file__).parent.parent)]

import covariance  # noqa: E402
from ladders import reference_ladder  # noqa: E402

MIXTURE = {"cepheids.outliers.treatment": "mixture"}


def timed(words: str, work: Callable[[], Any]) -> Any:
    before = time.process_time()
    found = work()
    most = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0
    print(f"{words:50s} {time.process_time() - before:8.2f} s   peak {most:6.0f} MB", flush=True)
    return found


def measure(title: str, ladder: lf.Ladder) -> None:
    print(f"{title}: {ladder!r}")
    lf.draw(ladder, draws=200)  # compile
    result = timed("draw", lambda: lf.draw(ladder, seed=1))
    found = timed("leave out every object", lambda: lf.leave_one_out(result))
    print(found.table["how"].value_counts().to_dict())
    timed("prior sensitivity", lambda: lf.prior_sensitivity(result))
    if len(ladder.choices.anchors.geometric):
        timed("anchors against each other", lambda: lf.compare_anchors(ladder, base=result))


def main() -> None:
    lf.leave_one_out(lf.draw(lf.read_ladder(sample_ladder()), draws=200), refit=False)
    measure("sample", lf.read_ladder(sample_ladder()))
    measure("reference", reference_ladder())
    measure("sample, mixture", lf.read_ladder(sample_ladder()).change(MIXTURE))
    measure("one scatter", covariance.ladder(1700, 77, "common"))


if __name__ == "__main__":
    main()
