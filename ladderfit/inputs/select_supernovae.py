"""From tables of supernovae, or of distances and velocities, to samples."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd

from ladderfit.choices import Expansion, PeakRelation, Supernovae
from ladderfit.errors import Problem, nearest, raise_if
from ladderfit.inputs.kinds import DISTANCE, MAGNITUDE, REDSHIFT, VELOCITY
from ladderfit.inputs.peaks import KINDS, InputColumns
from ladderfit.inputs.rows import Rows, floats, integers
from ladderfit.inputs.select_stars import CepheidSelection
from ladderfit.inputs.tables import DataTable, Texts, shown
from ladderfit.samples import FloatArray, FlowSample, Kept, PeakSample, TextArray, VelocitySample

_KINDS = {
    "peak": MAGNITUDE,
    "peak_error": MAGNITUDE,
    "redshift": REDSHIFT,
    "redshift_heliocentric": REDSHIFT,
    "distance": DISTANCE,
    "velocity": VELOCITY,
    "peculiar_velocity_error": VELOCITY,
    **KINDS,
}
_NO_TERMS = PeakRelation()


@dataclass(frozen=True, eq=False)
class PeakSelection:
    """Kept supernovae; `hosts` is the ladder's list, `notes` say what was set aside.

    `names` holds the name in every row of the table, kept or not.
    """

    sample: PeakSample
    names: TextArray
    hosts: tuple[str, ...]
    seen: tuple[str, ...]
    kept: Kept
    notes: tuple[str, ...]


@dataclass(frozen=True, eq=False)
class ExpansionSelection:
    """Kept objects of the expansion: one of the two samples, and every row's name."""

    names: TextArray
    flow: FlowSample | None
    velocities: VelocitySample | None
    kept: Kept


def select_peaks(
    table: DataTable,
    section: Supernovae,
    cepheids: CepheidSelection | None,
    anchors: Mapping[str, bool],
    relation: PeakRelation = _NO_TERMS,
) -> PeakSelection:
    """The supernovae whose host has a Cepheid or an anchor in use.

    Parameters
    ----------
    table : DataTable
        Their table.
    section : Supernovae
        Their choices.
    cepheids : CepheidSelection or None
        The Cepheids that take part.
    anchors : mapping of str to bool
        Every geometric anchor, and whether it is in use.
    relation : PeakRelation, optional
        The terms whose columns are read.

    Raises
    ------
    InputError
        If the table does not fit the choices, a host is unknown, or nothing is left.
    """
    rows, columns = Rows(table, "supernovae"), section.columns
    raise_if(rows.faults(columns, _KINDS))
    name, host = table.texts(columns["name"]), table.texts(columns["host"])
    rows.set_aside(section.set_aside, name, "name", host)
    rows.need(name, "name", columns["name"])
    rows.need(host, "host", columns["host"])
    peak = rows.number("peak", columns["peak"], MAGNITUDE)
    replaced = section.covariance is not None and not section.covariance.adds
    variance = _variance(rows, columns, needed=not replaced)
    inputs = InputColumns(rows, columns, relation)
    rows.unique("the supernova", {"name": name, "host": host, "peak": peak}, columns["name"])
    known = {*(cepheids.seen if cepheids else ()), *anchors}
    _unknown_hosts(rows, host, known, columns["host"])
    usable = {*(cepheids.hosts if cepheids else ()), *(a for a, use in anchors.items() if use)}
    stranded = host.each([label not in usable for label in host.labels])
    notes = _notes_on(host.labels[host.codes[stranded & rows.open]], cepheids)
    rows.leave_out(stranded, "in a host without Cepheid or anchor in use", "table")
    left, kept = rows.finish("supernova in a host with a Cepheid or an anchor in use")
    theirs = [str(label) for label in host.labels[host.codes[left]]]
    hosts = list(dict.fromkeys([*(cepheids.hosts if cepheids else ()), *theirs]))
    index = {label: number for number, label in enumerate(hosts)}
    sample = PeakSample(
        name=name.values[left],
        host=integers([index[label] for label in theirs]),
        magnitude=floats(peak[left]),
        variance=floats(variance[left]),
        row=integers(left + 1),
        inputs=inputs.taken(left),
    )
    return PeakSelection(sample, name.values, tuple(hosts), tuple(host.known), kept, notes)


def _variance(rows: Rows, columns: Mapping[str, str], *, needed: bool) -> FloatArray:
    """Squared errors of the peaks; zero where a covariance stands in their place."""
    if not needed:
        return np.zeros(rows.table.rows)
    return rows.number("peak_error", columns["peak_error"], MAGNITUDE, above=0.0) ** 2


