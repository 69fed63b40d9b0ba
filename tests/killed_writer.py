"""Run by itself: grows a chain in child processes and kills them at random moments.

Usage: python killed_writer.py CHAIN KILLS SEED.  Prints one line of JSON.
"""

from __future__ import annotations

import json
import os
import random
import signal
import sys
import time
from pathlib import Path

import numpy as np

from ladderfit.sampling import chain_file
from ladderfit.sampling.chain_file import ChainFile
from ladderfit.sampling.chain_layout import Header
from ladderfit.sampling.chain_reading import read_chain
from ladderfit.sampling.direct import Target
from ladderfit.sampling.ensemble import layout, start
from ladderfit.sampling.grow import grow

ROWS = 400


def log_density(z: np.ndarray) -> np.ndarray:
    """A correlated normal."""
    return -0.5 * (z[:, 0] ** 2 + (z[:, 1] - z[:, 0]) ** 2)


def new_chain(path: Path, seed: int = 3) -> ChainFile:
    plan = layout(2, ensembles=2)
    target = Target(log_density, np.zeros(2), np.ones(2), np.zeros(2, bool))
    header = Header(("a", "b"), (False, False), plan, seed, "a fingerprint")
    return ChainFile.create(path, header, start(target, plan, seed).states)


def to_the_end(path: Path, rows: int = ROWS, pause: float = 0.0) -> None:
    """Grow to a fixed number of rows; every row has a commit of its own."""
    with ChainFile.resume(path) as file:
        for _ in grow(file, log_density, lambda z: False, lambda: rows, every=pause):
            pass


def main() -> None:
    path, kills, seed = Path(sys.argv[1]), int(sys.argv[2]), int(sys.argv[3])
    chain_file._ROOM = 8  # so that files are moved into place all the time
    dice = random.Random(seed)
    new_chain(path).close()
    lost, torn, reads, before = 0, 0, 0, read_chain(path, verify=True)
    for _ in range(kills):
        child = os.fork()
        if child == 0:
            to_the_end(path, 10**9)
        end = time.monotonic() + dice.uniform(0.0, 0.25)
        while time.monotonic() < end:  # meanwhile a reader looks on
            seen = read_chain(path, verify=True)
            reads += 1
            torn += not np.array_equal(seen.z[: len(before.z)], before.z)
            before = seen
        os.kill(child, signal.SIGKILL)
        os.waitpid(child, 0)
        after = read_chain(path, verify=True)
        lost += len(after.z) < len(before.z) or after.commit.number < before.commit.number
        torn += not np.array_equal(after.z[: len(before.z)], before.z)
        before = after
    print(json.dumps({"lost": lost, "torn": torn, "reads": reads, "rows": len(before.z)}))


if __name__ == "__main__":
    main()
