"""The chain file: HDF5 whose draws can be trusted whenever its writer dies.

The file is laid out once: contiguous, preallocated arrays with room to spare.
From then on only numbers inside the arrays change, never HDF5's own structure, so
that no moment exists at which the file cannot be opened.  A commit first writes
and syncs the draws, then one of two alternating records with their count, the
generators' states and checksums.  A reader takes the newer whole record, and sees
the draws it counts: never half a draw.  Where the room runs out, or is trimmed at
the end, a new file is written beside the old one and moved into its place.
"""

from __future__ import annotations

import os
import tempfile
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Self

import numpy as np
import numpy.typing as npt

from ladderfit.errors import InputError
from ladderfit.files import mode_for
from ladderfit.sampling.chain_layout import (
    FLOAT,
    Commit,
    Header,
    chain_problem,
    commit_of,
    generators_of,
    lay_out,
    record_bytes,
)
from ladderfit.sampling.chain_reading import ChainView, sum_rows, viewed
from ladderfit.sampling.ensemble import EnsembleState

FloatArray = npt.NDArray[np.float64]

_ROOM = 1024  # rows of room in a new file


class ChainFile:
    """A chain file open for writing; make one with `create` or `resume`.

    Only one writer may be at work; a lock is the caller's affair.

    Attributes
    ----------
    path : Path
    header : Header
    commit : Commit
        The last one.
    """

    def __init__(self, path: Path, *, fresh: bool = False) -> None:
        self.path = path
        self._stream = path.open("r+b", buffering=0)
        try:
            self._view = ChainView(path, self._stream)
        except BaseException:
            self._stream.close()
            raise
        self._pending: list[tuple[EnsembleState, ...]] = []
        self.header = self._view.places.header
        self.commit, self._checksum = Commit(0, 0, None, 0.0), 0
        self._generators: list[tuple[Any, ...]] = []
        if not fresh:
            record = self._view.newest()
            self.commit, self._checksum = commit_of(record), int(record["draws_checksum"])
            self._generators = generators_of(record)

    @classmethod
    def create(cls, path: Path, header: Header, states: Sequence[EnsembleState]) -> Self:
        """Write a new file whose first row is where the ensembles start, and commit it.

        Raises
        ------
        InputError
            If the file exists.
        OSError
            If it cannot be written.
        """
        if path.exists():
            raise InputError(
                chain_problem(path, "a file of that name", "resume it, or move it away")
            )
        with _moved_into_place(path) as temporary:
            lay_out(temporary, header, _ROOM)
            with cls(temporary, fresh=True) as file:
                file.append(states)
                file.write_commit(0.0)
        return cls.resume(path)

    @classmethod
    def resume(cls, path: Path) -> Self:
        """Open an existing file to go on after its last commit, verifying every draw.

        Raises
        ------
        InputError
            If it is missing, cut short, damaged or of another kind; it is not touched.
        """
        with viewed(path) as view:
            view.verified(view.newest())
        return cls(path)

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def close(self) -> None:
        """Close the file; rows appended since the last commit are dropped."""
        self._stream.close()

    @property
    def rows(self) -> int:
        """Rows committed or waiting for a commit."""
        return self.commit.rows + len(self._pending)

    @property
    def states(self) -> tuple[EnsembleState, ...]:
        """Where the ensembles stood at the last commit."""
        z, density = self.read(self.commit.rows - 1)
        return tuple(
            EnsembleState(z[0, place], density[0, place], generator)
            for place, generator in enumerate(self._generators)
        )

    def read(self, first: int = 0) -> tuple[FloatArray, FloatArray]:
        """Committed rows from `first` on: coordinates and log densities."""
        return self._view.rows(first, self.commit.rows)

    def append(self, states: Sequence[EnsembleState]) -> None:
        """Add one row, to be written by the next commit."""
        self._pending.append(tuple(states))

    def write_commit(self, seconds: float, warm_up: int | None = None) -> Commit:
        """Write what was appended, then the record that makes it count.

        Parameters
        ----------
        seconds : float
            Time spent drawing, in all.
        warm_up : int, optional
            Ends the warm-up at this row.
        """
        before = self.commit
        if warm_up is None:
            warm_up = before.warm_up
        if self.rows > self._view.places.capacity:
            self._resize(max(2 * self.rows, _ROOM))
        self._write_pending()
        commit = Commit(before.number + 1, before.rows + len(self._pending), warm_up, seconds)
        self._write_record(commit)
        self.commit, self._pending = commit, []
        return commit

    def trim(self) -> None:
        """Give up the room that is not used."""
        if self._view.places.capacity > self.commit.rows:
            self._resize(self.commit.rows)

    def _write_pending(self) -> None:
        if not self._pending:
            return
        z = np.array([[state.z for state in row] for row in self._pending], dtype=FLOAT)
        density = np.array(
            [[state.log_density for state in row] for row in self._pending], dtype=FLOAT
        )
        self._write_rows(self.commit.rows, z, density)
        self._checksum = sum_rows(self._checksum, z, density)
        self._generators = [state.generator for state in self._pending[-1]]

    def _write_rows(self, first: int, z: FloatArray, density: FloatArray) -> None:
        places = self._view.places
        self._write(places.z_at(first), z.tobytes())
        self._write(places.density_at(first), density.tobytes())
        os.fsync(self._stream.fileno())

    def _write_record(self, commit: Commit) -> None:
        record = record_bytes(self.header.plan, commit, self._checksum, self._generators)
        self._write(self._view.places.record_at(commit.number), record)
        os.fsync(self._stream.fileno())

    def _write(self, offset: int, content: bytes) -> None:
        self._stream.seek(offset)
        view = memoryview(content)
        while view:
            view = view[self._stream.write(view) :]

    def _resize(self, capacity: int) -> None:
        """Go on in a new file with another capacity that holds what is committed."""
        z, density = self.read()
        with _moved_into_place(self.path) as temporary:
            lay_out(temporary, self.header, capacity)
            with type(self)(temporary, fresh=True) as file:
                file._checksum, file._generators = self._checksum, self._generators
                file._write_rows(0, z, density)
                file._write_record(self.commit)
                file._view.verified(file._view.newest())
        self._stream.close()
        self._stream = self.path.open("r+b", buffering=0)
        self._view = ChainView(self.path, self._stream)


@contextmanager
def _moved_into_place(path: Path) -> Iterator[Path]:
    """A temporary file beside `path`, synced and moved there once the block ends well."""
    handle, name = tempfile.mkstemp(prefix=f".{path.name}.", suffix=".tmp", dir=path.parent)
    os.close(handle)
    temporary = Path(name)
    try:
        yield temporary
        with temporary.open("r+b") as stream:
            os.fsync(stream.fileno())
        temporary.chmod(mode_for(path))
        temporary.replace(path)
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise
