"""Reads one spoilt file after another; one line of JSON about each on standard output."""

from __future__ import annotations

import argparse
import json
import resource
import shutil
import sys
import tempfile
import time
import traceback
import warnings
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))

import numpy as np
from corpus import Case, write_corpus
from mutations import spoilt

import ladderfit as lf
from ladderfit.distances.moduli import distances_of
from ladderfit.errors import InputError, LadderfitError
from ladderfit.files import sha256_of
from ladderfit.report.write import renew_report
from ladderfit.review import read_claims
from ladderfit.store import read_ranges
from ladderfit.wording import summary_text

LONGEST_LINE = 2_000  # characters of one problem
_DRAWS = 100


def outcome(case: Case, folder: Path) -> tuple[str, str]:
    """What came of it: fitted, refused or failed, and the words."""
    try:
        if case.claims is not None:
            read_claims(folder / case.claims)
            return "read", ""
        if case.result is not None:
            return applied(case, folder)
        ladder = lf.read_ladder(folder / case.ladder)
        result = lf.draw(ladder, seed=1, draws=_DRAWS)
        values = np.concatenate([np.ravel(draws) for draws in result.draws.values()])
        wrong = not np.isfinite(values).all()
        return ("failed", "numbers that are not finite") if wrong else ("fitted", "")
    except InputError as error:
        lines = [str(problem) for problem in error.problems]
        if not lines or any("\n" in line or len(line) > LONGEST_LINE for line in lines):
            return "failed", f"words of the wrong form: {lines[:3]}"[:3_000]
        return "refused", lines[0]
    except LadderfitError as error:
        return "refused", str(error)
    except Exception:  # this is what is looked for
        return "failed", traceback.format_exc()[-3_000:]


def applied(case: Case, folder: Path) -> tuple[str, str]:
    """A result folder read, put in a report and applied to new objects."""
    place = folder / str(case.result)
    result = lf.read_result(place)
    good = lf.read_result(folder.with_name("good") / str(case.result))
    same = list(good.draws) == list(result.draws) and all(
        np.array_equal(good.draws[name], result.draws[name]) for name in good.draws
    )
    if not case.mended and not (same and result.choices == good.choices):
        return "failed", "other draws or choices than were written"
    summary_text(result)
    found = distances_of(result, [folder / "new.csv"], ranges=read_ranges(place), seed=1)
    if not np.isfinite(found.summary().select_dtypes("number").to_numpy()).all():
        return "failed", "distances that are not finite"
    if result.source is not None:
        renew_report(result, place)
        shutil.rmtree(place / "tables")
    return "fitted", ""


def held() -> float:
    """The most memory held so far [MB]."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0


def mend(folder: Path, case: Case) -> None:
    """Let the recorded SHA-256 fit what was spoilt."""
    path = folder / str(case.result) / "summary.json"
    content = json.loads(path.read_text(encoding="utf-8"))
    key = "ladder_sha256" if case.spoilt.endswith(".toml") else "posterior_sha256"
    content["provenance"][key] = sha256_of(folder / case.spoilt)
    path.write_text(json.dumps(content), encoding="utf-8")


def one(seed: int, cases: list[Case], good: Path, folder: Path) -> dict[str, object]:
    """Spoil a file, read it, and put it back."""
    rng = np.random.default_rng(seed)
    case = cases[int(rng.integers(len(cases)))]
    data, how = spoilt((good / case.spoilt).read_bytes(), Path(case.spoilt).suffix, rng)
    (folder / case.spoilt).write_bytes(data)
    if case.mended:
        mend(folder, case)
    before, start = held(), time.perf_counter()
    found, words = outcome(case, folder)
    seconds, grown = time.perf_counter() - start, held() - before
    for name in {case.spoilt, *(("result/summary.json",) if case.mended else ())}:
        shutil.copy(good / name, folder / name)
    return {
        "seed": seed,
        "kind": case.kind,
        "how": how,
        "outcome": found,
        "words": words,
        "seconds": round(seconds, 3),
        "grown": round(grown, 1),
    }


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("first", type=int)
    parser.add_argument("last", type=int)
    chosen = parser.parse_args()
    warnings.simplefilter("ignore")
    limit = 6_000_000_000  # of address space: a bomb ends as MemoryError, not the machine
    resource.setrlimit(resource.RLIMIT_AS, (limit, limit))
    with tempfile.TemporaryDirectory() as place:
        good, folder = Path(place) / "good", Path(place) / "spoilt"
        good.mkdir()
        cases = write_corpus(good)
        shutil.copytree(good, folder)
        for case in cases:
            found, words = outcome(case, folder)
            if found not in ("fitted", "read"):
                raise SystemExit(f"the good {case.kind} is not read: {words}")
        for seed in range(chosen.first, chosen.last):
            print(json.dumps(one(seed, cases, good, folder)), flush=True)


if __name__ == "__main__":
    main()