def _unknown_hosts(rows: Rows, host: Texts, known: set[str], column: str) -> None:
    for label in host.known:
        here = np.flatnonzero(host.equal(label) & rows.judged)
        if label in known or not here.size:
            continue
        rows.problems.append(
            Problem(
                found=f"the unknown host {shown(label)}",
                expected="a host of the Cepheids, or one with a geometric anchor",
                remedy=nearest(label, known) if known else "add Cepheids or an anchor",
                file=rows.table.name,
                row=int(here[0]) + 1,
                column=column,
            )
        )


def _notes_on(hosts: Iterable[str], cepheids: CepheidSelection | None) -> tuple[str, ...]:
    counts = pd.Series(list(hosts), dtype=object).value_counts(sort=False)
    notes = []
    for host, count in counts.items():
        seen = cepheids is not None and host in cepheids.seen
        reason = "no Cepheid left after the cuts" if seen else "no Cepheid and no anchor in use"
        words = "its supernova is" if count == 1 else f"its {count} supernovae are"
        notes.append(f"{host}: {reason}; {words} set aside")
    return tuple(notes)


def select_expansion(
    table: DataTable,
    section: Expansion,
    *,
    errors: bool = True,
    relation: PeakRelation = _NO_TERMS,
) -> ExpansionSelection:
    """The objects of the expansion that take part, in the order of their table.

    Parameters
    ----------
    table : DataTable
    section : Expansion
    errors : bool
        Whether the table's errors of the peaks are used, not a covariance in their place.
    relation : PeakRelation, optional
        The terms of the peaks whose columns are read.

    Raises
    ------
    InputError
        If the table does not fit the choices, or nothing is left.
    """
    rows, columns = Rows(table, "expansion"), section.columns
    raise_if(rows.faults(columns, _KINDS))
    name = table.texts(columns["name"])
    rows.set_aside(section.set_aside, name, "name")
    rows.need(name, "name", columns["name"])
    if section.linear:
        return _velocities(rows, name, columns)
    return _flow(rows, name, section, relation, errors=errors)


def _velocities(rows: Rows, name: Texts, columns: Mapping[str, str]) -> ExpansionSelection:
    distance = rows.number("distance", columns["distance"], DISTANCE, above=0.0)
    velocity = rows.number("velocity", columns["velocity"], VELOCITY)
    rows.unique(
        "the object", {"name": name, "distance": distance, "velocity": velocity}, columns["name"]
    )
    left, kept = rows.finish("object with a distance and a velocity")
    sample = VelocitySample(
        name=name.values[left],
        distance=floats(distance[left]),
        velocity=floats(velocity[left]),
        row=integers(left + 1),
    )
    return ExpansionSelection(name.values, None, sample, kept)


def _flow(
    rows: Rows, name: Texts, section: Expansion, relation: PeakRelation, *, errors: bool
) -> ExpansionSelection:
    columns = section.columns
    redshift = rows.number("redshift", columns["redshift"], REDSHIFT, above=0.0)
    observed = redshift
    if "redshift_heliocentric" in columns:
        observed = rows.number(
            "redshift_heliocentric", columns["redshift_heliocentric"], REDSHIFT, above=-1.0
        )
    peak = rows.number("peak", columns["peak"], MAGNITUDE)
    variance = _variance(rows, columns, needed=errors)
    inputs = InputColumns(rows, columns, relation)
    velocity_error = None
    if "peculiar_velocity_error" in columns:
        role = "peculiar_velocity_error"
        velocity_error = rows.number(role, columns[role], VELOCITY, above=0.0)
    rows.unique(
        "the supernova", {"name": name, "redshift": redshift, "peak": peak}, columns["name"]
    )
    low, high = section.redshifts
    rows.leave_out((redshift < low) | (redshift > high), "outside the redshift range", "redshifts")
    left, kept = rows.finish("supernova in the redshift range")
    sample = FlowSample(
        name=name.values[left],
        redshift=floats(redshift[left]),
        redshift_heliocentric=floats(observed[left]),
        magnitude=floats(peak[left]),
        variance=floats(variance[left]),
        row=integers(left + 1),
        peculiar_velocity_error=None if velocity_error is None else floats(velocity_error[left]),
        inputs=inputs.taken(left),
    )
    return ExpansionSelection(name.values, sample, None, kept)
