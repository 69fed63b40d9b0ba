"""Where the outcomes of a sweep lie, so that the same command goes on with it."""

from __future__ import annotations

from pathlib import Path

from ladderfit.errors import InputError, Problem

OUTCOMES = "outcomes.jsonl"


def sweep_folder(path: Path) -> Path:
    """A folder for a sweep: new, or one in which a sweep has begun.

    Raises
    ------
    InputError
        If something else is there.
    """
    begun = path.is_dir() and (
        (path / OUTCOMES).is_file() or all(map(_before_the_start, path.iterdir()))
    )
    if path.exists() and not begun:
        raise InputError(
            Problem(
                found="a file or folder without outcomes of a sweep",
                expected="a name that is free, or the folder of a sweep to go on with",
                remedy="choose another name, or move it away",
                file=str(path),
            )
        )
    path.mkdir(parents=True, exist_ok=True)
    return path


def _before_the_start(entry: Path) -> bool:
    """Whether this is what a sweep leaves that was killed before its file was there."""
    return entry.is_file() and entry.name.startswith((f"{OUTCOMES}.lock", f".{OUTCOMES}."))
