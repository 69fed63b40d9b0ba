"""Time of new draws after one changed choice, in a process that has drawn the ladder before.

    .venv/bin/python tests/benchmarks/changes.py [--repeats N]

The reference ladder of `speed.py`; the change itself is not counted.  Medians and best
times in milliseconds.
"""

from __future__ import annotations

import argparse
import statistics
import sys
import time

from ladders import reference_ladder

from ladderfit.ladder import Ladder
from ladderfit.sampling.warm import WarmDrawer

CHANGES = {
    "a period cut": {"cepheids.periods": [8.0, 100.0]},
    "an anchor": {"anchors.geometric.Host01.use": False},
    "a prior": {"priors.slope": {"normal": [-3.2, 0.3]}},
}


def times(base: Ladder, changed: Ladder, draws: int, repeats: int) -> list[float]:
    """Milliseconds from the changed ladder to its draws, the drawer back at the base each time."""
    drawer, found = WarmDrawer(), []
    for _ in range(repeats + 1):
        drawer.draw(base, draws=500)
        start = time.perf_counter()
        drawer.draw(changed, draws=draws)
        found.append(1e3 * (time.perf_counter() - start))
    return found[1:]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--repeats", type=int, default=15)
    repeats = parser.parse_args().repeats
    ladder = reference_ladder()
    print(f"{'changed':16}{'draws':>8}{'median':>10}{'best':>8}")
    for draws in (500, 4000):
        for words, change in CHANGES.items():
            found = times(ladder, ladder.change(change), draws, repeats)
            median = statistics.median(found)
            print(f"{words:16}{draws:8,}{median:7.0f} ms{min(found):5.0f} ms", flush=True)


if __name__ == "__main__":
    sys.exit(main())
