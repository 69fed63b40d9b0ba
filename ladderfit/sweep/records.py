"""Outcomes on disk: one JSON object a line, each with its own checksum, only ever appended.

The first line says what the sweep is.  A line is written in one piece, synced and read
back before it counts.  Whoever dies while writing leaves at most a torn last line,
which is cut off when the sweep resumes; damage anywhere else is refused.
"""

from __future__ import annotations

import contextlib
import hashlib
import json
import os
from collections.abc import Iterator, Mapping
from dataclasses import asdict
from pathlib import Path
from typing import Any, BinaryIO

from ladderfit.errors import InputError, LadderfitError, Problem
from ladderfit.files import lock, write_text_atomically
from ladderfit.sweep.job import Outcome

FORMAT = "ladderfit sweep 1"
_CHECK = "sha256"


class Records:
    """Outcomes by key, in memory and, where it has a file, on disk.

    Attributes
    ----------
    outcomes : dict of str to Outcome
    """

    def __init__(self, outcomes: Mapping[str, Outcome], stream: BinaryIO | None = None) -> None:
        self.outcomes = dict(outcomes)
        self._stream = stream

    def add(self, outcome: Outcome) -> None:
        """Record an outcome; a second one of a task that is done or failed does not count.

        Raises
        ------
        OSError
            If it cannot be written; the file is left as it was.
        LadderfitError
            If the file does not hold what was written.
        """
        known = self.outcomes.get(outcome.key)
        if known is not None and known.status != "lost":
            return
        if self._stream is not None:
            _append(self._stream, _line(asdict(outcome)))
        self.outcomes[outcome.key] = outcome


@contextlib.contextmanager
def open_records(path: Path | None, identity: Mapping[str, Any]) -> Iterator[Records]:
    """Records to add to, held under a lock; those of a former sweep are there already.

    Parameters
    ----------
    path : Path or None
        The file, made if absent; None keeps everything in memory.
    identity : mapping
        What the outcomes depend on, plain JSON; a file with another one is refused.

    Raises
    ------
    InputError
        If the file is damaged, or of another sweep.
    LadderfitError
        If another process is at work on the file.
    """
    if path is None:
        yield Records({})
        return
    with lock(path.with_name(f"{path.name}.lock"), "a sweep is under way"):
        for torn in path.parent.glob(f".{path.name}.????????.tmp"):  # its writer was killed
            torn.unlink()
        if not path.exists():
            write_text_atomically(path, _line({"format": FORMAT, "identity": identity}))
        found, outcomes, end = _read(path)
        if found != json.loads(json.dumps(identity)):
            raise InputError(_other_sweep(path, found, identity))
        with path.open("r+b", buffering=0) as stream:
            stream.truncate(end)
            stream.seek(end)
            yield Records(outcomes, stream)


def read_records(path: str | Path) -> tuple[dict[str, Any], dict[str, Outcome]]:
    """What a file of outcomes is of, and the outcomes; also while a sweep writes to it.

    Raises
    ------
    InputError
        If it is missing, damaged or of another kind.
    """
    identity, outcomes, _ = _read(Path(path))
    return identity, outcomes


def _line(content: Mapping[str, Any]) -> str:
    text = _text(content)
    return _text({**content, _CHECK: _sum(text)}) + "\n"


def _text(content: Mapping[str, Any]) -> str:
    return json.dumps(content, ensure_ascii=False, allow_nan=False)


def _sum(text: str) -> str:
    return hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()[:16]


def _append(stream: BinaryIO, text: str) -> None:
    content, start = text.encode("utf-8"), stream.seek(0, os.SEEK_END)
    try:
        view = memoryview(content)
        while view:
            view = view[stream.write(view) :]
        os.fsync(stream.fileno())
    except OSError:
        with contextlib.suppress(OSError):
            stream.truncate(start)
        raise
    stream.seek(start)
    if stream.read(len(content)) != content:
        raise LadderfitError(
            f"{stream.name}: the disk does not give back what was written; use another disk"
        )


def _read(path: Path) -> tuple[dict[str, Any], dict[str, Outcome], int]:
    """What the sweep is, its outcomes, and where the last whole line ends."""
    try:
        lines = path.read_bytes().split(b"\n")
    except OSError as error:
        raise InputError(_damaged(path, None, (error.strerror or str(error)).lower())) from None
    contents = [_checked(line) for line in lines[:-1]]  # a line without its end is torn
    if contents and contents[-1] is None and len(contents) > 1:
        contents.pop()
    for number, content in enumerate(contents, start=1):
        if content is None:
            raise InputError(_damaged(path, number, "a line that is damaged"))
    whole = [content for content in contents if content is not None]
    if not whole or whole[0].get("format") != FORMAT:
        raise InputError(_damaged(path, None, "something else"))
    outcomes: dict[str, Outcome] = {}
    for number, content in enumerate(whole[1:], start=2):
        try:
            outcome = Outcome(**content)
        except TypeError:
            raise InputError(_damaged(path, number, "no outcome")) from None
        before = outcomes.get(outcome.key)
        if before is not None and before.status != "lost":
            raise InputError(_damaged(path, number, f"a second outcome of {outcome.key!r}"))
        outcomes[outcome.key] = outcome
    end = sum(len(line) + 1 for line in lines[: len(whole)])
    return whole[0]["identity"], outcomes, end


def _checked(line: bytes) -> dict[str, Any] | None:
    """The content of a line; None where its checksum does not hold."""
    try:
        content = json.loads(line)
    except ValueError:
        return None
    if not isinstance(content, dict):
        return None
    given = content.pop(_CHECK, None)
    return content if given == _sum(_text(content)) else None


def _damaged(path: Path, row: int | None, found: str) -> Problem:
    return Problem(
        found=found,
        expected="a file of outcomes, as a sweep writes it",
        remedy="move it away and start again",
        file=str(path),
        row=row,
    )


def _other_sweep(path: Path, found: Mapping[str, Any], wanted: Mapping[str, Any]) -> Problem:
    keys = [key for key in {**found, **wanted} if found.get(key) != wanted.get(key)]
    return Problem(
        found=f"the outcomes of another sweep (it differs in: {', '.join(map(str, keys))})",
        expected="those of the same ladder, tables and settings",
        remedy="write to another folder, or move this one away",
        file=str(path),
    )
