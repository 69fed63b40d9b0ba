"""A covariance matrix in a file."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from ladderfit.errors import Problem
from ladderfit.schema import choice


@dataclass(frozen=True)
class Covariance:
    """A covariance matrix, and which row of it belongs to what.

    It stands in the place of the single errors unless `adds` says that these come
    on top.  Without `names` its rows follow the rows of the tables, before cuts:
    those of the supernovae in hosts first, then those of the expansion.
    """

    file: str = choice("the matrix, a path relative to this file: text, FITS image or .npy")
    names: str | None = choice(
        "a text file with the name of every row of the matrix, one to a line", default=None
    )
    adds: bool = choice("whether it is added to the single errors", default=False)

    def check(self) -> Iterator[Problem]:
        """Paths that are not empty."""
        for key in ("file", "names"):
            if getattr(self, key) == "":
                yield Problem("an empty path", "the path of a file", "name the file", key=key)
