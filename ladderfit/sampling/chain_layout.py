"""How a chain file is laid out: what it is of, where its arrays lie, and its commit records."""

from __future__ import annotations

import zlib
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import numpy.typing as npt

from ladderfit.errors import InputError, Problem
from ladderfit.sampling.ensemble import Layout

_FORMAT = "ladderfit chain"
_VERSION = 1
_SIGNATURE = b"\x89HDF\r\n\x1a\n"
_KEY = 624  # words of a Mersenne Twister
_LARGEST_LAYOUT = 100_000

FloatArray = npt.NDArray[np.float64]

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


def bytes_at(path: Path, offset: int, size: int) -> bytes:
    """Bytes of a file; fewer where it ends before."""
    with path.open("rb") as stream:
        stream.seek(offset)
        return stream.read(size)


def lay_out(path: Path, header: Header, capacity: int) -> None:
    """Write the structure, with room for `capacity` rows."""
    plan = header.plan
    walkers = (capacity, plan.ensembles, plan.walkers)
    settings = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
    settings.set_layout(h5py.h5d.CONTIGUOUS)
    settings.set_alloc_time(h5py.h5d.ALLOC_TIME_EARLY)
    settings.set_fill_time(h5py.h5d.FILL_TIME_NEVER)
    with h5py.File(path, "w", locking=False) as file:
        for name, shape, kind in (
            ("commits", (2,), record_type(plan)),
            ("log_density", walkers, FLOAT),
            ("z", (*walkers, plan.dimension), FLOAT),
        ):
            space = h5py.h5s.create_simple(shape)
            h5py.h5d.create(file.id, name.encode(), h5py.h5t.py_create(kind), space, settings)
        file.attrs.update(
            format=_FORMAT,
            version=_VERSION,
            names=list(header.names),
            folded=np.array(header.folded, dtype=np.uint8),
            dimension=plan.dimension,
            ensembles=plan.ensembles,
            walkers=plan.walkers,
            thin=plan.thin,
            seed=str(header.seed),
            fingerprint=header.fingerprint,
            box=np.full((2, plan.dimension), np.nan) if header.box is None else header.box,
        )


def chain_problem(path: Path, found: str, remedy: str) -> Problem:
    """A problem with a chain file."""
    return Problem(found, "a chain file of an ensemble run", remedy, file=str(path))


def look_over(path: Path) -> Places:
    """Look a file over before a single number of it is used."""
    if not path.is_file():
        found = "a folder" if path.is_dir() else "no such file"
        raise InputError(chain_problem(path, found, "correct the path, or start a new run"))
    try:
        if bytes_at(path, 0, len(_SIGNATURE)) != _SIGNATURE:
            raise InputError(chain_problem(path, "a file that is not HDF5", ANEW))
        with h5py.File(path, "r", locking=False) as file:
            return _looked_over(path, file)
    except PermissionError:
        raise InputError(
            chain_problem(path, "a file that may not be read", "make it readable")
        ) from None
    except (OSError, RuntimeError, KeyError, TypeError, ValueError, AttributeError) as error:
        words = "a file cut short" if "truncated" in str(error) else "a damaged HDF5 file"
        raise InputError(chain_problem(path, words, ANEW)) from None


def _looked_over(path: Path, file: h5py.File) -> Places:
    attributes = file.attrs
    if str(attributes.get("format", "")) != _FORMAT:
        raise InputError(chain_problem(path, "an HDF5 file of another kind", ANEW))
    if int(attributes["version"]) != _VERSION:
        found = f"version {int(attributes['version'])} of the format, where {_VERSION} is known"
        raise InputError(chain_problem(path, found, "use the version of ladderfit that wrote it"))
    sizes = [int(attributes[name]) for name in ("dimension", "ensembles", "walkers", "thin")]
    if not all(1 <= size <= _LARGEST_LAYOUT for size in sizes):
        raise InputError(chain_problem(path, f"a layout of {sizes}", ANEW))
    box = np.array(attributes["box"], dtype=float).reshape(2, sizes[0])
    header = Header(
        names=tuple(str(name) for name in attributes["names"]),
        folded=tuple(bool(flag) for flag in attributes["folded"]),
        plan=Layout(*sizes),
        seed=int(attributes["seed"]),
        fingerprint=str(attributes["fingerprint"]),
        box=None if np.isnan(box).any() else box,
    )
    plan, capacity = header.plan, int(file["z"].shape[0])
    wanted = {
        "commits": ((2,), record_type(plan)),
        "log_density": ((capacity, plan.ensembles, plan.walkers), FLOAT),
        "z": ((capacity, plan.ensembles, plan.walkers, plan.dimension), FLOAT),
    }
    offsets = {name: file[name].id.get_offset() for name in wanted}
    fits = all(
        file[name].shape == shape and file[name].dtype == kind and offsets[name] is not None
        for name, (shape, kind) in wanted.items()
    )
    if not fits or not len(header.names) == len(header.folded) == plan.dimension:
        raise InputError(chain_problem(path, "arrays of another layout", ANEW))
    return Places(header, capacity, offsets["z"], offsets["log_density"], offsets["commits"])
