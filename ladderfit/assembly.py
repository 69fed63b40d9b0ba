"""Runs the sections of a ladder, taking over from an earlier one what did not change."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, TypeVar, cast

import numpy as np

from ladderfit.choices import Choices, Covariance, Outliers, Parallaxes, PeakRelation
from ladderfit.clipping import clipped
from ladderfit.errors import InputError, Problem
from ladderfit.inputs.correlated import Given, Supernovae, anchors_together, supernovae_together
from ladderfit.inputs.covariances import Matrix, read_covariance
from ladderfit.inputs.select_stars import (
    CepheidSelection,
    ParallaxSelection,
    select_cepheids,
    select_parallax_stars,
)
from ladderfit.inputs.select_supernovae import (
    ExpansionSelection,
    PeakSelection,
    select_expansion,
    select_peaks,
)
from ladderfit.inputs.table_files import read_table
from ladderfit.inputs.tables import DataTable
from ladderfit.samples import FloatArray

T = TypeVar("T")

SECTIONS = ("cepheids", "anchors.parallaxes", "supernovae", "expansion")
MATRICES = (
    "anchors.covariance",
    "supernovae.covariance",
    "expansion.covariance",
    "expansion.velocity_covariance",
)
PATHS = (  # dotted keys whose values are paths of input files
    *(f"{section}.table" for section in SECTIONS),
    *(f"{matrix}.{part}" for matrix in MATRICES for part in ("file", "names")),
)
IN_MEMORY = "(in memory)"


@dataclass(frozen=True)
class Source:
    """Where an input came from: `path` as written, `sha256` of file or arrays, `rows` in it."""

    path: str
    sha256: str
    rows: int


@dataclass(frozen=True)
class AnchorInUse:
    """A geometric anchor that takes part: index and name of its host, modulus and error [mag]."""

    host: int
    name: str
    modulus: float
    error: float


def file_key(section: str) -> str:
    """The dotted key that names the file of an entry of `Ladder.sources`."""
    if section in MATRICES:
        return f"{section}.file"
    return f"{section}.table" if section in SECTIONS else section


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
        found = self.select(
            "cepheids",
            section.table,
            (replace(section, outliers=Outliers()), term),
            lambda table: select_cepheids(table, section, metallicity=term),
        )
        try:
            return None if found is None else clipped(self.choices, found)
        except InputError as error:
            self.problems.extend(error.problems)
            return None

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
        relation = self._terms()
        return self.select(
            "supernovae",
            section.table,
            (section, anchors, hosts, relation),
            lambda table: select_peaks(table, section, cepheids, anchors, relation),
        )

    def expansion(self) -> ExpansionSelection | None:
        """The objects that follow the expansion."""
        section, covariance = self.choices.expansion, self.choices.peak_covariance
        if section is None or section.table is None:
            return None
        errors = covariance is None or covariance[1].adds
        relation = self._terms()
        return self.select(
            "expansion",
            section.table,
            (section.columns, section.redshifts, section.set_aside, errors, relation),
            lambda table: select_expansion(table, section, errors=errors, relation=relation),
        )

    def _terms(self) -> PeakRelation:
        """The peak relation, but for what no table's rows depend on."""
        return replace(self.choices.peak_relation, errors="population")

    def supernovae(
        self, peaks: PeakSelection | None, expansion: ExpansionSelection | None
    ) -> Supernovae:
        """The supernovae with their covariance, if there is one."""
        section = self.choices.expansion
        peak, velocity = self.choices.peak_covariance, None
        if section is not None and section.velocity_covariance is not None:
            velocity = self.matrix("expansion.velocity_covariance", section.velocity_covariance)
        magnitudes = None if peak is None else self.matrix(*peak)
        tables = [self.sources[s].sha256 for s in ("supernovae", "expansion") if s in self.sources]
        made_from = (
            peaks,
            expansion,
            None if section is None else section.peculiar_velocity,
            *((g.matrix, g.key, g.adds) for g in (magnitudes, velocity) if g is not None),
        )
        return self._once(
            "supernovae together",
            made_from,
            lambda: supernovae_together(
                peaks,
                expansion,
                section,
                magnitudes,
                velocity,
                same_table=len(tables) == 2 and tables[0] == tables[1],
            ),
        )

    def anchors(self, used: Sequence[AnchorInUse]) -> FloatArray | None:
        """The covariance of the geometric anchors in use, if one is given."""
        section = self.choices.anchors
        if section.covariance is None or not used:
            return None
        given = self.matrix("anchors.covariance", section.covariance)
        names = [anchor.name for anchor in used]
        errors = np.array([anchor.error for anchor in used])
        made_from = (tuple(section.geometric), tuple(names), *errors, given.matrix, given.adds)
        return self._once(
            "anchors together",
            made_from,
            lambda: anchors_together(tuple(section.geometric), names, errors, given),
        )

    def matrix(self, key: str, choice: Covariance) -> Given:
        """A covariance matrix, read once."""
        base = self.before.base
        names = None if choice.names is None else base / choice.names
        earlier = self.made.get(key)
        if earlier is None or earlier[0] != (choice.file, choice.names):
            if choice.file == IN_MEMORY:
                raise InputError(
                    Problem(
                        found="no matrix of that key in memory",
                        expected="a matrix",
                        remedy="write it to a file and name the file",
                        key=f"{key}.file",
                    )
                )
            found = read_covariance(base / choice.file, names, key)
            self.made[key] = ((choice.file, choice.names), found)
        found = cast("Matrix", self.made[key][1])
        self.sources[key] = Source(choice.file, found.sha256[0], len(found))
        if choice.names is not None:
            self.sources[f"{key}.names"] = Source(choice.names, found.sha256[1], len(found))
        return Given(found, key, choice.adds)

    def _once(self, key: str, made_from: tuple[Any, ...], make: Callable[[], T]) -> T:
        """What `make` gives; the earlier one if it was made from the same."""
        earlier = self.made.get(key)
        if earlier is None or earlier[0] != made_from:
            self.made[key] = (made_from, make())
        return cast("T", self.made[key][1])


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
