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
import time
import zlib
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Self

import numpy as np
import numpy.typing as npt

from ladderfit.errors import InputError
from ladderfit.sampling.chain_layout import (
    ANEW,
    FLOAT,
    Commit,
    Header,
    Places,
    bytes_at,
    chain_problem,
    commit_of,
    generators_of,
    lay_out,
    look_over,
    record_bytes,
    record_type,
)
from ladderfit.sampling.ensemble import EnsembleState

FloatArray = npt.NDArray[np.float64]

_ROOM = 1024  # rows of room in a new file


@dataclass(frozen=True, eq=False)
class Chain:
    """Everything a chain file holds, as of one commit.

    Attributes
    ----------
    header : Header
    commit : Commit
    z : array, shape (rows, ensembles, walkers, d)
        Coordinates of phi.
    log_density : array, shape (rows, ensembles, walkers)
    generators : tuple
        State of each ensemble's generator after the last row.
    """

    header: Header
    commit: Commit
    z: FloatArray
    log_density: FloatArray
    generators: tuple[tuple[Any, ...], ...]

    @property
    def states(self) -> tuple[EnsembleState, ...]:
        """Where each ensemble stands."""
        return tuple(
            EnsembleState(self.z[-1, place].copy(), self.log_density[-1, place].copy(), generator)
            for place, generator in enumerate(self.generators)
        )


class ChainFile:
    """A chain file open for writing; make one with `create` or `resume`.

    Only one writer may be at work; a lock is the caller's affair.
    """

    def __init__(self, path: Path, places: Places, commit: Commit, checksum: int) -> None:
        self.path = path
        self.commit = commit
        self.header = places.header
        self._places = places
        self._checksum = checksum
        self._pending: list[tuple[EnsembleState, ...]] = []
        self._stream = path.open("r+b", buffering=0)

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
            file = cls(temporary, look_over(temporary), Commit(0, 0, None, 0.0), 0)
            file.append(states)
            file.write_commit(0.0)
            file.close()
        return cls.resume(path)

    @classmethod
    def resume(cls, path: Path) -> Self:
        """Open an existing file to go on after its last commit, verifying every draw.

        Raises
        ------
        InputError
            If it is missing, cut short, damaged or of another kind; it is not touched.
        """
        places = look_over(path)
        record = _newest(path, places)
        _verified(path, places, record)
        return cls(path, places, commit_of(record), int(record["draws_checksum"]))

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
        if self.rows > self._places.capacity:
            self._resize(max(2 * self.rows, _ROOM))
        z = np.array([[state.z for state in row] for row in self._pending], dtype=FLOAT)
        density = np.array(
            [[state.log_density for state in row] for row in self._pending], dtype=FLOAT
        )
        places, before = self._places, self.commit
        if self._pending:
            self._write(places.z_at(before.rows), z.tobytes())
            self._write(places.density_at(before.rows), density.tobytes())
            os.fsync(self._stream.fileno())
        checksum = _sum_rows(self._checksum, z, density)
        commit = Commit(
            before.number + 1,
            self.rows,
            before.warm_up if warm_up is None else warm_up,
            seconds,
        )
        generators = (
            [state.generator for state in self._pending[-1]] if self._pending else self._generators
        )
        record = record_bytes(places.header.plan, commit, checksum, generators)
        self._write(places.record_at(commit.number), record)
        os.fsync(self._stream.fileno())
        self.commit, self._checksum, self._pending = commit, checksum, []
        return commit

    def read(self, first: int = 0) -> tuple[FloatArray, FloatArray]:
        """Committed rows from `first` on: coordinates and log densities."""
        return _rows(self.path, self._places, first, self.commit.rows)

    @property
    def states(self) -> tuple[EnsembleState, ...]:
        """Where the ensembles stood at the last commit."""
        z, density = self.read(self.commit.rows - 1)
        return tuple(
            EnsembleState(z[0, place], density[0, place], generator)
            for place, generator in enumerate(self._generators)
        )

    def trim(self) -> None:
        """Give up the room that is not used."""
        if self._places.capacity > self.commit.rows:
            self._resize(self.commit.rows)

    @property
    def _generators(self) -> list[tuple[Any, ...]]:
        return generators_of(_newest(self.path, self._places))

    def _write(self, offset: int, content: bytes) -> None:
        self._stream.seek(offset)
        view = memoryview(content)
        while view:
            view = view[self._stream.write(view) :]

    def _resize(self, capacity: int) -> None:
        """Move to a new file with another capacity, holding what is committed."""
        record = _newest(self.path, self._places)
        z, density = self.read()
        with _moved_into_place(self.path) as temporary:
            lay_out(temporary, self.header, capacity)
            places = look_over(temporary)
            with temporary.open("r+b") as stream:
                for offset, content in (
                    (places.z_at(0), z.tobytes()),
                    (places.density_at(0), density.tobytes()),
                    (places.record_at(self.commit.number), record.tobytes()),
                ):
                    stream.seek(offset)
                    stream.write(content)
            _verified(temporary, places, _newest(temporary, places))
        self._stream.close()
        self._places = places
        self._stream = self.path.open("r+b", buffering=0)


