"""Time and memory of a ladder of a million Cepheids, read from disk, fitted and summarised.

    .venv/bin/python tests/benchmarks/million.py [--stars N] [--format parquet|csv]

The table is written first, by another process than the one that is measured.  Memory
is the most that the process held, less what it held once everything was imported and
warmed up; the table is what its numbers take, eight bytes a cell.
"""

from __future__ import annotations

import argparse
import copy
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import tomlkit
from ladders import CHOICES, reference_ladder, reference_tables

from ladderfit.ladder import read_ladder
from ladderfit.sampling.run import draw
from ladderfit.wording import summary_text

COLUMNS = 6  # of the Cepheids' table: two names, four numbers


def write(folder: Path, stars: int, form: str) -> Path:
    """The ladder file and its tables."""
    choices, tables = copy.deepcopy(CHOICES), reference_tables(cepheids=stars)[1]
    for key, table in tables.items():
        name = f"{key.replace('.', '_')}.{form if key == 'cepheids' else 'csv'}"
        section = choices
        for part in key.split("."):
            section = section[part]
        section["table"] = name
        if name.endswith("parquet"):
            table.to_parquet(folder / name, index=False)
        else:
            table.to_csv(folder / name, index=False)
    path = folder / "million.toml"
    path.write_text(tomlkit.dumps(choices))
    return path


def held() -> float:
    """The most memory that this process has held so far [MB]."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0


def measure(path: Path, stars: int) -> None:
    draw(reference_ladder(), seed=1, draws=500)
    before, start = held(), time.perf_counter()
    ladder = read_ladder(path)
    read, after_reading = time.perf_counter(), held()
    words = summary_text(draw(ladder, seed=1))
    done = time.perf_counter()
    table = stars * COLUMNS * 8 / 1e6
    print(words)
    print(f"\n{stars:,} Cepheids: read {read - start:.2f} s, drawn and summarised ", end="")
    print(f"{done - read:.2f} s, together {done - start:.2f} s")
    print(f"memory: reading {after_reading - before:,.0f} MB, in all {held() - before:,.0f} MB; ")
    print(f"the table is {table:,.0f} MB, so that beyond it {held() - before - table:,.0f} MB")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--stars", type=int, default=1_000_000)
    parser.add_argument("--format", choices=("parquet", "csv"), default="parquet")
    parser.add_argument("--measure", type=Path, help=argparse.SUPPRESS)
    arguments = parser.parse_args()
    if arguments.measure is not None:
        measure(arguments.measure, arguments.stars)
        return
    with tempfile.TemporaryDirectory() as folder:
        path = write(Path(folder), arguments.stars, arguments.format)
        command = [sys.executable, __file__, "--stars", str(arguments.stars), "--measure"]
        subprocess.run([*command, str(path)], check=True)


if __name__ == "__main__":
    main()
