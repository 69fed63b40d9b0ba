"""The Ladder: tables and choices, checked against each other and frozen."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np

from ladderfit import schema
from ladderfit.assembly import (
    IN_MEMORY,
    MATRICES,
    SECTIONS,
    AnchorInUse,
    Assembly,
    Parts,
    Source,
    file_key,
)
from ladderfit.choices import Choices
from ladderfit.consistency import star_notes, star_problems
from ladderfit.errors import InputError, Problem, nearest, raise_if
from ladderfit.inputs.correlated import repeated_notes
from ladderfit.inputs.covariances import covariance_in_memory
from ladderfit.inputs.peaks import peak_notes, peak_problems
from ladderfit.inputs.select_stars import CepheidSelection
from ladderfit.inputs.select_supernovae import PeakSelection
from ladderfit.inputs.table_memory import table_in_memory
from ladderfit.inputs.tables import DataTable
from ladderfit.ladder_file import as_written, read_choices
from ladderfit.samples import FloatArray, FlowSample, Kept, PeakSample, StarSample, VelocitySample

__all__ = ["AnchorInUse", "Ladder", "Source", "build_ladder", "read_ladder"]


@dataclass(frozen=True, eq=False, repr=False)
class Ladder:
    """Tables and choices of one calibration, checked; a change returns a copy.

    Attributes
    ----------
    choices : Choices
        Every choice.
    path : Path or None
        The ladder file, if it was read from one.
    hosts : tuple of str
        Hosts that take part: those of kept Cepheids by first appearance, then
        those with an anchor and a supernova only.
    cepheids, parallax_stars, peaks, flow, velocities : samples or None
        The rows that take part; None where a section is absent or not in use.
    geometric : tuple of AnchorInUse
        Anchors in use whose host takes part.
    anchor_covariance : array, shape (n, n), or None
        Of their moduli [mag^2]; None where the errors are independent (but for
        shared ones).
    peak_covariance : array, shape (n, n), or None
        Of peak magnitudes less their prediction, without intrinsic scatter [mag^2]:
        `peaks` first, then `flow`, peculiar velocities included; None where all are
        independent.
    peak_single : array, shape (n,), or None
        The part of its diagonal that comes from single errors [mag^2].
    kept : mapping of str to Kept
        By section: how many rows take part, and why the others do not.
    notes : tuple of str
        What a reader should know about the cuts, in plain sentences.
    sources : mapping of str to Source
        By section: where its table came from.
    """

    choices: Choices
    path: Path | None
    hosts: tuple[str, ...]
    cepheids: StarSample | None
    parallax_stars: StarSample | None
    peaks: PeakSample | None
    flow: FlowSample | None
    velocities: VelocitySample | None
    geometric: tuple[AnchorInUse, ...]
    anchor_covariance: FloatArray | None
    peak_covariance: FloatArray | None
    kept: Mapping[str, Kept]
    notes: tuple[str, ...]
    sources: Mapping[str, Source]
    _parts: Parts = field(repr=False)
    peak_single: FloatArray | None = None

    def __repr__(self) -> str:
        """The title and how much of each table takes part."""
        parts = [
            f"{section} {kept.kept:,} of {kept.total:,}" for section, kept in self.kept.items()
        ]
        return f"<Ladder {self.choices.title!r}: {', '.join(parts)}; {len(self.hosts)} hosts>"

    def change(self, changes: Mapping[str, Any]) -> Ladder:
        """A copy with choices changed; samples of untouched sections are the same objects.

        Parameters
        ----------
        changes : mapping of str to value
            By dotted key, such as ``{"cepheids.periods": [10, 100]}``; None removes a key.

        Raises
        ------
        InputError
            If a key is unknown, a value does not fit, or the tables do not fit the result.
        """
        return _assemble(self.choices.change(changes), self.path, self._parts)

    @property
    def base(self) -> Path:
        """The folder that paths of tables are relative to."""
        return self._parts.base

    @property
    def in_memory(self) -> bool:
        """Whether some table or matrix has no file."""
        tables = any(section for section, _ in self._parts.tables)
        return tables or any(self.sources[key].path == IN_MEMORY for key in self.matrices)

    @property
    def matrices(self) -> dict[str, FloatArray]:
        """The covariance matrices in use as they were read, by dotted key."""
        made = self._parts.made
        return {key: made[key][1].values for key in MATRICES if key in self.sources}

    def table(self, section: str) -> DataTable | None:
        """The table of a section as it was read, all rows; None where there is none."""
        source = self.sources.get(section)
        if source is None:
            return None
        tables = self._parts.tables
        return tables.get((section, source.path)) or tables.get(("", source.path))

    def difference(self, other: Ladder) -> str:
        """How the choices differ, one line per key: ``KEY: other's -> this one's``.

        A line per table says so where the names agree and the contents do not.
        Empty where nothing differs.
        """
        lines = [
            f"{key}: {as_written(before)} -> {as_written(after)}"
            for key, (before, after) in self.choices.difference(other.choices).items()
        ]
        for section, mine in self.sources.items():
            theirs = other.sources.get(section)
            if theirs and theirs.path == mine.path and theirs.sha256 != mine.sha256:
                lines.append(
                    f"{file_key(section)}: the contents differ "
                    f"(SHA-256 {theirs.sha256[:12]} -> {mine.sha256[:12]})"
                )
        return "\n".join(lines)


def read_ladder(path: str | Path) -> Ladder:
    """Read a ladder file and its tables.

    Raises
    ------
    InputError
        With one problem for each thing found wrong in the file or a table.
    """
    path = Path(path)
    choices = read_choices(path)
    try:
        return _assemble(choices, path, Parts(path.parent, {}, {}))
    except InputError as error:
        named = (p if p.file else replace(p, file=str(path)) for p in error.problems)
        raise InputError(named) from error.__cause__


def build_ladder(
    choices: Mapping[str, Any],
    tables: Mapping[str, Any] | None = None,
    base: str | Path | None = None,
) -> Ladder:
    """Build a ladder from a nested mapping and tables in memory.

    Parameters
    ----------
    choices : mapping
        As in a ladder file; `table` may be left out where `tables` has the section.
    tables : mapping of str to table, optional
        By section ("cepheids", "anchors.parallaxes", "supernovae", "expansion"): a
        pandas DataFrame, an astropy Table or QTable, or a mapping of arrays.  A
        covariance ("supernovae.covariance", "expansion.covariance",
        "expansion.velocity_covariance", "anchors.covariance") is an array.
    base : path, optional
        Folder that paths of other tables are relative to; the current one by default.

    Raises
    ------
    InputError
        With one problem for each thing found wrong.
    """
    plain = schema.written(choices)
    folder = Path() if base is None else Path(base)
    problems: list[Problem] = []
    given: dict[tuple[str, str], DataTable] = {}
    made: dict[str, tuple[tuple[Any, ...], Any]] = {}
    for section, value in (tables or {}).items():
        if section in MATRICES:
            plain, matrix = _with_matrix(plain, section, value, folder, problems)
            made |= matrix
            continue
        entry = _entry(plain, section) if section in SECTIONS else None
        if entry is None:
            problems.append(_stray_table(section))
            continue
        if not isinstance(entry.get("table"), str):
            plain = schema.with_value(plain, f"{section}.table", IN_MEMORY)
        try:
            written = entry.get("table", IN_MEMORY)
            given[section, str(written)] = table_in_memory(value, section)
        except InputError as error:
            problems.extend(error.problems)
    raise_if(problems)
    return _assemble(Choices.from_mapping(plain), None, Parts(folder, given, made))


def _with_matrix(
    plain: Mapping[str, Any], key: str, value: Any, folder: Path, problems: list[Problem]
) -> tuple[dict[str, Any], dict[str, tuple[tuple[Any, ...], Any]]]:
    """Choices that name a matrix in memory, and the matrix, as if read before."""
    if _entry(plain, key.rpartition(".")[0]) is None:
        problems.append(_stray_table(key))
        return dict(plain), {}
    entry = {**(_entry(plain, key) or {}), "file": IN_MEMORY}
    names = entry.get("names")
    listed = folder / names if isinstance(names, str) else None
    try:
        matrix = covariance_in_memory(value, key, listed)
    except InputError as error:
        problems.extend(error.problems)
        return dict(plain), {}
    return schema.with_value(plain, key, entry), {key: ((IN_MEMORY, names), matrix)}


def _entry(plain: Mapping[str, Any], section: str) -> Mapping[str, Any] | None:
    entry: Any = plain
    for part in section.split("."):
        entry = entry.get(part) if isinstance(entry, Mapping) else None
    return entry if isinstance(entry, Mapping) else None


def _stray_table(section: str) -> Problem:
    known = section in (*SECTIONS, *MATRICES)
    places = (*SECTIONS, *MATRICES)
    return Problem(
        found=f"a table for {section!r}" + (", which the choices do not have" if known else ""),
        expected="tables for sections of the choices, among " + ", ".join(SECTIONS),
        remedy="add the section to the choices" if known else nearest(section, places),
    )


def _assemble(choices: Choices, path: Path | None, before: Parts) -> Ladder:
    assembly = Assembly(choices, before)
    cepheids = assembly.cepheids()
    parallaxes = assembly.parallaxes()
    peaks = assembly.peaks(cepheids)
    expansion = assembly.expansion()
    raise_if(assembly.problems)
    together = assembly.supernovae(peaks, expansion)
    hosts = peaks.hosts if peaks else cepheids.hosts if cepheids else ()
    seen = {*(cepheids.seen if cepheids else ()), *(peaks.seen if peaks else ())}
    geometric, notes = _anchors_in_use(choices, hosts, seen)
    anchors, correlated = assembly.anchors(geometric), choices.peak_covariance is not None
    if anchors is not None:
        errors = np.sqrt(np.diag(anchors))
        pairs = zip(geometric, errors, strict=True)
        geometric = tuple(replace(anchor, error=float(error)) for anchor, error in pairs)
    samples = [each.sample for each in (cepheids, parallaxes) if each is not None]
    raise_if(list(star_problems(choices, samples, hosts, seen)))
    supernovae = {"supernovae": together.peaks, "expansion": together.flow}
    files = {section: source.path for section, source in assembly.sources.items()}
    raise_if(list(peak_problems(choices, supernovae, files, together.matrix)))
    selections = dict(zip(SECTIONS, (cepheids, parallaxes, peaks, expansion), strict=True))
    return Ladder(
        choices=choices,
        path=path,
        hosts=hosts,
        cepheids=cepheids.sample if cepheids else None,
        parallax_stars=parallaxes.sample if parallaxes else None,
        peaks=together.peaks,
        flow=together.flow,
        velocities=expansion.velocities if expansion else None,
        geometric=geometric,
        anchor_covariance=anchors,
        peak_covariance=together.matrix,
        peak_single=together.single,
        kept={key: selection.kept for key, selection in selections.items() if selection},
        notes=(
            *(f"Cepheids: {note}" for note in (cepheids.notes if cepheids else ())),
            *(f"parallax stars: {note}" for note in (parallaxes.notes if parallaxes else ())),
            *_lost_hosts(cepheids, peaks),
            *(peaks.notes if peaks else ()),
            *notes,
            *(repeated_notes(together.peaks, together.flow) if not correlated else ()),
            *peak_notes(choices, supernovae),
            *star_notes(choices, samples),
        ),
        sources=assembly.sources,
        _parts=Parts(before.base, assembly.tables, assembly.made),
    )


def _anchors_in_use(
    choices: Choices, hosts: tuple[str, ...], seen: set[str]
) -> tuple[tuple[AnchorInUse, ...], list[str]]:
    problems: list[Problem] = []
    notes: list[str] = []
    used: list[AnchorInUse] = []
    index = {host: number for number, host in enumerate(hosts)}
    for name, anchor in choices.anchors.geometric.items():
        if not anchor.use:
            continue
        if name in index:
            used.append(AnchorInUse(index[name], name, anchor.modulus, anchor.error))
        elif name in seen:
            notes.append(f"{name}: nothing is left of it after the cuts; its anchor is left out")
        else:
            problems.append(
                Problem(
                    found="a galaxy that is in no table",
                    expected="a host of the Cepheids or the supernovae",
                    remedy=f"{nearest(name, seen)} or set use = false",
                    key=schema.join("anchors.geometric", name),
                )
            )
    raise_if(problems)
    return tuple(used), notes


def _lost_hosts(cepheids: CepheidSelection | None, peaks: PeakSelection | None) -> list[str]:
    """Hosts of the Cepheid table that no cut left a star, unless a supernova's note says so."""
    if cepheids is None:
        return []
    told = {note.split(":", 1)[0] for note in peaks.notes} if peaks else set()
    lost = [host for host in cepheids.seen if host not in {*cepheids.hosts, *told}]
    return [f"{host}: no Cepheid left after the cuts" for host in lost]
