"""Which rows of a table take part, and why the others do not.

A `Rows` walks through one table in the order of the reasons: set aside by
hand, missing cells, then cuts.  A row set aside by hand is not judged: its
cells may hold anything.  Every other row's cells have to make sense, whether or
not a cut removes it later.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping

import numpy as np
import numpy.typing as npt
import pandas as pd

from ladderfit.choices import SetAside
from ladderfit.errors import Problem, nearest, raise_if
from ladderfit.inputs.kinds import Kind
from ladderfit.inputs.tables import BoolArray, DataTable, Texts, and_more, shown
from ladderfit.samples import FloatArray, IntArray, Kept

LONGEST_NAME = 200


class Rows:
    """The rows of one table on their way into a sample.

    Parameters
    ----------
    table : DataTable
        The table.
    key : str
        Dotted key of its section, for messages.
    """

    def __init__(self, table: DataTable, key: str) -> None:
        self.table = table
        self.key = key
        self.problems: list[Problem] = []
        self.judged: BoolArray = np.ones(table.rows, bool)
        self.open: BoolArray = np.ones(table.rows, bool)
        self._reasons: dict[str, int] = {}
        self._keys: dict[str, tuple[str, ...]] = {}

    def faults(
        self,
        columns: Mapping[str, str],
        kinds: Mapping[str, Kind],
        key: str | None = None,
        words: Callable[[str], str] = str,
    ) -> list[Problem]:
        """Columns that are not there, or not in the right kind of unit, one problem each.

        Parameters
        ----------
        columns : mapping of str to str
            Column by role.
        kinds : mapping of str to Kind
            What the numbers of a role measure; a role without one holds text.
        key : str, optional
            Dotted key under which `columns` stands.
        words : callable, optional
            What a role is called in messages.
        """
        place = key or f"{self.key}.columns"
        found = []
        for role, name in columns.items():
            fault = self.table.column_problem(words(role), name, f"{place}.{role}")
            if fault is None and role in kinds:
                fault = self.table.unit_problem(name, kinds[role])
            if fault is not None:
                found.append(fault)
        return found

    def set_aside(
        self,
        entries: Iterable[SetAside],
        names: Texts,
        role: str,
        hosts: Texts | None = None,
    ) -> None:
        """Leave out the rows named by hand; `role` is what an entry calls them: star or name."""
        left_out = np.zeros(self.table.rows, bool)
        for number, entry in enumerate(entries, start=1):
            if hosts is not None and entry.host is not None and entry.whole_host:
                left_out |= self._whole_host(number, entry.host, hosts)
                continue
            wanted = entry.star if role == "star" else entry.name
            if wanted is None:
                self._entry_problem(number, "an entry of another kind", f"{role} = NAME", "")
                continue
            hit = names.equal(wanted)
            if entry.host is not None and hosts is not None:
                hit = hit & hosts.equal(entry.host)
            if not hit.any():
                found = f"{wanted!r}" + (f" in {entry.host!r}" if entry.host else "")
                self._entry_problem(
                    number, found, f"a {role} of this table", nearest_few(wanted, names.known)
                )
            elif role == "star" and hosts is not None and len(set(hosts.codes[hit])) > 1:
                hosts_hit = ", ".join(sorted(set(hosts.labels[hosts.codes[hit]])))
                self._entry_problem(
                    number, f"{wanted!r}, which is in {hosts_hit}", "one star", "add host = NAME"
                )
            left_out |= hit
        self.judged = ~left_out
        self.leave_out(left_out, "set aside by hand")

    def _whole_host(self, number: int, host: str, hosts: Texts) -> BoolArray:
        hit = hosts.equal(host)
        if not hit.any():
            remedy = nearest_few(host, hosts.known)
            self._entry_problem(number, repr(host), "a host of this table", remedy)
        return hit

    def _entry_problem(self, number: int, found: str, expected: str, remedy: str) -> None:
        self.problems.append(
            Problem(
                found=f"{found} (entry {number})",
                expected=expected,
                remedy=remedy or "correct the entry",
                file=self.table.name,
                key=f"{self.key}.set_aside",
            )
        )

    def leave_out(self, mask: BoolArray, reason: str, *keys: str) -> None:
        """Close the open rows under `mask`; each counts under its first reason."""
        count = int(np.count_nonzero(mask & self.open))
        if count:
            self._reasons[reason] = self._reasons.get(reason, 0) + count
            self._keys[reason] = keys
        self.open = self.open & ~mask

    def need(self, texts: Texts, role: str, column: str | None) -> None:
        """Leave out rows where a text is missing; an endless one is a problem."""
        row, length = texts.longest
        if length > LONGEST_NAME:
            self.problems.append(
                Problem(
                    found=f"a {role} of {length:,} characters",
                    expected=f"at most {LONGEST_NAME}",
                    remedy="name the right column, or correct the cell",
                    file=self.table.name,
                    row=row + 1,
                    column=column,
                )
            )
        self.leave_out(texts.missing & self.judged, f"missing {role}")

    def number(self, role: str, name: str, kind: Kind, *, above: float | None = None) -> FloatArray:
        """A column of numbers; rows that miss it are left out, impossible values are problems.

        Returns
        -------
        array, shape (rows,)
            In the unit of `kind`; NaN where missing.
        """
        numbers = self.table.numbers(name, kind)
        self.problems.extend(self.table.cell_problems(name, kind, self.judged))
        if above is not None:
            wrong = np.flatnonzero(self.judged & (numbers.values <= above))
            if wrong.size:
                self.problems.append(
                    Problem(
                        found=f"{numbers.values[wrong[0]]:g}" + and_more(wrong.size - 1),
                        expected=f"{kind.words if 'error' not in role else 'an error'} "
                        f"above {above:g}",
                        remedy="correct the cell, empty it, or set the row aside",
                        file=self.table.name,
                        row=int(wrong[0]) + 1,
                        column=name,
                    )
                )
        self.leave_out(numbers.missing & self.judged, f"missing {role.replace('_', ' ')}")
        return numbers.values

    def unique(
        self,
        words: str,
        columns: Mapping[str, Texts | FloatArray],
        name: str | None,
        remedy: str = "remove or rename one of the two, or set it aside",
    ) -> None:
        """Rows equal in all `columns` are a problem; `name` is the column to blame."""
        cells = {
            role: values.codes if isinstance(values, Texts) else values
            for role, values in columns.items()
        }
        complete = [
            ~values.missing if isinstance(values, Texts) else ~np.isnan(values)
            for values in columns.values()
        ]
        frame = pd.DataFrame(cells)[np.logical_and.reduce([self.judged, *complete])]
        repeated = frame.duplicated().to_numpy()
        if not repeated.any():
            return
        second = int(frame.index[np.flatnonzero(repeated)[0]])
        same = (frame == frame.loc[second]).all(axis=1)
        first = int(frame.index[np.flatnonzero(same.to_numpy())[0]])
        label = next(values for values in columns.values() if isinstance(values, Texts))
        self.problems.append(
            Problem(
                found=f"{words} {shown(label.cell(second))} again, first in row {first + 1}"
                + and_more(int(repeated.sum()) - 1),
                expected="each once",
                remedy=remedy,
                file=self.table.name,
                row=second + 1,
                column=name,
            )
        )

    def finish(self, words: str) -> tuple[IntArray, Kept]:
        """The rows left (from 0), and the account of those left out.

        Raises
        ------
        InputError
            With all problems collected, or where nothing is left.
        """
        raise_if(self.problems)
        left = np.flatnonzero(self.open)
        if not left.size:
            keys = dict.fromkeys(key for reason in self._reasons for key in self._keys[reason])
            blamed = " and ".join(f"{self.key}.{key}" for key in keys) or self.key
            most = max(self._reasons, key=lambda reason: self._reasons[reason])
            at = f"{self.key}.{self._keys[most][0]}" if self._keys[most] else self.key
            counts = "; ".join(f"{n:,} {reason}" for reason, n in self._reasons.items())
            raise_if(
                [
                    Problem(
                        found=f"none of {self.table.rows:,} rows left: {counts}",
                        expected=f"at least one {words}",
                        remedy=f"widen or correct {blamed}",
                        file=self.table.name,
                        key=at,
                    )
                ]
            )
        return left, Kept(self.table.rows, int(left.size), dict(self._reasons))


def nearest_few(word: str, known: list[str]) -> str:
    """Like `nearest`, but never lists more than a handful of names."""
    if len(known) <= 12:
        return nearest(word, known)
    hint = nearest(word, known) if len(known) <= 20_000 else ""
    return hint if hint.startswith("did you mean") else "correct or remove the name"


def floats(values: npt.ArrayLike) -> FloatArray:
    """A read-only copy, as floats."""
    array = np.array(values, dtype=np.float64)
    array.setflags(write=False)
    return array


def integers(values: npt.ArrayLike) -> IntArray:
    """A read-only copy, as integers."""
    array = np.array(values, dtype=np.int64)
    array.setflags(write=False)
    return array
