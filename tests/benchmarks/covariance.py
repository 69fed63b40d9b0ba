"""What a covariance of all supernovae costs: set-up, one density, a whole draw.

    python tests/benchmarks/covariance.py [SUPERNOVAE] [SUPERNOVAE IN HOSTS]

Times are elapsed, and in brackets those of the processor, which count every thread
and mean more on a busy machine.  Nothing here is a unit test.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
from ladders import reference_tables

from ladderfit.ladder import Ladder, build_ladder
from ladderfit.posterior.joint import posterior
from ladderfit.sampling.run import drawn, target

KEY = "supernovae.covariance"


def ladder(supernovae: int, in_hosts: int, scatter: str) -> Ladder:
    """A whole ladder: 3,000 Cepheids in 42 hosts, 75 parallax stars, and a full covariance."""
    choices, tables = reference_tables(
        hosts=42, cepheids=3000, supernovae=in_hosts, flow=supernovae - in_hosts
    )
    patterns = 0.01 * np.random.default_rng(3).normal(size=(supernovae, 40))
    choices["supernovae"] |= {"covariance": {"adds": True}, "scatter": scatter}
    return build_ladder(choices, tables | {KEY: patterns @ patterns.T})


def timed(words: str, work: Callable[[], Any], parts: int = 1) -> Any:
    """Do the work and print its time."""
    elapsed, processor = time.perf_counter(), time.process_time()
    found = work()
    spent = [(time.perf_counter() - elapsed) / parts, (time.process_time() - processor) / parts]
    unit, factor = ("s", 1.0) if parts == 1 else ("ms", 1e3)
    print(f"  {words:32} {factor * spent[0]:7.3f} {unit} ({factor * spent[1]:.3f})")
    return found


def measure(found: Ladder) -> None:
    """Print the costs for one ladder."""
    joint = timed("set-up", lambda: posterior(found))
    aim = target(joint)
    z = drawn(joint, aim, 1, 4000)[1].z  # compiles, and focuses the tables
    timed("one density", lambda: joint.log_density(z), len(z))
    alone = replace(joint, parallaxes=None)
    timed("the same without parallax stars", lambda: alone.log_density(z), len(z))
    result, _ = timed("4,000 draws after set-up", lambda: drawn(joint, aim, 1, 4000))
    print(f"  Pareto k = {result.diagnostics.pareto_k:.2f}")


def main() -> None:
    """Measure one scatter and two."""
    numbers = [int(word) for word in sys.argv[1:]]
    supernovae, in_hosts = (*numbers, *(1700, 77)[len(numbers) :])
    for scatter in ("common", "apart"):
        posterior(ladder(90, 10, scatter))  # compiles
        print(f"{supernovae:,} supernovae, {in_hosts} in hosts, scatter {scatter}")
        measure(ladder(supernovae, in_hosts, scatter))


if __name__ == "__main__":
    main()
