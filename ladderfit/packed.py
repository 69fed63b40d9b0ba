"""Compressed files: recognised by their first bytes, unpacked within bounds, bombs refused."""

from __future__ import annotations

import bz2
import gzip
import io
import lzma
import zipfile
import zlib
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import IO, Any, Literal

import pyarrow
import pyarrow.compute
import pyarrow.parquet

Packing = Literal["gzip", "bz2", "xz", "zip"]

LARGEST = 200_000_000  # bytes that a compressed file may unpack to
STEEPEST = 100.0  # times its own size that it may swell to, once it is worth a thought
_SMALL = 10_000_000  # bytes that are unpacked without a thought
_PIECE = 1 << 20

_KINDS: dict[bytes, Packing] = {
    b"\x1f\x8b": "gzip",
    b"BZh": "bz2",
    b"\xfd7zXZ\x00": "xz",
    b"PK\x03\x04": "zip",
}
_OPENERS: dict[str | None, Callable[[Path], Any]] = {
    "gzip": gzip.GzipFile,
    "bz2": bz2.BZ2File,
    "xz": lzma.LZMAFile,
}


class PackedError(Exception):
    """Why a compressed file is not read, in words."""


def packing(path: Path) -> Packing | None:
    """How a file is compressed: ``gzip``, ``bz2``, ``xz``, ``zip``, or None for not at all."""
    with path.open("rb") as stream:
        start = stream.read(6)
    return next((kind for magic, kind in _KINDS.items() if start.startswith(magic)), None)


def check_packed(path: Path) -> None:
    """Unpack a compressed file once, piece by piece, and measure it; others pass.

    Raises
    ------
    PackedError
        If it is damaged, or swells beyond `LARGEST` bytes or `STEEPEST` times its size.
    OSError
        If it cannot be read.
    """
    kind = packing(path)
    if kind == "zip":
        _check_archive(path)
    elif kind is not None:
        with opened(path) as stream:
            _measure(stream, path.stat().st_size)


@contextmanager
def opened(path: Path) -> Iterator[IO[bytes]]:
    """A file's bytes, unpacked where they are compressed, but for archives.

    Meant for files that `check_packed` let pass.

    Raises
    ------
    PackedError
        If it is damaged.
    """
    opener = _OPENERS.get(packing(path))
    with _words(), path.open("rb") if opener is None else opener(path) as stream:
        yield stream


def unpacked(path: Path) -> bytes:
    """All bytes of a file, as `opened` gives them.

    Raises
    ------
    PackedError
        If it is damaged.
    """
    with opened(path) as stream:
        content: bytes = stream.read()
    return content


@contextmanager
def _words() -> Iterator[None]:
    try:
        yield
    except (EOFError, zlib.error, lzma.LZMAError, gzip.BadGzipFile) as error:
        raise PackedError(f"a compressed file that is damaged ({error})") from None
    except OSError as error:
        if error.errno is None:  # how bz2 says that its data are bad
            raise PackedError(f"a compressed file that is damaged ({error})") from None
        raise


def _measure(stream: IO[bytes], packed: int, before: int = 0) -> int:
    """Unpack and forget; the number of bytes."""
    size = before
    while piece := stream.read(_PIECE):
        size += len(piece)
        if size > LARGEST:
            raise PackedError(
                f"a compressed file that unpacks to more than {LARGEST // 1_000_000} MB; "
                "unpack it yourself if you trust it"
            )
        if size > max(_SMALL, STEEPEST * packed):
            raise PackedError(
                f"a compressed file that swells to more than {STEEPEST:g} times its size"
            )
    return size


def _check_archive(path: Path) -> None:
    try:
        with zipfile.ZipFile(path) as archive:
            size = 0
            for entry in archive.infolist():
                with archive.open(entry) as stream:
                    size = _measure(stream, path.stat().st_size, size)
    except (zipfile.BadZipFile, zlib.error, lzma.LZMAError, EOFError) as error:
        raise PackedError(f"an archive that is damaged ({error})") from None
    except (RuntimeError, NotImplementedError, ValueError) as error:
        raise PackedError(f"an archive that cannot be read ({error})") from None


def check_parquet(path: Path) -> None:
    """Refuse a Parquet file that says the same number, or the same long text, far too often.

    Raises
    ------
    PackedError
        If a column swells beyond `LARGEST` bytes and `STEEPEST` times the file's size.
    Exception
        Whatever pyarrow raises on a damaged file.
    """
    limit = max(LARGEST, STEEPEST * path.stat().st_size)
    with pyarrow.parquet.ParquetFile(path) as file:
        about, schema = file.metadata, file.schema_arrow
        groups = [about.row_group(place) for place in range(about.num_row_groups)]
        for column in range(about.num_columns):
            values = sum(group.column(column).num_values for group in groups)
            _refuse_column(8.0 * max(values, about.num_rows), limit)
    for field in schema:
        if pyarrow.types.is_string(field.type) or pyarrow.types.is_large_string(field.type):
            _refuse_column(_text_size(path, field.name, limit), limit)


def _refuse_column(size: float, limit: float) -> None:
    if size > limit:
        raise PackedError(f"a column that unpacks to more than {limit / 1e6:.0f} MB")


def _text_size(path: Path, name: str, limit: float) -> float:
    """Bytes of a column of text, each word of its dictionary read once."""
    size = 0.0
    with pyarrow.parquet.ParquetFile(path, read_dictionary=[name]) as file:
        for place in range(file.metadata.num_row_groups):
            for chunk in file.read_row_group(place, columns=[name])[name].chunks:
                if pyarrow.types.is_dictionary(chunk.type):
                    lengths = pyarrow.compute.binary_length(chunk.dictionary).take(chunk.indices)
                else:
                    lengths = pyarrow.compute.binary_length(chunk)
                size += float(pyarrow.compute.sum(lengths).as_py() or 0)
            if size > limit:
                break
    return size


def text_stream(stream: IO[bytes]) -> io.TextIOWrapper:
    """Text in UTF-8, a mark of byte order left out."""
    return io.TextIOWrapper(stream, encoding="utf-8-sig", newline="")
