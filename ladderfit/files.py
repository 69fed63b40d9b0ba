"""Files that appear whole or not at all; hashes; a lock.

What is written goes to a temporary name beside its target and is moved into
place at the end.  Nothing that exists is overwritten unless the caller says so
by calling `write_text_atomically`.
"""

from __future__ import annotations

import contextlib
import hashlib
import os
import shutil
import socket
import tempfile
import time
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import TypeVar

from ladderfit.errors import InputError, LadderfitError, Problem

T = TypeVar("T")


def sha256_of(path: str | Path) -> str:
    """SHA-256 of a file's bytes, in hexadecimal.

    Raises
    ------
    OSError
        If the file cannot be read.
    """
    with Path(path).open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def why_no_file(path: Path) -> str | None:
    """What stands in place of a file, in words; None where there is a file."""
    try:
        if path.is_file():
            return None
        return "a folder" if path.is_dir() else "no such file"
    except OSError as error:  # a name too long, a folder that may not be looked into
        return str(error.strerror or error)


def need_file(path: Path, expected: str, key: str | None = None) -> None:
    """Raise if there is no file.

    Parameters
    ----------
    path : Path
    expected : str
        What the file should be, for the message.
    key : str, optional
        Dotted key of the ladder file that names it.

    Raises
    ------
    InputError
    """
    found = why_no_file(path)
    if found is not None:
        where = "" if key is None else ", which is relative to the ladder file's folder"
        remedy = f"correct the path{where}"
        raise InputError(Problem(found, expected, remedy, file=str(path), key=key))


def by_suffix(path: Path, readers: Mapping[str, T], what: str, key: str) -> T:
    """The reader for a file by its suffix, the one before ``.gz`` where that is last.

    Raises
    ------
    InputError
        If there is none; `what` is the kind of file, for the message.
    """
    suffix = Path(path.stem).suffix.lower() if path.suffix.lower() == ".gz" else path.suffix.lower()
    if suffix not in readers:
        raise InputError(
            Problem(
                found=f"the extension {path.suffix!r}",
                expected="one of " + ", ".join(readers),
                remedy=f"rename or convert the {what}",
                file=str(path),
                key=key,
            )
        )
    return readers[suffix]


def write_text_atomically(path: str | Path, text: str) -> None:
    """Write `text` in UTF-8 under a temporary name, then move it to `path`.

    An existing file is replaced in one step and keeps its permissions; whoever
    reads meanwhile sees the old or the new text, never a part.

    Raises
    ------
    OSError
        If the folder cannot be written; the old file is then untouched.
    """
    path = Path(path)
    target = path.resolve() if path.is_symlink() else path
    handle, name = tempfile.mkstemp(prefix=f".{target.name}.", suffix=".tmp", dir=target.parent)
    temporary = Path(name)
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="") as stream:
            stream.write(text)
            stream.flush()
            os.fsync(stream.fileno())
        temporary.chmod(mode_for(target))
        temporary.replace(target)
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise


def mode_for(target: Path) -> int:
    """The permissions of a file that is replaced, or those that this user's new files have."""
    if target.exists():
        return target.stat().st_mode & 0o777
    return 0o666 & ~_umask()


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


@contextlib.contextmanager
def new_folder(target: str | Path) -> Iterator[Path]:
    """A folder to fill, moved to `target` when the block ends well, removed otherwise.

    Yields
    ------
    Path
        A folder under a temporary name beside `target`.

    Raises
    ------
    InputError
        If `target` exists, at the start or by the time the block ends.
    OSError
        If the folder cannot be made.
    """
    target = Path(target)
    _refuse_existing(target)
    target.parent.mkdir(parents=True, exist_ok=True)
    temporary = Path(tempfile.mkdtemp(prefix=f".{target.name}.", suffix=".tmp", dir=target.parent))
    try:
        temporary.chmod(0o777 & ~_umask())
        yield temporary
        _refuse_existing(target)
        try:
            temporary.rename(target)
        except OSError:
            _refuse_existing(target)  # somebody else was quicker
            raise
    except BaseException:
        shutil.rmtree(temporary, ignore_errors=True)
        raise


