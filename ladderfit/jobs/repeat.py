"""A result repeated from its provenance: same inputs, seed and draws, so same numbers."""

from __future__ import annotations

import json
import platform
import tempfile
from collections.abc import Mapping
from dataclasses import dataclass
from importlib import metadata
from pathlib import Path
from typing import Any

import numpy as np

from ladderfit.assembly import file_key
from ladderfit.errors import InputError, LadderfitError, Problem, raise_if
from ladderfit.files import sha256_of
from ladderfit.jobs.calibration import calibrate, finish
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.result import Result
from ladderfit.result_files import check_provenance
from ladderfit.sampling.chain_reading import read_commit
from ladderfit.sampling.direct import Progress
from ladderfit.sampling.live import start
from ladderfit.sampling.run import draw
from ladderfit.sampling.run_folder import RunFolder
from ladderfit.store import read_result

_NEEDED = ("sampler", "seed", "draws", "inputs", "versions")


@dataclass(frozen=True)
class Comparison:
    """A result held against its repetition.

    Attributes
    ----------
    equal : bool
        Whether every draw of every parameter is the same, bit for bit.
    lines : tuple of str
        What to say about it.
    """

    equal: bool
    lines: tuple[str, ...]

    def __str__(self) -> str:
        return "\n".join(self.lines)


def repeat(
    folder: str | Path, out: str | Path | None = None, progress: Progress | None = None
) -> Comparison:
    """Draw a result again as its provenance says, and compare.

    Parameters
    ----------
    folder : str or Path
        A result folder.
    out : str or Path, optional
        Where to keep the repetition; must not exist.
    progress : callable, optional
        Told the stage, in words, and the fraction done.

    Raises
    ------
    InputError
        If the folder is no result, or an input is missing or changed, naming it.
    SamplingError
        If the posterior cannot be drawn.
    """
    folder = Path(folder)
    recorded = _provenance(folder)
    before = read_result(folder)
    ladder = read_ladder(folder / "ladder.toml")
    raise_if(_changed(folder, ladder, recorded))
    after = _drawn(folder, ladder, recorded, None if out is None else Path(out), progress)
    return compare(before, after, recorded["versions"])


def compare(before: Result, after: Result, versions: Mapping[str, str]) -> Comparison:
    """Hold two sets of draws against each other.

    Parameters
    ----------
    before, after : Result
    versions : mapping of str to str
        What drew the first.
    """
    if list(before.draws) != list(after.draws) or before.size != after.size:
        shape = [f"{r.size:,} draws of {len(r.draws)} parameters" for r in (before, after)]
        return Comparison(False, (f"Differs: {shape[0]}, now {shape[1]}.", *_versions(versions)))
    apart = [
        name for name in before.draws if not np.array_equal(before.draws[name], after.draws[name])
    ]
    if not apart:
        count = f"all {before.size:,} draws of {len(before.draws)} parameters"
        return Comparison(True, (f"Equal: {count} are the same, bit for bit.",))
    lines = [f"Differs: {len(apart)} of {len(before.draws)} parameters."]
    shift = {
        name: abs(after.mean(name) - before.mean(name)) / max(before.sd(name), 1e-300)
        for name in apart
    }
    worst = max(shift, key=lambda name: shift[name])
    lines.append(
        f"Largest change of a mean: {worst}, {before.mean(worst):.6g} -> {after.mean(worst):.6g}, "
        f"{shift[worst]:.2g} of its error."
    )
    return Comparison(False, (*lines, *_versions(versions)))


def _versions(then: Mapping[str, str]) -> list[str]:
    now = {"python": platform.python_version()}
    now |= {name: _version(name) for name in then if name != "python"}
    moved = [f"{name} {then[name]} -> {now[name]}" for name in then if then[name] != now[name]]
    if moved:
        return [f"Versions differ: {', '.join(moved)}."]
    return ["The versions are the same: another processor may round differently."]


def _version(name: str) -> str:
    try:
        return metadata.version(name)
    except (metadata.PackageNotFoundError, ValueError):
        return "none"


def _provenance(folder: Path) -> dict[str, Any]:
    path = folder / "provenance.json"
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
        absent = [name for name in _NEEDED if name not in content]
        if not absent:
            check_provenance(content)
    except (OSError, ValueError, TypeError, AttributeError, RecursionError):
        absent = ["readable contents"]
        content = {}
    if absent or content["sampler"] not in ("direct", "ensemble"):
        raise InputError(
            Problem(
                found=f"no {absent[0]}" if absent else f"the sampler {content['sampler']!r}",
                expected="what a repetition needs: sampler, seed, draws, inputs and versions",
                remedy="name a folder written by ladderfit calibrate",
                file=str(path),
            )
        )
    return dict(content)


def _changed(folder: Path, ladder: Ladder, recorded: Mapping[str, Any]) -> list[Problem]:
    """One problem per input whose contents are not those recorded."""
    expected: list[tuple[Path, str | None, str, str]] = []
    if "ladder_sha256" in recorded:
        path = folder / "ladder.toml"
        expected.append((path, None, recorded["ladder_sha256"], sha256_of(path)))
    for section, known in recorded["inputs"].items():
        source = ladder.sources.get(section)
        found = "" if source is None else source.sha256
        table = folder / (str(known["table"]) if source is None else source.path)
        expected.append((table, file_key(section), str(known["sha256"]), found))
    return [
        Problem(
            found=f"SHA-256 {found[:12]}..." if found else "no such table in use",
            expected=f"{sha256[:12]}..., the contents that the result was drawn from",
            remedy="restore the file, or calibrate anew",
            file=str(path),
            key=key,
        )
        for path, key, sha256, found in expected
        if found != sha256
    ]


def _drawn(
    folder: Path,
    ladder: Ladder,
    recorded: Mapping[str, Any],
    out: Path | None,
    progress: Progress | None,
) -> Result:
    seed, draws = int(recorded["seed"]), int(recorded["draws"])
    if recorded["sampler"] == "direct":
        if out is None:
            return draw(ladder, seed=seed, draws=draws, progress=progress)
        ladder = ladder.change({"sampling.sampler": "direct"})
        return calibrate(ladder, out, seed=seed, draws=draws, progress=progress)
    chain = RunFolder(folder).chain
    if chain.exists():  # a long chain's result holds only a part of its draws
        header, commit = read_commit(chain)
        draws = commit.kept * header.plan.per_row
    if out is not None:
        return finish(start(ladder, out, seed=seed, total=draws), progress)
    with tempfile.TemporaryDirectory(prefix="ladderfit-") as temporary:
        run = start(ladder, Path(temporary) / "again", seed=seed, total=draws)
        found = run.wait()
        if found.state != "finished":
            raise LadderfitError("stopped before the repetition was complete; nothing is kept")
        return run.result()
