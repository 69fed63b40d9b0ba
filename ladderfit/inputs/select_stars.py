"""From tables of Cepheids to the samples a fit sees."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from ladderfit.choices import Cepheids, Magnitude, Parallaxes
from ladderfit.errors import raise_if
from ladderfit.inputs.hosts import (
    HostValues,
    cut_hosts,
    cut_limits,
    host_values,
    require_host_columns,
)
from ladderfit.inputs.kinds import MAGNITUDE
from ladderfit.inputs.parallaxes import (
    KINDS,
    limit_column,
    parallax_notes,
    parallax_values,
    used_columns,
)
from ladderfit.inputs.rows import Rows, floats, integers
from ladderfit.inputs.star_values import (
    StarValues,
    conversion_notes,
    cut_stars,
    require_stars,
    star_columns,
    star_values,
)
from ladderfit.inputs.tables import DataTable, Texts
from ladderfit.samples import FloatArray, IntArray, Kept, Photometry, StarSample, frozen

_SAME_NAME = (
    "remove, rename or set aside one of the two; "
    "or leave columns.star out, where the stars have no names of their own"
)


@dataclass(frozen=True, eq=False)
class CepheidSelection:
    """Kept Cepheids; `hosts` are theirs by first appearance, `seen` all in the table."""

    sample: StarSample
    hosts: tuple[str, ...]
    seen: tuple[str, ...]
    kept: Kept
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False)
class ParallaxSelection:
    """Kept parallax stars."""

    sample: StarSample
    kept: Kept
    notes: tuple[str, ...] = ()


def select_cepheids(table: DataTable, section: Cepheids, *, metallicity: bool) -> CepheidSelection:
    """The Cepheids that take part, sorted by host.

    Parameters
    ----------
    table : DataTable
        Their table.
    section : Cepheids
        Their choices.
    metallicity : bool
        Whether the relation has a metallicity term.

    Raises
    ------
    InputError
        If the table does not fit the choices, or nothing is left.
    """
    rows = Rows(table, "cepheids")
    columns = star_columns(section.columns, metallicity=metallicity)
    require_stars(rows, columns, section.magnitude, "cepheids.magnitude")
    require_host_columns(rows, section)
    star, host = _star_names(table, columns), table.texts(columns["host"])
    rows.set_aside(section.set_aside, star, "star", host)
    rows.need(star, "star", columns.get("star"))
    rows.need(host, "host", columns["host"])
    rows.unique("the star", {"star": star, "host": host}, columns.get("star"), _SAME_NAME)
    values = star_values(rows, columns, section, section.magnitude)
    of_hosts = host_values(rows, section, host)
    system = cut_stars(rows, columns, section, values)
    cut_hosts(rows, section, host, values.period)
    cut_limits(rows, section, of_hosts)
    left, kept = rows.finish("Cepheid")
    codes, present = pd.factorize(host.codes[left])
    order = np.argsort(codes, kind="stable")
    sample = _star_sample(star, values, left[order], codes[order], system, section.overtones)
    sample = _with_host_values(sample, of_hosts, left[order])
    return CepheidSelection(
        sample,
        tuple(str(host.labels[code]) for code in present),
        tuple(host.known),
        kept,
        conversion_notes(section, values, left),
    )


def select_parallax_stars(
    table: DataTable, section: Parallaxes, magnitude: Magnitude, *, metallicity: bool
) -> ParallaxSelection:
    """The parallax stars that take part, in the order of their table.

    Raises
    ------
    InputError
        If the table does not fit the choices, or nothing is left.
    """
    key = "anchors.parallaxes"
    rows = Rows(table, key)
    columns = used_columns(section, star_columns(section.columns, metallicity=metallicity))
    place = "cepheids.magnitude" if section.magnitude is None else f"{key}.magnitude"
    require_stars(rows, columns, magnitude, place, KINDS)
    limited = limit_column(section, magnitude)
    raise_if(rows.faults(limited, dict.fromkeys(limited, MAGNITUDE), f"{key}.selection.band"))
    star = _star_names(table, columns)
    rows.set_aside(section.set_aside, star, "star")
    rows.need(star, "star", columns.get("star"))
    rows.unique("the star", {"star": star}, columns.get("star"), _SAME_NAME)
    values = star_values(rows, columns, section, magnitude)
    measured = parallax_values(rows, columns, section, magnitude)
    system = cut_stars(rows, columns, section, values)
    left, kept = rows.finish("parallax star")
    nowhere = np.full(left.size, -1, dtype=np.int64)
    sample = replace(
        _star_sample(star, values, left, nowhere, system, section.overtones),
        parallax=floats(measured.parallax[left]),
        parallax_error=floats(measured.error[left]),
        extras=measured.extras(left),
    )
    notes = (
        *conversion_notes(section, values, left),
        *parallax_notes(section, columns, star, measured, left),
    )
    return ParallaxSelection(sample, kept, notes)


def _star_names(table: DataTable, columns: Mapping[str, str]) -> Texts:
    return table.texts(columns["star"]) if "star" in columns else table.row_numbers()


def _star_sample(
    star: Texts,
    values: StarValues,
    left: IntArray,
    host: npt.ArrayLike,
    system: Texts | None,
    overtones: str,
) -> StarSample:
    def taken(array: FloatArray | None) -> FloatArray | None:
        return None if array is None else floats(array[left])

    return StarSample(
        star=star.values[left],
        host=integers(host),
        log_period=floats(values.log_period[left]),
        magnitude=floats(values.magnitude[left]),
        variance=floats(values.variance[left]),
        metallicity=floats(values.metallicity[left]),
        row=integers(left + 1),
        overtone=frozen(values.overtone[left], bool) if overtones == "offset" else None,
        system=None if system is None else frozen(system.values[left], np.str_),
        log_period_error=taken(values.log_period_error),
        metallicity_error=taken(values.metallicity_error),
        photometry=_taken_photometry(values.photometry, left),
    )


def _with_host_values(sample: StarSample, values: HostValues, left: IntArray) -> StarSample:
    headroom, loadings = values.headroom, values.loadings
    return replace(
        sample,
        headroom=None if headroom is None else floats(headroom[left]),
        loadings=None if loadings is None else floats(loadings[left]),
    )


def _taken_photometry(whole: Photometry | None, left: IntArray) -> Photometry | None:
    if whole is None:
        return None
    parts = {part.name: getattr(whole, part.name) for part in fields(whole)}
    taken: dict[str, Any] = {
        name: None if values is None else floats(values[left]) for name, values in parts.items()
    }
    return replace(whole, **taken)
