"""Malformed files by the thousand: each must be refused in clear words, or fitted.

    .venv/bin/python tests/fuzz/run.py [--cases 20000] [--first 0] [--workers 2]

A small good ladder, its claims, its tables and covariances in every format are
spoilt, one file at a time, from numbered seeds, and read by workers.  What may not
happen: an exception other than the package's own, numbers that are not finite,
words of more than one line, more than 10 s, more than 1 GB, the end of the worker.
Prints a table by kind, every failure with its seed, and exits with 1 if there is one.
"""

from __future__ import annotations

import argparse
import json
import queue
import subprocess
import sys
import threading
from collections import Counter
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

LONGEST = 10.0  # s
MOST = 1_000.0  # MB
_STARTING = 120.0  # s


def run_seeds(first: int, last: int) -> list[dict[str, object]]:
    """Records of a range of seeds; a worker that hangs or dies is replaced."""
    records: list[dict[str, object]] = []
    while first < last:
        fresh, words = _worker(first, last)
        records += fresh
        first += len(fresh)
        if first < last:
            records.append({"seed": first, "kind": "?", "how": "?", "outcome": "failed"} | words)
            first += 1
    return records


def _worker(first: int, last: int) -> tuple[list[dict[str, object]], dict[str, object]]:
    command = [sys.executable, str(Path(__file__).with_name("worker.py")), str(first), str(last)]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    lines: queue.Queue[str | None] = queue.Queue()
    errors: list[str] = []

    def read() -> None:
        for line in process.stdout:
            lines.put(line)
        lines.put(None)

    threading.Thread(target=read, daemon=True).start()
    threading.Thread(target=lambda: errors.append(process.stderr.read()), daemon=True).start()
    found: list[dict[str, object]] = []
    wait, words = _STARTING, "the worker died"
    while True:
        try:
            line = lines.get(timeout=wait)
        except queue.Empty:
            words = f"nothing for {wait:g} s"
            process.kill()
            break
        if line is None:
            break
        found.append(json.loads(line))
        wait = 3.0 * LONGEST  # a busy machine may make a slow one slower
    process.wait()
    if not found and process.returncode > 0:
        raise SystemExit(f"the worker does not start: {''.join(errors)[-2000:]}")
    return found, {"words": f"{words}: {''.join(errors)[-500:]}", "seconds": 0.0, "grown": 0.0}


def faults(record: dict[str, object]) -> list[str]:
    """What is wrong with one record."""
    found = [str(record["words"])] if record["outcome"] == "failed" else []
    if float(record["seconds"]) > LONGEST:
        found.append(f"took {record['seconds']} s")
    if float(record["grown"]) > MOST:
        found.append(f"took {record['grown']} MB")
    return found


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--cases", type=int, default=20_000)
    parser.add_argument("--first", type=int, default=0)
    parser.add_argument("--workers", type=int, default=2)
    chosen = parser.parse_args()
    step = max(1, min(500, -(-chosen.cases // chosen.workers)))
    stop = chosen.first + chosen.cases
    starts = range(chosen.first, stop, step)
    with ThreadPoolExecutor(chosen.workers) as pool:
        parts = pool.map(lambda start: run_seeds(start, min(start + step, stop)), starts)
        records = [record for part in parts for record in part]
    counts = Counter((str(r["kind"]), str(r["outcome"])) for r in records)
    print(f"{'kind':18}{'fitted':>8}{'refused':>9}{'failed':>8}")
    for kind in sorted({kind for kind, _ in counts}):
        fitted = counts[kind, "fitted"] + counts[kind, "read"]
        print(f"{kind:18}{fitted:8,}{counts[kind, 'refused']:9,}{counts[kind, 'failed']:8,}")
    slowest = max(float(r["seconds"]) for r in records)
    most = max(float(r["grown"]) for r in records)
    print(f"{len(records):,} files; the slowest took {slowest:.1f} s, the largest {most:.0f} MB")
    wrong = [(record, words) for record in records for words in faults(record)]
    for record, words in wrong:
        print(f"\nseed {record['seed']}, {record['kind']}, {record['how']}: {words}")
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
