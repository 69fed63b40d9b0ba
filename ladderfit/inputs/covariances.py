"""Covariance matrices: reading and checking.

A file holds one square matrix: text whose first number is the number of rows, a
FITS image, or a NumPy array without pickles.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
from astropy.io import fits

from ladderfit.errors import InputError, Problem
from ladderfit.files import by_suffix, need_file, sha256_of
from ladderfit.inputs.tables import shown
from ladderfit.packed import PackedError, check_packed, opened, unpacked
from ladderfit.samples import FloatArray, frozen

LARGEST = 20_000  # rows
_SQUARE = "an image of N x N pixels"

_ASYMMETRY = 1e-5  # of the two errors' product: rounding in a text file


@dataclass(frozen=True, eq=False)
class Matrix:
    """A covariance matrix as read.

    Attributes
    ----------
    values : array, shape (n, n)
        Symmetric and finite, its diagonal not negative.
    names : tuple of str, length n, or None
        What each row belongs to; None where that follows the tables.
    file : str
        For messages.
    names_file : str
        Likewise.
    sha256 : tuple of str
        Of the file, and of the list of names if there is one.
    """

    values: FloatArray
    names: tuple[str, ...] | None
    file: str
    names_file: str
    sha256: tuple[str, ...]

    def __len__(self) -> int:
        """Number of rows."""
        return len(self.values)

    def problem(self, key: str, found: str, expected: str, remedy: str) -> Problem:
        """A problem with this matrix."""
        return Problem(found, expected, remedy, file=self.file, key=f"{key}.file")


def read_covariance(path: Path, names: Path | None, key: str) -> Matrix:
    """Read a matrix and, where there is one, the list of its rows' names.

    Parameters
    ----------
    path, names : Path
    key : str
        Dotted key of the covariance, for messages.

    Raises
    ------
    InputError
        If a file is missing or unreadable, the matrix is not square, not finite or
        not symmetric, a variance is negative, or there are not as many names as rows.
    """
    values = _checked(_values(path, key), str(path), key)
    listed, sha256 = None, [sha256_of(path)]
    if names is not None:
        listed = _listed(names, len(values), key)
        sha256.append(sha256_of(names))
    return Matrix(values, listed, str(path), str(names), tuple(sha256))


def _listed(path: Path, size: int, key: str) -> tuple[str, ...]:
    listed = read_names(path, key)
    if len(listed) != size:
        raise InputError(
            Problem(
                found=f"{len(listed):,} names, where the matrix has {size:,} rows",
                expected="one name for every row of the matrix, in its order",
                remedy="complete or shorten the list",
                file=str(path),
                key=f"{key}.names",
            )
        )
    return listed


def covariance_in_memory(values: Any, key: str, names: Path | None = None) -> Matrix:
    """A `Matrix` from an array, shape (n, n), and a list of names in a file.

    Raises
    ------
    InputError
        As `read_covariance`.
    """
    name = f"the matrix given for {key}"
    try:
        array = np.array(values, dtype=float)
    except (TypeError, ValueError):
        raise _unreadable(name, key, f"a {type(values).__name__}") from None
    checked = _checked(array, name, key)
    listed = None if names is None else _listed(names, len(checked), key)
    sha256 = [hashlib.sha256(checked.tobytes()).hexdigest()]
    sha256 += [] if names is None else [sha256_of(names)]
    return Matrix(checked, listed, name, str(names), tuple(sha256))


def _unreadable(
    file: str, key: str, found: str, expected: str = "a covariance matrix"
) -> InputError:
    short = " ".join(found.split())
    return InputError(
        Problem(
            found=short if len(short) <= 200 else short[:197] + "...",
            expected=expected,
            remedy="repair the file, or name another",
            file=file,
            key=f"{key}.file",
        )
    )


def _values(path: Path, key: str) -> npt.NDArray[Any]:
    need_file(path, "a covariance matrix", f"{key}.file")
    reader = by_suffix(path, _READERS, "matrix", f"{key}.file")
    try:
        check_packed(path)
        return reader(path, key)
    except InputError:
        raise
    except PackedError as error:
        raise _unreadable(str(path), key, str(error)) from None
    except Exception as error:  # readers raise anything on damaged files
        raise _unreadable(str(path), key, f"{type(error).__name__}: {error}") from error


def _text(path: Path, key: str) -> npt.NDArray[Any]:
    words = unpacked(path).split()
    try:
        size = int(words[0]) if words else 0
    except ValueError:
        size = 0
    if size < 1 or len(words) != size * size + 1:
        first = words[0][:20].decode("utf-8", "replace") if words else "nothing"
        raise _unreadable(
            str(path),
            key,
            f"{first!r} at the start, and {max(len(words) - 1, 0):,} numbers after it",
            "the number of rows N, and then N x N numbers",
        )
    try:
        return np.array(words[1:], dtype=float).reshape(size, size)
    except ValueError:
        place = next(i for i, word in enumerate(words[1:]) if not _is_number(word))
        word = words[place + 1].decode("utf-8", "replace")
        where = f"in row {place // size + 1}, column {place % size + 1}"
        raise _unreadable(str(path), key, f"{shown(word)} {where}", "numbers") from None


def _is_number(word: bytes) -> bool:
    try:
        float(word)
    except ValueError:
        return False
    return True


def _fits(path: Path, key: str) -> npt.NDArray[Any]:
    with fits.open(path, memmap=False) as units:
        for unit in units:
            if unit.is_image and max(unit.shape, default=0) > LARGEST:  # may be compressed inside
                raise _unreadable(str(path), key, f"{max(unit.shape):,} pixels in a row", _SQUARE)
            if unit.is_image and unit.data is not None:
                return np.asarray(unit.data, dtype=float)
    raise _unreadable(str(path), key, "no image", _SQUARE)


def _npy(path: Path, key: str) -> npt.NDArray[Any]:
    with opened(path) as stream:
        array = np.load(stream, allow_pickle=False)
    if not isinstance(array, np.ndarray) or array.dtype.kind not in "fiu":
        raise _unreadable(str(path), key, "an array that does not hold numbers")
    return array.astype(float)


_READERS: dict[str, Callable[[Path, str], npt.NDArray[Any]]] = {
    ".txt": _text,
    ".cov": _text,
    ".dat": _text,
    ".fits": _fits,
    ".fit": _fits,
    ".npy": _npy,
}


def read_names(path: Path, key: str) -> tuple[str, ...]:
    """The list of names of a matrix's rows; empty lines and lines that start with # are left out.

    Raises
    ------
    InputError
        If the file is missing or no text.
    """
    need_file(path, "a list of names", f"{key}.names")
    try:
        lines = path.read_text(encoding="utf-8-sig").splitlines()
    except (OSError, UnicodeDecodeError):
        problem = Problem(
            found="bytes that are not UTF-8 text",
            expected="a text file with one name to a line",
            remedy="save the file as UTF-8",
            file=str(path),
            key=f"{key}.names",
        )
        raise InputError(problem) from None
    stripped = (line.strip() for line in lines)
    return tuple(line for line in stripped if line and not line.startswith("#"))


def _checked(values: npt.NDArray[Any], file: str, key: str) -> FloatArray:
    """The matrix made exactly symmetric, if it is a covariance at all."""

    def fault(found: str, expected: str) -> InputError:
        return _unreadable(file, key, found, expected)

    if values.ndim != 2 or values.shape[0] != values.shape[1] or not len(values):
        shape = " x ".join(str(n) for n in values.shape) or "one"
        raise fault(f"{shape} numbers", "as many rows as columns")
    if len(values) > LARGEST:
        raise fault(f"{len(values):,} rows", f"at most {LARGEST:,}")
    if not np.isfinite(values).all():
        row, column = np.argwhere(~np.isfinite(values))[0] + 1
        raise fault(f"{values[row - 1, column - 1]} in row {row}, column {column}", "numbers")
    variance = np.diag(values)
    if np.any(variance < 0.0):
        row = int(np.argmax(variance < 0.0))
        raise fault(
            f"the variance {variance[row]:g} in row {row + 1}", "no negative number on the diagonal"
        )
    error = np.sqrt(variance)
    gap = np.abs(values - values.T)
    if np.any(gap > _ASYMMETRY * np.outer(error, error)):
        row, column = np.unravel_index(np.argmax(gap), gap.shape)
        raise fault(
            f"{values[row, column]:g} in row {row + 1}, column {column + 1} and "
            f"{values[column, row]:g} in the mirrored place",
            "a symmetric matrix",
        )
    symmetric: FloatArray = frozen(0.5 * (values + values.T))
    return symmetric
