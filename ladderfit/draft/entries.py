"""From what was told of each table to the keys of a ladder file."""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping
from pathlib import Path

import numpy as np

from ladderfit.draft.facts import Facts
from ladderfit.draft.jobs import (
    CEPHEIDS,
    EXPANSION,
    GEOMETRIC,
    PARALLAXES,
    SUPERNOVAE,
    Sketch,
)
from ladderfit.draft.light_curves import peak_relation_entries
from ladderfit.draft.magnitudes import Photometry
from ladderfit.draft.roles import Choice
from ladderfit.draft.text import Entry
from ladderfit.inputs.kinds import MAGNITUDE
from ladderfit.inputs.tables import DataTable
from ladderfit.samples import IntArray
from ladderfit.schema import UNDECIDED

Found = Mapping[str, tuple[Path, Sketch]]

_SOLAR_OXYGEN = 8.69  # 12+log(O/H) of the Sun (Asplund et al. 2009, ARA&A 47, 481)


def entries(found: Found, tables: Mapping[Path, DataTable], folder: Path) -> Iterator[Entry]:
    """Every key of the draft, section by section."""
    title = f"Draft from {', '.join(path.name for path, _ in found.values())}"
    yield Entry((), "title", Choice(title))
    for job, (path, sketch) in found.items():
        if job == GEOMETRIC:
            yield from anchor_entries(sketch, tables[path], hosts_of(found))
            continue
        section = tuple(job.split("."))
        yield Entry(
            section, "table", Choice(_relative(path, folder), f"{tables[path].rows:,} rows")
        )
        yield from _section(job, section)
        for role, choice in sketch.columns.items():
            yield Entry((*section, "columns"), role, choice)
        if sketch.photometry is not None and not _shared(job, found):
            yield from _magnitude(sketch.photometry, (*section, "magnitude"))
        if job == _last_of_stars(found):
            yield from _relation(found)
    peaks = {job: found[job][1].columns for job in (SUPERNOVAE, EXPANSION) if job in found}
    yield from peak_relation_entries({j: c for j, c in peaks.items() if "peak" in c})


def _relative(path: Path, folder: Path) -> str:
    try:
        return Path(os.path.relpath(path, folder)).as_posix()
    except ValueError:  # on another drive
        return path.resolve().as_posix()


def _section(job: str, section: tuple[str, ...]) -> Iterator[Entry]:
    """Choices that no table can tell."""
    if job == PARALLAXES:
        text = f"{UNDECIDED} true if a zero-point recipe is applied already, false to apply one?"
        yield Entry(section, "corrected", Choice(text))
        yield Entry(section, "distance_prior", Choice("flat in modulus", "or uniform in volume"))


def _last_of_stars(found: Found) -> str:
    return PARALLAXES if PARALLAXES in found else CEPHEIDS


def _shared(job: str, found: Found) -> bool:
    """Whether parallax stars have the Cepheids' magnitude, column by column."""
    if job != PARALLAXES or CEPHEIDS not in found:
        return False
    mine, theirs = (found[key][1].photometry for key in (PARALLAXES, CEPHEIDS))
    return mine is not None and theirs is not None and _values(mine) == _values(theirs)


def _values(light: Photometry) -> object:
    def plain(choices: Mapping[str, Choice]) -> dict[str, object]:
        return {name: choice.value for name, choice in choices.items()}

    band = None if light.band is None else light.band.value
    return plain(light.bands), plain(light.errors), band, plain(light.wesenheit)


def _magnitude(light: Photometry, section: tuple[str, ...]) -> Iterator[Entry]:
    if light.band is not None:
        yield Entry(section, "band", light.band)
    for key, choice in light.wesenheit.items():
        yield Entry((*section, "wesenheit"), key, choice)
    for name, choice in light.bands.items():
        yield Entry((*section, "bands"), name, choice)
    for name, choice in light.errors.items():
        yield Entry((*section, "errors"), name, choice)
    if not light.bands:
        text = f"{UNDECIDED} no column looks like a magnitude"
        yield Entry((*section, "bands"), "H", Choice(text))
        yield Entry((*section, "errors"), "H", Choice(text))