def _refuse_existing(target: Path) -> None:
    if target.exists() or target.is_symlink():
        raise InputError(
            Problem(
                found="a file or folder of that name",
                expected="a name that is free, as nothing is overwritten",
                remedy="choose another name, or move the old one away",
                file=str(target),
            )
        )


def first_free(stem: str | Path) -> Path:
    """The first of STEM-01, STEM-02, ... that does not exist."""
    stem = Path(stem)
    number = 1
    while True:
        path = stem.with_name(f"{stem.name}-{number:02d}")
        if not path.exists() and not path.is_symlink():
            return path
        number += 1


@contextlib.contextmanager
def lock(path: str | Path, words: str = "in use") -> Iterator[None]:
    """Hold `path` as an exclusive lock; the file says who holds it, and is removed at the end.

    A lock left behind by a process of this machine that no longer runs is taken over.

    Raises
    ------
    LadderfitError
        If somebody else holds the lock; the message says who, and what to do.
    """
    path = Path(path)
    mine = f"{os.getpid()}\n{socket.gethostname()}\n{time.strftime('%Y-%m-%d %H:%M:%S')}\n{words}\n"
    if not _take(path, mine) and not (_abandoned(path) and _take(path, mine)):
        raise LadderfitError(_who_holds(path))
    try:
        yield
    finally:
        path.unlink(missing_ok=True)


def held(path: str | Path) -> str | None:
    """Who holds a lock, in words; None where nobody does, and a lock left behind is removed."""
    path = Path(path)
    return None if not path.exists() or _abandoned(path) else _who_holds(path)


def _take(path: Path, words: str) -> bool:
    """Make the lock whole in one step: a link to a finished file fails if the name is taken."""
    handle, name = tempfile.mkstemp(prefix=f".{path.name}.", dir=path.parent)
    try:
        with os.fdopen(handle, "w", encoding="utf-8") as stream:
            stream.write(words)
        os.link(name, path)
    except FileExistsError:
        return False
    finally:
        Path(name).unlink()
    return True


def _holder(path: Path) -> list[str] | None:
    try:
        lines = path.read_text(encoding="utf-8").splitlines()
    except OSError:
        return None
    return lines if len(lines) == 4 and lines[0].isdigit() else None


def _abandoned(path: Path) -> bool:
    """Whether the holder is gone; if so the lock is removed."""
    holder = _holder(path)
    if holder is None or holder[1] != socket.gethostname() or os.name != "posix":
        return False
    try:
        os.kill(int(holder[0]), 0)
    except ProcessLookupError:
        return _move_away(path, holder)
    except OSError:
        return False
    return _move_away(path, holder) if _dead(int(holder[0])) else False


def _dead(process: int) -> bool:
    """Whether a process has ended and only waits to be collected (told on Linux alone)."""
    try:
        state = Path(f"/proc/{process}/stat").read_text(encoding="utf-8").rpartition(")")[2]
    except OSError:
        return False
    return state.split()[:1] == ["Z"]


def _move_away(path: Path, holder: list[str]) -> bool:
    """Remove a lock if it is still that of `holder`; two who try cannot both succeed."""
    aside = path.with_name(f".{path.name}.{os.getpid()}.{time.monotonic_ns()}")
    try:
        path.rename(aside)
    except FileNotFoundError:
        return True
    still = _holder(aside) == holder
    if not still:
        with contextlib.suppress(FileExistsError):
            os.link(aside, path)
    aside.unlink()
    return still


def _who_holds(path: Path) -> str:
    holder = _holder(path)
    if holder is None:
        return f"{path}: locked by an unknown holder; delete the file if nobody uses it"
    process, machine, since, words = holder
    return (
        f"{path}: {words}, held by process {process} on {machine} since {since}; "
        "wait for it to end, or delete the file if that process no longer runs"
    )