def read_commit(path: Path) -> tuple[Header, Commit]:
    """What a chain is of and how far it has come; also while it grows.

    Raises
    ------
    InputError
        If the file is missing, cut short, damaged or of another kind.
    """
    places = look_over(path)
    return places.header, commit_of(_newest(path, places))


def read_chain(path: Path, *, verify: bool = False) -> Chain:
    """Everything committed; also while the chain grows.

    Parameters
    ----------
    path : Path
    verify : bool
        Whether to hold every draw against the checksum.

    Raises
    ------
    InputError
        If the file is missing, cut short, damaged or of another kind.
    """
    places = look_over(path)
    record = _newest(path, places)
    commit = commit_of(record)
    if verify:
        _verified(path, places, record)
    z, density = _rows(path, places, 0, commit.rows)
    return Chain(places.header, commit, z, density, tuple(generators_of(record)))


def _newest(path: Path, places: Places) -> npt.NDArray[np.void]:
    """The newer of the two records among those that are whole."""
    kind = record_type(places.header.plan)
    for _ in range(3):  # a reader so slow that both were replaced meanwhile tries again
        content = bytes_at(path, places.records, 2 * kind.itemsize)
        records = np.frombuffer(content, kind)
        whole = [record for record in records if _whole(record, places)]
        if whole:
            return max(whole, key=lambda record: int(record["number"]))
        time.sleep(0.05)
    raise InputError(chain_problem(path, "no whole record of a commit", ANEW))


def _whole(record: npt.NDArray[np.void], places: Places) -> bool:
    content = record.tobytes()
    count = 1 <= int(record["rows"]) <= places.capacity
    return count and zlib.crc32(content[:-4]) == int(record["checksum"])


def _rows(path: Path, places: Places, first: int, last: int) -> tuple[FloatArray, FloatArray]:
    plan, count = places.header.plan, last - first
    shape = (count, plan.ensembles, plan.walkers)
    z = bytes_at(path, places.z_at(first), count * plan.per_row * plan.dimension * 8)
    density = bytes_at(path, places.density_at(first), count * plan.per_row * 8)
    return (
        np.frombuffer(z, FLOAT).reshape(*shape, plan.dimension).astype(float),
        np.frombuffer(density, FLOAT).reshape(shape).astype(float),
    )


def _sum_rows(checksum: int, z: FloatArray, density: FloatArray) -> int:
    for row, values in zip(z, density, strict=True):
        checksum = zlib.crc32(values.tobytes(), zlib.crc32(row.tobytes(), checksum))
    return checksum


def _verified(path: Path, places: Places, record: npt.NDArray[np.void]) -> None:
    z, density = _rows(path, places, 0, int(record["rows"]))
    if _sum_rows(0, z, density) != int(record["draws_checksum"]):
        raise InputError(chain_problem(path, "draws that do not match their checksum", ANEW))


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
        temporary.chmod(path.stat().st_mode & 0o777 if path.exists() else 0o644)
        temporary.replace(path)
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise
