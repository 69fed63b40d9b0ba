"""Which rows of a covariance matrix belong to the objects that take part.

That is known from a list of names, or from the order of the tables' rows.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ladderfit.errors import InputError, Problem, raise_if
from ladderfit.inputs.covariances import Matrix
from ladderfit.inputs.rows import nearest_few
from ladderfit.inputs.tables import shown
from ladderfit.samples import FloatArray, IntArray

_FEW = 3  # problems of one kind that are told


@dataclass(frozen=True, eq=False)
class Members:
    """The rows of one table: names of all, and the numbers (from 0) of those that take part."""

    names: Sequence[str]
    left: IntArray
    words: str
    same_as_first: bool = False


def places(matrix: Matrix, tables: Sequence[Members], key: str) -> IntArray:
    """Rows of the matrix that belong to the tables' rows that take part, in their order.

    A name that stands several times in the list belongs to the tables' rows of
    that name in their order; where each table has as many of them by itself, the
    tables share those rows of the matrix: the same measurement in both.

    Raises
    ------
    InputError
        If the matrix has another size than the tables, a name is missing in the
        list, or is there more or less often than in the tables.
    """
    if matrix.names is None:
        return _by_order(matrix, tables, key)
    listed: dict[str, list[int]] = {}
    for row, name in enumerate(matrix.names):
        listed.setdefault(name, []).append(row)
    rows_of = [_rows_by_name(table.names) for table in tables]
    problems: list[Problem] = []
    found: list[int] = []
    for number, table in enumerate(tables):
        for row in table.left:
            name = str(table.names[row])
            counts = [len(rows.get(name, ())) for rows in rows_of]
            theirs = listed.get(name, [])
            before = rows_of[number][name].index(int(row))
            if len(theirs) == sum(counts):
                found.append(theirs[sum(counts[:number]) + before])
            elif all(count in (0, len(theirs)) for count in counts):
                found.append(theirs[before])
            else:
                problems.append(_unmatched(matrix, name, len(theirs), sum(counts), key))
    problems = list(dict.fromkeys(problems))
    raise_if(problems[:_FEW])
    return np.array(found, dtype=np.int64)


def _rows_by_name(names: Sequence[str]) -> dict[str, list[int]]:
    rows: dict[str, list[int]] = {}
    for row, name in enumerate(names):
        rows.setdefault(str(name), []).append(row)
    return rows


def _unmatched(matrix: Matrix, name: str, listed: int, wanted: int, key: str) -> Problem:
    once = f"{shown(name)} {listed} times, where the tables have it {wanted} times"
    return Problem(
        found=once if listed else f"no {shown(name)}",
        expected="every name of the tables, as often as it is there",
        remedy="complete the list and the matrix, or set the object aside"
        if listed
        else nearest_few(name, sorted(set(matrix.names or ()))),
        file=matrix.names_file,
        key=f"{key}.names",
    )


def _by_order(matrix: Matrix, tables: Sequence[Members], key: str) -> IntArray:
    sizes = [len(table.names) for table in tables]
    shared = len(tables) > 1 and all(table.same_as_first for table in tables[1:])
    if shared and len(matrix) == sizes[0]:
        starts = [0] * len(tables)
    elif len(matrix) == sum(sizes):
        starts = [sum(sizes[:number]) for number in range(len(tables))]
    else:
        counted = " and ".join(
            f"{size:,} {table.words}" for size, table in zip(sizes, tables, strict=True)
        )
        raise InputError(
            matrix.problem(
                key,
                found=f"{len(matrix):,} rows",
                expected=f"{sum(sizes):,} rows, one for each row of the tables ({counted})",
                remedy=f"name the matrix's rows ({key}.names), or give the right matrix",
            )
        )
    pairs = zip(starts, tables, strict=True)
    return np.concatenate([start + table.left for start, table in pairs]).astype(np.int64)


def check_definite(total: FloatArray, names: Sequence[str], matrix: Matrix, key: str) -> None:
    """Raise unless a covariance, shape (n, n), is positive definite.

    Raises
    ------
    InputError
        Naming the object that carries most of the direction without variance.
    """
    error = np.sqrt(np.diag(total))
    if np.any(error == 0.0):
        worst, smallest = int(np.argmin(error)), 0.0
    else:
        correlation = total / np.outer(error, error)
        try:
            np.linalg.cholesky(correlation - 1e-12 * np.eye(len(total)))
        except np.linalg.LinAlgError:
            values, vectors = np.linalg.eigh(correlation)
            worst, smallest = int(np.argmax(np.abs(vectors[:, 0]))), float(values[0])
        else:
            return
    raise InputError(
        matrix.problem(
            key,
            found="a matrix that is not positive definite "
            f"(smallest eigenvalue {smallest:.2g} in units of the errors; most of {names[worst]})",
            expected="a combination of errors that none cancels",
            remedy="correct the matrix or the order of its rows, or set one of two identical "
            "objects aside",
        )
    )
