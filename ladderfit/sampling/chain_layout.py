"""How a chain file is laid out: what it is of, where its arrays lie, and its commit records.

The file is HDF5 for everybody.  Its user block, the part at the start that HDF5
leaves to applications, says in text what the chain is of and where the arrays begin,
under a checksum.  We read by that alone, so that no damage can upset a library.
"""

from __future__ import annotations

import json
import os
import zlib
from collections.abc import Sequence
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any, BinaryIO

import h5py
import numpy as np
import numpy.typing as npt

from ladderfit.errors import InputError, Problem
from ladderfit.sampling.ensemble import Layout

FloatArray = npt.NDArray[np.float64]

_MAGIC = b"ladderfit chain "
_VERSION = 1
_SIGNATURE = b"\x89HDF\r\n\x1a\n"
_HEAD = 40  # bytes of the first line: magic, version, checksum and length of the text
_KEY = 624  # words of a Mersenne Twister

FLOAT = np.dtype("<f8")
ANEW = "the file is left as it was; restore it from a copy, or start a new run"


@dataclass(frozen=True)
class Header:
    """What a chain is of; never changes.

    Attributes
    ----------
    names : tuple of str
        The parameters of phi.
    folded : tuple of bool
        Which of them count by their size.
    plan : Layout
    seed : int
    fingerprint : str
        Of the choices and the inputs; a chain goes on only with the same ones.
    box : array, shape (2, d), or None
        Corners between which the density was tabulated more finely.
    """

    names: tuple[str, ...]
    folded: tuple[bool, ...]
    plan: Layout
    seed: int
    fingerprint: str
    box: FloatArray | None = field(default=None, compare=False)


@dataclass(frozen=True)
class Commit:
    """What the newest record says.

    Attributes
    ----------
    number : int
        Counts commits from 1.
    rows : int
        Rows of draws that are valid, warm-up included.
    warm_up : int or None
        Rows that belong to the warm-up; None while it lasts.
    seconds : float
        Time spent drawing.
    """

    number: int
    rows: int
    warm_up: int | None
    seconds: float

    @property
    def kept(self) -> int:
        """Rows after the warm-up."""
        return 0 if self.warm_up is None else self.rows - self.warm_up


@dataclass(frozen=True)
class Places:
    """Where in the file the arrays begin, and how many rows have room."""

    header: Header
    capacity: int
    size: int
    z: int
    density: int
    records: int

    def z_at(self, row: int) -> int:
        """Offset of a row's coordinates."""
        return self.z + row * self.header.plan.per_row * self.header.plan.dimension * 8

    def density_at(self, row: int) -> int:
        """Offset of a row's log densities."""
        return self.density + row * self.header.plan.per_row * 8

    def record_at(self, number: int) -> int:
        """Offset of the record of a commit; two places alternate."""
        return self.records + (number % 2) * record_type(self.header.plan).itemsize


def record_type(plan: Layout) -> np.dtype[np.void]:
    """One commit record: counts, the generators' states, checksums of draws and record."""
    e = plan.ensembles
    return np.dtype(
        [
            ("number", "<u8"),
            ("rows", "<u8"),
            ("warm_up", "<i8"),
            ("seconds", "<f8"),
            ("draws_checksum", "<u4"),
            ("key", "<u4", (e, _KEY)),
            ("position", "<i8", (e,)),
            ("has_normal", "<i8", (e,)),
            ("normal", "<f8", (e,)),
            ("checksum", "<u4"),
        ]
    )


def record_bytes(
    plan: Layout, commit: Commit, checksum: int, generators: Sequence[tuple[Any, ...]]
) -> bytes:
    """A commit record as it stands in the file."""
    record = np.zeros(1, record_type(plan))
    record["number"], record["rows"], record["seconds"] = commit.number, commit.rows, commit.seconds
    record["warm_up"] = -1 if commit.warm_up is None else commit.warm_up
    record["draws_checksum"] = checksum
    for place, (_, key, position, has_normal, normal) in enumerate(generators):
        record["key"][0, place] = key
        record["position"][0, place] = position
        record["has_normal"][0, place] = has_normal
        record["normal"][0, place] = normal
    record["checksum"] = zlib.crc32(record.tobytes()[:-4])
    return record.tobytes()


def generators_of(record: npt.NDArray[np.void]) -> list[tuple[Any, ...]]:
    """States of the ensembles' generators, as numpy's RandomState takes them."""
    return [
        ("MT19937", record["key"][e].astype(np.uint32), int(p), int(h), float(n))
        for e, (p, h, n) in enumerate(
            zip(record["position"], record["has_normal"], record["normal"], strict=True)
        )
    ]