def _relation(found: Found) -> Iterator[Entry]:
    section = ("relation",)
    yield Entry(section, "pivot", Choice(10.0, "d; the zero point is stated here"))
    stars = [found[job] for job in (CEPHEIDS, PARALLAXES) if job in found]
    without = [path.name for path, sketch in stars if "metallicity" not in sketch.columns]
    if without:
        why = f"no column of {' and '.join(without)} looks like a metallicity"
        yield Entry(section, "metallicity", Choice("none", why))
        return
    scales = [_scale(sketch.roles.decided("metallicity")) for _, sketch in stars]
    known = list(dict.fromkeys(scale for scale in scales if scale is not None))
    if len(known) > 1:
        text = f"{UNDECIDED} {' in one table, '.join(known)} in the other: bring them to one scale"
        yield Entry((*section, "metallicity"), "scale", Choice(text))
        text = f"{UNDECIDED} the metallicity at which the zero point is stated"
        yield Entry((*section, "metallicity"), "reference", Choice(text))
        return
    yield from _metallicity(known[0] if known else None, (*section, "metallicity"))


def _scale(column: Facts | None) -> str | None:
    """The scale of a metallicity, by its values and its name."""
    if column is None or column.numbers is None:
        return None
    if float(np.median(column.numbers)) > 5.0:
        return "12+log(O/H)"
    return "[Fe/H]" if "fe" in column.stem else "[M/H]" if column.stem == "mh" else None


def _metallicity(scale: str | None, section: tuple[str, ...]) -> Iterator[Entry]:
    if scale is None:
        yield Entry(section, "scale", Choice(f"{UNDECIDED} [Fe/H], [O/H] or 12+log(O/H)?"))
        text = f"{UNDECIDED} the metallicity at which the zero point is stated"
        yield Entry(section, "reference", Choice(text))
    elif scale == "12+log(O/H)":
        yield Entry(section, "scale", Choice(scale, "by its values"))
        why = "dex; the zero point is stated here: solar (Asplund et al. 2009)"
        yield Entry(section, "reference", Choice(_SOLAR_OXYGEN, why))
    else:
        yield Entry(section, "scale", Choice(scale, "by its name"))
        yield Entry(section, "reference", Choice(0.0, "dex; the zero point is stated here: solar"))


def hosts_of(found: Found) -> frozenset[str]:
    """Galaxies that the tables of Cepheids and supernovae name."""
    names: set[str] = set()
    for job in (CEPHEIDS, SUPERNOVAE):
        if job in found:
            column = found[job][1].roles.decided("host")
            names.update(() if column is None else column.labels)
    return frozenset(names)


def anchor_entries(sketch: Sketch, table: DataTable, hosts: frozenset[str]) -> Iterator[Entry]:
    """One anchor for each galaxy of a table of moduli; `hosts` are those of other tables."""
    host = sketch.columns["host"]
    if host.undecided:
        text = f"{UNDECIDED} the galaxies' names stand in {', '.join(host.offers) or 'no column'}"
        yield Entry(("anchors",), "geometric", Choice(text))
        return
    names = table.texts(str(host.value))
    for name in names.known:
        rows = np.flatnonzero(names.equal(name))
        section = ("anchors", "geometric", name)
        for key, role in (("modulus", "modulus"), ("error", "modulus_error")):
            yield Entry(section, key, _cell(sketch, table, role, rows))
        if hosts and name not in hosts:
            yield Entry(section, "use", Choice(False, "no other table has this galaxy"))


def _cell(sketch: Sketch, table: DataTable, role: str, rows: IntArray) -> Choice:
    """The value of a galaxy, or the values it may have."""
    choice = sketch.columns.get(role)
    words = role.replace("_", " ")
    if choice is None or (choice.undecided and not choice.offers):
        return Choice(f"{UNDECIDED} no column looks like the {words}")
    columns = choice.offers or (str(choice.value),)
    values = [
        (f"{value:.6g} ({column})", float(value))
        for column in columns
        for value in table.numbers(column, MAGNITUDE).values[rows]
        if np.isfinite(value)
    ]
    if len(values) == 1 and not choice.undecided:
        return Choice(values[0][1], f"mag; {columns[0]}")
    if not values:
        return Choice(f"{UNDECIDED} the {words} is missing in the table")
    return Choice(
        f"{UNDECIDED} {' or '.join(text for text, _ in values)}?",
        offers=tuple(f"{value:.6g}" for _, value in values),
    )
