"""Runs the sections of a ladder, taking over from an earlier one what did not change."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, TypeVar, cast

from ladderfit.choices import Choices, Parallaxes
from ladderfit.errors import InputError, Problem
from ladderfit.select_stars import (
    CepheidSelection,
    ParallaxSelection,
    select_cepheids,
    select_parallax_stars,
)
from ladderfit.select_supernovae import (
    ExpansionSelection,
    PeakSelection,
    select_expansion,
    select_peaks,
)
from ladderfit.table_files import read_table
from ladderfit.tables import DataTable

T = TypeVar("T")

SECTIONS = ("cepheids", "anchors.parallaxes", "supernovae", "expansion")
IN_MEMORY = "(in memory)"


@dataclass(frozen=True)
class Source:
    """Where a table came from: `path` as written, `sha256` of file or arrays, `rows` in it."""

    path: str
    sha256: str
    rows: int


@dataclass(frozen=True, eq=False)
class Parts:
    """What a changed ladder can take over: tables by place, selections by what made them."""

    base: Path
    tables: Mapping[tuple[str, str], DataTable]
    made: Mapping[str, tuple[tuple[Any, ...], Any]]


class Assembly:
    """Puts a ladder together, taking over from an earlier one what did not change."""

    def __init__(self, choices: Choices, before: Parts) -> None:
        self.choices = choices
        self.before = before
        self.tables = dict(before.tables)
        self.made = dict(before.made)
        self.problems: list[Problem] = []
        self.sources: dict[str, Source] = {}

    def select(
        self, section: str, written: str, wanted: tuple[Any, ...], make: Callable[[DataTable], T]
    ) -> T | None:
        """The selection of a section; the earlier one if table and `wanted` are the same."""
        try:
            table = self._table(section, written)
            made_from = (table, *wanted)
            earlier = self.made.get(section)
            if earlier is None or earlier[0] != made_from:
                self.made[section] = (made_from, make(table))
        except InputError as error:
            self.problems.extend(error.problems)
            return None
        self.sources[section] = Source(written, table.sha256, table.rows)
        return cast("T", self.made[section][1])

    def _table(self, section: str, written: str) -> DataTable:
        for place in ((section, written), ("", written)):
            if place in self.tables:
                return self.tables[place]
        key = f"{section}.table"
        if written == IN_MEMORY:
            raise InputError(
                Problem(
                    found="no table of that section in memory",
                    expected="a table",
                    remedy="write it to a file and name the file",
                    key=key,
                )
            )
        table = read_table(self.before.base / written, key)
        self.tables["", written] = table
        return table

    def cepheids(self) -> CepheidSelection | None:
        """The Cepheids that take part."""
        section = self.choices.cepheids
        if section is None:
            return None
        term = self.choices.relation.metallicity != "none"
        return self.select(
            "cepheids",
            section.table,
            (section, term),
            lambda table: select_cepheids(table, section, metallicity=term),
        )

    def parallaxes(self) -> ParallaxSelection | None:
        """The parallax stars that take part."""
        section = self.choices.anchors.parallaxes
        if section is None or not section.use:
            return None
        shared = self.choices.cepheids
        magnitude = section.magnitude or (shared.magnitude if shared else None)
        if magnitude is None:  # the choices' own check has refused this already
            return None
        term = self.choices.relation.metallicity != "none"
        return self.select(
            "anchors.parallaxes",
            section.table,
            (_rows_of_parallaxes(section), magnitude, term),
            lambda table: select_parallax_stars(table, section, magnitude, metallicity=term),
        )

    def peaks(self, cepheids: CepheidSelection | None) -> PeakSelection | None:
        """The supernovae in hosts; not tried where the Cepheids have a problem."""
        section = self.choices.supernovae
        if section is None or (self.choices.cepheids is not None and cepheids is None):
            return None
        anchors = {name: anchor.use for name, anchor in self.choices.anchors.geometric.items()}
        hosts = (cepheids.hosts, cepheids.seen) if cepheids else ()
        return self.select(
            "supernovae",
            section.table,
            (section, anchors, hosts),
            lambda table: select_peaks(table, section, cepheids, anchors),
        )

    def expansion(self) -> ExpansionSelection | None:
        """The objects that follow the expansion."""
        section = self.choices.expansion
        if section is None or section.table is None:
            return None
        return self.select(
            "expansion",
            section.table,
            (section.columns, section.redshifts, section.set_aside),
            lambda table: select_expansion(table, section),
        )


def _rows_of_parallaxes(section: Parallaxes) -> tuple[Any, ...]:
    """What decides which rows take part and what they hold."""
    return (
        section.columns,
        section.periods,
        section.overtones,
        section.conversion,
        section.set_aside,
        section.corrected,
        section.offset_slope,
        section.needs_sky,
        section.selection,
        section.extinction_max,
        section.min_signal,
    )
