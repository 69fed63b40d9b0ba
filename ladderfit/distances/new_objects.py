"""New Cepheids and supernovae as a calibration's choices see them: a ladder without an anchor."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

from ladderfit import schema
from ladderfit.assembly import Parts
from ladderfit.choices import Cepheids, Choices, Supernovae
from ladderfit.choices.stars import STAR_ROLES
from ladderfit.errors import InputError, Problem, nearest, raise_if
from ladderfit.inputs.select_stars import CepheidSelection, select_cepheids
from ladderfit.inputs.select_supernovae import PeakSelection, select_peaks
from ladderfit.inputs.table_files import read_table
from ladderfit.inputs.table_memory import table_in_memory
from ladderfit.inputs.tables import DataTable
from ladderfit.ladder import Ladder
from ladderfit.samples import Kept

Kind = Literal["cepheids", "supernovae"]

MAY_DIFFER = (  # of a new table: where things stand in it, and which of its stars take part
    "cepheids.columns",
    "cepheids.magnitude.bands",
    "cepheids.magnitude.errors",
    "cepheids.periods",
    "supernovae.columns",
)
_WORDS = {"cepheids": "Cepheids", "supernovae": "supernovae in hosts"}


@dataclass(frozen=True, eq=False)
class NewObjects:
    """What is new, and what was left out.

    Attributes
    ----------
    ladder : Ladder
        Of the new objects alone: no anchor, no parallax stars, no expansion.
    kept : mapping of str to Kept
        By section.
    notes : tuple of str
    """

    ladder: Ladder
    kept: Mapping[str, Kept]
    notes: tuple[str, ...]


def new_objects(
    choices: Choices, tables: Sequence[Any], changes: Mapping[str, Any] | None = None
) -> NewObjects:
    """Read tables of new objects by a calibration's choices.

    Parameters
    ----------
    choices : Choices
        Of the calibration.
    tables : sequence of path or table
        At most one of Cepheids and one of supernovae.
    changes : mapping of str to value, optional
        Dotted keys, among those in `MAY_DIFFER` or below them.

    Raises
    ------
    InputError
        With one problem for each thing that does not fit.
    """
    wanted = _for_new_tables(choices, changes or {})
    found: dict[Kind, DataTable] = {}
    for table in tables:
        data = _read(table)
        kind = _kind(data, wanted)
        if kind in found:
            raise InputError(_second(data, kind, found[kind]))
        found[kind] = data
    if not found:
        raise InputError(Problem("no table", "a table of new objects", "name one"))
    return _selected(wanted, found)


def _read(table: Any) -> DataTable:
    if isinstance(table, str | Path):
        return read_table(Path(table), "")
    return table_in_memory(table, "new objects")


def _for_new_tables(choices: Choices, changes: Mapping[str, Any]) -> Choices:
    """The choices with nothing but relation and new tables in them."""
    raise_if([_not_open(key) for key in changes if not _open(key)])
    choices = _changed(choices, dict(changes))
    cepheids = choices.cepheids
    if cepheids is not None:
        cepheids = dataclasses.replace(cepheids, table="", set_aside=(), shortest={})
    supernovae = choices.supernovae
    if supernovae is not None:
        supernovae = dataclasses.replace(supernovae, table="", set_aside=(), covariance=None)
    anchors = dataclasses.replace(choices.anchors, geometric={}, shared_errors={}, covariance=None)
    return dataclasses.replace(
        choices, cepheids=cepheids, supernovae=supernovae, anchors=anchors, expansion=None
    )


def _changed(choices: Choices, changes: dict[str, Any]) -> Choices:
    """The choices with keys changed; Cepheids like the parallax stars where there are no others."""
    like = None if choices.cepheids is not None else _like_parallaxes(choices)
    if like is not None:
        mapping: dict[str, Any] = schema.written(like)
        for key in [key for key in changes if schema.split(key)[0] == "cepheids"]:
            within = ".".join(schema.join("", part) for part in schema.split(key)[1:])
            mapping = schema.with_value(mapping, within, changes.pop(key))
        if "host" not in mapping["columns"]:
            return dataclasses.replace(choices.change(changes), cepheids=like)
        changes["cepheids"] = mapping
    return choices.change(changes) if changes else choices


def _open(key: str) -> bool:
    return any(key == known or key.startswith(f"{known}.") for known in MAY_DIFFER)


def _not_open(key: str) -> Problem:
    return Problem(
        found="a choice that was made when the calibration was drawn",
        expected=f"a key among {', '.join(MAY_DIFFER)}, or below one of them",
        remedy=nearest(key, MAY_DIFFER),
        key=key,
    )


def _like_parallaxes(choices: Choices) -> Cepheids | None:
    """What Cepheids in galaxies look like where a calibration had parallax stars alone."""
    stars = choices.anchors.parallaxes
    if stars is None or stars.magnitude is None:
        return None
    columns = {role: name for role, name in stars.columns.items() if role in STAR_ROLES}
    return Cepheids(
        table="",
        columns=columns,
        magnitude=stars.magnitude,
        periods=stars.periods,
        overtones=stars.overtones,
        conversion=stars.conversion,
    )


def _needed(kind: Kind, choices: Choices) -> dict[str, str]:
    """The columns that a table of a kind must have, by what they hold."""
    section = getattr(choices, kind)
    if section is None:
        return {}
    if isinstance(section, Supernovae):
        return dict(section.columns)
    metallicity = choices.relation.metallicity != "none"
    columns = {
        role: name
        for role, name in section.columns.items()
        if metallicity or not role.startswith("metallicity")
    }
    columns.setdefault("host", "")
    magnitude = section.magnitude
    return columns | {name: magnitude.bands[name] for name in magnitude.used}


def _kind(table: DataTable, choices: Choices) -> Kind:
    """What a table holds, told by its columns."""
    missing: dict[Kind, list[str]] = {}
    kinds: tuple[Kind, ...] = ("cepheids", "supernovae")
    for kind in kinds:
        needed = _needed(kind, choices)
        if needed:
            missing[kind] = [r for r, name in needed.items() if name not in table.columns]
    fitting = [kind for kind, absent in missing.items() if not absent]
    if len(fitting) == 1:
        return fitting[0]
    if len(fitting) == 2:
        raise InputError(
            Problem(
                found="columns of Cepheids and of supernovae",
                expected="a table of one kind",
                remedy="split it in two",
                file=table.name,
            )
        )
    raise InputError(_strange(table, missing, choices))


def _strange(
    table: DataTable, missing: Mapping[Kind, Sequence[str]], choices: Choices
) -> list[Problem]:
    """What the nearest kind of table would still need."""
    if not missing:
        found = "a calibration without Cepheids and supernovae in hosts"
        return [Problem(found, "one with either", "name another result", file=table.name)]
    kind = min(missing, key=lambda each: len(missing[each]) / len(_needed(each, choices)))
    needed = _needed(kind, choices)
    place = f"{kind}.magnitude.bands" if kind == "cepheids" else f"{kind}.columns"
    problems = []
    for role in missing[kind]:
        own = f"{kind}.columns" if role in (*STAR_ROLES, "host") else place
        name = needed[role]
        problems.append(
            Problem(
                found=f"no column {name!r} ({role})" if name else f"no column named for the {role}",
                expected=f"the columns of the calibration's {_WORDS[kind]}",
                remedy=f"name it with --set {own}.{role}=NAME; "
                f"{nearest(name or role, table.columns)}",
                file=table.name,
            )
        )
    return problems


def _second(table: DataTable, kind: Kind, first: DataTable) -> Problem:
    return Problem(
        found=f"a second table of {_WORDS[kind]}, after {first.name}",
        expected="one table of a kind",
        remedy="put both into one table",
        file=table.name,
    )


def _selected(choices: Choices, found: Mapping[Kind, DataTable]) -> NewObjects:
    cepheids: CepheidSelection | None = None
    peaks: PeakSelection | None = None
    problems: list[Problem] = []
    if "cepheids" in found and choices.cepheids is not None:
        term = choices.relation.metallicity != "none"
        try:
            cepheids = select_cepheids(found["cepheids"], choices.cepheids, metallicity=term)
        except InputError as error:
            problems.extend(error.problems)
    if "supernovae" in found and choices.supernovae is not None:
        try:
            peaks = _peaks(found["supernovae"], choices, choices.supernovae, cepheids)
        except InputError as error:
            problems.extend(error.problems)
    raise_if(problems)
    selections = {"cepheids": cepheids, "supernovae": peaks}
    kept = {key: selection.kept for key, selection in selections.items() if selection}
    notes = tuple(note for each in selections.values() if each for note in each.notes)
    hosts = peaks.hosts if peaks else cepheids.hosts if cepheids else ()
    ladder = Ladder(
        choices=choices,
        path=None,
        hosts=hosts,
        cepheids=cepheids.sample if cepheids else None,
        parallax_stars=None,
        peaks=peaks.sample if peaks else None,
        flow=None,
        velocities=None,
        geometric=(),
        anchor_covariance=None,
        peak_covariance=None,
        kept=kept,
        notes=notes,
        sources={},
        _parts=Parts(Path(), {}, {}),
    )
    return NewObjects(ladder, kept, notes)


def _peaks(
    table: DataTable,
    choices: Choices,
    section: Supernovae,
    cepheids: CepheidSelection | None,
) -> PeakSelection:
    if "peak_error" not in section.columns:
        raise InputError(
            Problem(
                found="no column of errors: the calibration's came from its covariance",
                expected="an error of each new peak",
                remedy="name their column with --set supernovae.columns.peak_error=NAME",
                file=table.name,
            )
        )
    everywhere = dict.fromkeys(table.texts(section.columns["host"]).known, True)
    return select_peaks(table, section, cepheids, everywhere, choices.peak_relation)
