"""Which column of a table has which role: the surest first, each column once."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Sequence
from dataclasses import dataclass

from ladderfit.draft.clues import (
    LEAD,
    SURE,
    Clue,
    host_clue,
    mode_clue,
    name_clue,
    number_clue,
    system_clue,
)
from ladderfit.draft.facts import Facts
from ladderfit.schema import UNDECIDED

_MOST_OFFERED = 5
_OPTIONAL = frozenset({"star", "metallicity", "mode", "system", "redshift_heliocentric"})

_TEXT = {
    "star": name_clue,
    "name": name_clue,
    "host": host_clue,
    "mode": mode_clue,
    "system": system_clue,
}


@dataclass(frozen=True)
class Choice:
    """What a draft writes under one key, and why; an undecided one names what may be meant."""

    value: object
    why: str = ""
    offers: tuple[str, ...] = ()

    @property
    def undecided(self) -> bool:
        """Whether it is left to the reader."""
        return isinstance(self.value, str) and self.value.startswith(UNDECIDED)


def open_choice(offers: Sequence[str], otherwise: str = "") -> Choice:
    """An undecided choice among names, most likely first."""
    shown = list(offers[:_MOST_OFFERED])
    if len(offers) > _MOST_OFFERED:
        shown.append(f"another of {len(offers)}")
    words = " or ".join([", ".join(shown[:-1]), shown[-1]]) if len(shown) > 1 else "".join(shown)
    return Choice(f"{UNDECIDED} {words}{otherwise}?", offers=tuple(offers))


class Roles:
    """Hands out the columns of one table.

    Parameters
    ----------
    columns : iterable of Facts
    hosts : collection of str
        Hosts that other tables name.
    """

    def __init__(self, columns: Iterable[Facts], hosts: Collection[str] = ()) -> None:
        self.free = list(columns)
        self.by_name = {column.name: column for column in self.free}
        self.hosts = hosts
        self.chosen: dict[str, Choice] = {}

    def clues(self, role: str) -> list[Clue]:
        """Free columns that may have a role, best first."""
        by_text = _TEXT.get(role)
        every = [
            number_clue(role, column) if by_text is None else by_text(column, self.hosts)
            for column in self.free
        ]
        found = [clue for clue in every if clue is not None]
        return sorted(found, key=lambda clue: (-clue.score, clue.column.place))

    def best(self, role: str) -> float:
        """Score of the best free column."""
        return max((clue.score for clue in self.clues(role)), default=0.0)

    def assign(self, *roles: str) -> None:
        """Give each role its column where that is clear, the surest role first.

        A role that nothing fits gets no choice at all.
        """
        waiting = list(roles)
        while waiting:
            ranked = {role: self.clues(role) for role in waiting}
            role = max(waiting, key=lambda r: ranked[r][0].score if ranked[r] else 0.0)
            waiting.remove(role)
            self._decide(role, ranked[role])

    def _decide(self, role: str, ranked: Sequence[Clue]) -> None:
        if not ranked:
            return
        best, second = ranked[0], ranked[1].score if len(ranked) > 1 else 0.0
        if best.score >= SURE and best.score - second >= LEAD:
            self.take(role, best.column, best.why)
        elif best.score >= 2.0:
            near = [clue for clue in ranked if clue.score > best.score - LEAD]
            otherwise = ", or take this line out" if role in _OPTIONAL else ""
            self.chosen[role] = open_choice([clue.column.name for clue in near], otherwise)

    def take(self, role: str, column: Facts, why: str) -> None:
        """Give a role its column."""
        self.chosen[role] = Choice(column.name, why)
        self.free.remove(column)

    def decided(self, role: str) -> Facts | None:
        """The column that a role has been given, if it is clear."""
        choice = self.chosen.get(role)
        return None if choice is None or choice.undecided else self.by_name[str(choice.value)]

    def need(self, role: str, words: str) -> None:
        """Leave a role without a candidate to the reader."""
        if role not in self.chosen:
            self.chosen[role] = Choice(f"{UNDECIDED} no column looks like {words}")

    def error_of(self, role: str, *, needed: bool) -> None:
        """Find the column that holds the errors of what a role has been given."""
        base = self.chosen.get(role)
        if base is None:
            return
        name = f"{role.removeprefix('log_')}_error"
        if base.undecided:
            if needed:
                self.chosen[name] = Choice(f"{UNDECIDED} the error of what {role} is")
            return
        found = self.errors_for(str(base.value), needed=needed)
        if found is not None:
            self.chosen[name] = found

    def errors_for(self, name: str, *, needed: bool) -> Choice | None:
        """The error column of a column, by its name, else by its values.

        Parameters
        ----------
        name : str
            The column it belongs to.
        needed : bool
            Whether to leave it open rather than out where none is found.
        """
        base = self.by_name[name]
        fitting = [column for column in self.free if _may_be_error(column, base)]
        same = [c for c in fitting if c.error and _bare(c.stem) == _bare(base.stem)]
        if not same:
            same = [c for c in fitting if c.error and c.stem and base.stem.startswith(c.stem)]
        if len(same) == 1:
            self.free.remove(same[0])
            return Choice(same[0].name, f"named like the error of {name}")
        if not needed:
            return None
        nameless = same or [c for c in fitting if not c.error]
        alike = [c for c in nameless if c.unit is not None and c.unit == base.unit]
        if not same and len(alike) == 1:
            self.free.remove(alike[0])
            return Choice(alike[0].name, f"small, in {base.unit} like {name}, and the only one")
        if nameless:
            return open_choice([c.name for c in alike or nameless])
        return Choice(f"{UNDECIDED} no column looks like the error of {name}")


def _bare(stem: str) -> str:
    """A stem without the word for magnitude, so that ``e_V`` belongs to ``Vmag``."""
    for word in ("mag", "mean"):
        shorter = stem.replace(word, "")
        stem = shorter or stem
    return stem


def _may_be_error(column: Facts, base: Facts) -> bool:
    """Positive numbers in the unit of what they belong to, mostly smaller than its values."""
    if column.numbers is None or base.numbers is None or column.name == base.name:
        return False
    if column.unit is not None and base.unit is not None:
        try:
            if not column.unit.is_equivalent(base.unit):
                return False
        except AttributeError:
            return False
    positive = column.within(0.0, float("inf")) and float(column.numbers.max()) > 0.0
    return positive and (column.error or _typical(column) < 0.3 * _typical(base))


def _typical(column: Facts) -> float:
    numbers = column.numbers
    return 0.0 if numbers is None else float(sorted(abs(numbers))[len(numbers) // 2])
