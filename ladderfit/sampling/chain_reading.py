"""Reading a chain file, also while it grows."""

from __future__ import annotations

import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np
import numpy.typing as npt

from ladderfit.errors import InputError
from ladderfit.sampling.chain_layout import (
    ANEW,
    FLOAT,
    Commit,
    Header,
    Places,
    chain_problem,
    commit_of,
    generators_of,
    look_over,
    record_type,
)
from ladderfit.sampling.ensemble import EnsembleState

FloatArray = npt.NDArray[np.float64]
Record = npt.NDArray[np.void]

_TRIES = 1000


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


class ChainView:
    """A chain file open for reading.

    Everything comes from one open file, even if another is moved into its place meanwhile.
    """

    def __init__(self, path: Path, stream: BinaryIO) -> None:
        self.path = path
        self._stream = stream
        self.places: Places = look_over(path, stream)

    def newest(self) -> Record:
        """The newer of the two records among those that are whole.

        Raises
        ------
        InputError
            If neither is.
        """
        kind = record_type(self.places.header.plan)
        before = b""
        for _ in range(_TRIES):
            content = self._bytes(self.places.records, 2 * kind.itemsize)
            records: Any = np.frombuffer(content, kind)
            whole = [record for record in records if self._whole(record)]
            # One that is not whole may be changing just now, and the other be out of date.
            if len(whole) == 2 or (content == before and whole):
                return max(whole, key=lambda record: int(record["number"]))
            if content == before:
                break
            before = content
        raise InputError(chain_problem(self.path, "no whole record of a commit", ANEW))

    def rows(self, first: int, last: int) -> tuple[FloatArray, FloatArray]:
        """Coordinates and log densities of some rows."""
        plan, count = self.places.header.plan, last - first
        shape = (count, plan.ensembles, plan.walkers)
        z = self._bytes(self.places.z_at(first), count * plan.per_row * plan.dimension * 8)
        density = self._bytes(self.places.density_at(first), count * plan.per_row * 8)
        return (
            np.frombuffer(z, FLOAT).reshape(*shape, plan.dimension).astype(float),
            np.frombuffer(density, FLOAT).reshape(shape).astype(float),
        )

    def verified(self, record: Record) -> tuple[FloatArray, FloatArray]:
        """All rows that a record counts, held against its checksum.

        Raises
        ------
        InputError
            If they do not match.
        """
        z, density = self.rows(0, int(record["rows"]))
        if sum_rows(0, z, density) != int(record["draws_checksum"]):
            found = "draws that do not match their checksum"
            raise InputError(chain_problem(self.path, found, ANEW))
        return z, density

    def _bytes(self, offset: int, size: int) -> bytes:
        self._stream.seek(offset)
        content = self._stream.read(size)
        while len(content) < size:
            more = self._stream.read(size - len(content))
            if not more:
                raise InputError(chain_problem(self.path, "a file cut short", ANEW))
            content += more
        return content

    def _whole(self, record: Record) -> bool:
        content = record.tobytes()
        count = 1 <= int(record["rows"]) <= self.places.capacity
        return count and zlib.crc32(content[:-4]) == int(record["checksum"])


@contextmanager
def viewed(path: Path) -> Iterator[ChainView]:
    """A chain file, open for reading.

    Raises
    ------
    InputError
        If it is missing, cut short, damaged or of another kind.
    """
    if not path.is_file():
        found = "a folder" if path.is_dir() else "no such file"
        raise InputError(chain_problem(path, found, "correct the path, or start a new run"))
    try:
        stream = path.open("rb")
    except PermissionError:
        found = "a file that may not be read"
        raise InputError(chain_problem(path, found, "make it readable")) from None
    with stream:
        yield ChainView(path, stream)


def sum_rows(checksum: int, z: FloatArray, density: FloatArray) -> int:
    """The checksum of draws, row by row, going on from that of the rows before."""
    for row, values in zip(z, density, strict=True):
        checksum = zlib.crc32(values.tobytes(), zlib.crc32(row.tobytes(), checksum))
    return checksum


def read_commit(path: Path) -> tuple[Header, Commit]:
    """What a chain is of and how far it has come; also while it grows.

    Raises
    ------
    InputError
        If the file is missing, cut short, damaged or of another kind.
    """
    with viewed(path) as view:
        return view.places.header, commit_of(view.newest())


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
    with viewed(path) as view:
        record = view.newest()
        commit = commit_of(record)
        z, density = view.verified(record) if verify else view.rows(0, commit.rows)
        return Chain(view.places.header, commit, z, density, tuple(generators_of(record)))