def commit_of(record: npt.NDArray[np.void]) -> Commit:
    """What a record says."""
    warm_up = int(record["warm_up"])
    return Commit(
        int(record["number"]),
        int(record["rows"]),
        None if warm_up < 0 else warm_up,
        float(record["seconds"]),
    )


def lay_out(path: Path, header: Header, capacity: int) -> None:
    """Write a new file with room for `capacity` rows; nothing is counted yet."""
    plan = header.plan
    walkers = (capacity, plan.ensembles, plan.walkers)
    settings = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
    settings.set_layout(h5py.h5d.CONTIGUOUS)
    settings.set_alloc_time(h5py.h5d.ALLOC_TIME_EARLY)
    settings.set_fill_time(h5py.h5d.FILL_TIME_NEVER)
    arrays = {
        "commits": ((2,), record_type(plan)),
        "log_density": (walkers, FLOAT),
        "z": ((*walkers, plan.dimension), FLOAT),
    }
    content = asdict(header)
    content["box"] = None if header.box is None else header.box.tolist()
    block = 512
    while block < 2 * len(json.dumps(content)) + 512:
        block *= 2
    with h5py.File(path, "w", locking=False, userblock_size=block) as file:
        offsets = {}
        for name, (shape, kind) in arrays.items():
            space = h5py.h5s.create_simple(shape)
            made = h5py.h5d.create(
                file.id, name.encode(), h5py.h5t.py_create(kind), space, settings
            )
            offsets[name] = int(made.get_offset())
        file.attrs.update(names=list(header.names), header=json.dumps(content))
    text = {
        "header": content,
        "capacity": capacity,
        "offsets": offsets,
        "size": path.stat().st_size,
    }
    body = json.dumps(text).encode()
    first = _MAGIC + b"%d %08x %05d\n" % (_VERSION, zlib.crc32(body), len(body))
    with path.open("r+b") as stream:
        stream.write(first.ljust(_HEAD) + body + b"\n")


def look_over(path: Path, stream: BinaryIO) -> Places:
    """Read the user block of an open file, before a single number is used.

    Raises
    ------
    InputError
        If it is cut short, damaged or of another kind.
    """
    stream.seek(0)
    first = stream.read(_HEAD)
    if not first.startswith(_MAGIC):
        raise InputError(chain_problem(path, _kind_of(stream), ANEW))
    try:
        version, checksum, length = first[len(_MAGIC) :].split()
        if int(version) != _VERSION:
            found = f"version {int(version)} of the format, where {_VERSION} is known"
            remedy = "use the version of ladderfit that wrote it"
            raise InputError(chain_problem(path, found, remedy))
        body = stream.read(int(length))
        if len(body) < int(length):
            raise InputError(chain_problem(path, _SHORT, ANEW))
        if zlib.crc32(body) != int(checksum, 16):
            raise ValueError("checksum")
        places = _places_of(json.loads(body))
    except (KeyError, TypeError, ValueError):
        found = _SHORT if len(first) < _HEAD else "a damaged head"
        raise InputError(chain_problem(path, found, ANEW)) from None
    if os.fstat(stream.fileno()).st_size < places.size:
        raise InputError(chain_problem(path, _SHORT, ANEW))
    return places


_SHORT = "a file cut short"


def _places_of(text: dict[str, Any]) -> Places:
    content, offsets = text["header"], text["offsets"]
    box = content["box"]
    header = Header(
        names=tuple(content["names"]),
        folded=tuple(content["folded"]),
        plan=Layout(**content["plan"]),
        seed=content["seed"],
        fingerprint=content["fingerprint"],
        box=None if box is None else np.array(box, dtype=float),
    )
    return Places(
        header,
        text["capacity"],
        text["size"],
        offsets["z"],
        offsets["log_density"],
        offsets["commits"],
    )


def _kind_of(stream: BinaryIO) -> str:
    """What a file is that is no chain file; HDF5's signature stands at 0, 512, 1024, ..."""
    place = 0
    while place <= os.fstat(stream.fileno()).st_size:
        stream.seek(place)
        if stream.read(len(_SIGNATURE)) == _SIGNATURE:
            return "an HDF5 file of another kind"
        place = max(512, 2 * place)
    return "a file that is not HDF5"


def chain_problem(path: Path, found: str, remedy: str) -> Problem:
    """A problem with a chain file."""
    return Problem(found, "a chain file of an ensemble run", remedy, file=str(path))
