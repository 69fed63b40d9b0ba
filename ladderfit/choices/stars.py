"""Cepheids: their table and columns, and the magnitude on the left of the relation."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

from ladderfit.choices.columns import (
    Columns,
    Range,
    SetAside,
    column_faults,
    period_faults,
    range_faults,
)
from ladderfit.choices.outliers import Outliers
from ladderfit.choices.photometry import Completeness, SharedTerm
from ladderfit.errors import Problem, nearest
from ladderfit.schema import choice

PeriodRatio = Literal["Feast & Catchpole 1997", "Alcock et al. 1995"]
Overtones = Literal["drop", "offset", "convert"]

STAR_ROLES = (
    "star",
    "period",
    "log_period",
    "period_error",
    "metallicity",
    "metallicity_error",
    "mode",
    "system",
)


@dataclass(frozen=True)
class Wesenheit:
    """W = band - ratio x colour, the colour from two bands or from one colour column."""

    band: str = choice("the band the index is built on, a name from bands")
    colour: tuple[str, ...] | str = choice(
        "two bands, blue first, or the name of one colour column"
    )
    ratio: float = choice("the ratio of total to selective absorption")

    def check(self) -> Iterator[Problem]:
        """A colour needs two bands."""
        if isinstance(self.colour, tuple) and len(self.colour) != 2:
            yield Problem(
                found=f"{len(self.colour)} bands",
                expected="two bands, blue first, or one colour column's name",
                remedy='write colour = ["V", "I"] or colour = "V-I"',
                key="colour",
            )

    @property
    def colour_bands(self) -> tuple[str, ...]:
        """The names whose columns make up the colour (one or two)."""
        return (self.colour,) if isinstance(self.colour, str) else self.colour

    @property
    def bands(self) -> tuple[str, ...]:
        """Every name whose column is needed, each once."""
        return tuple(dict.fromkeys((self.band, *self.colour_bands)))


@dataclass(frozen=True)
class Magnitude:
    """What stands on the left of the relation: one band, or a Wesenheit index.

    `errors` names an error column per band; or ``total`` names one column that
    holds the error of the finished magnitude or index, instead.
    """

    bands: Columns = choice("column of each magnitude or colour [mag]")
    errors: Columns = choice("column of each error [mag], or total = the error of the whole")
    band: str | None = choice("the one band to use", default=None)
    wesenheit: Wesenheit | None = choice("the index to build", default=None)

    @property
    def used(self) -> tuple[str, ...]:
        """Names in `bands` that the choice needs."""
        if self.wesenheit is not None:
            return self.wesenheit.bands
        return (self.band,) if self.band is not None else ()

    @property
    def identity(self) -> str:
        """What the magnitude is, whichever columns it is made of."""
        if self.wesenheit is None:
            return f"the band {self.band}"
        return f"an index on {self.wesenheit.band} with the ratio {self.wesenheit.ratio:g}"

    @property
    def label(self) -> str:
        """For axes and summaries."""
        if self.wesenheit is None:
            return str(self.band)
        colour = self.wesenheit.colour
        text = colour if isinstance(colour, str) else "-".join(colour)
        return f"W = {self.wesenheit.band} - {self.wesenheit.ratio:g} ({text})"

    def check(self) -> Iterator[Problem]:
        """One of band and wesenheit, and a column and an error for all it uses."""
        if (self.band is None) == (self.wesenheit is None):
            yield Problem(
                found="both band and wesenheit" if self.band else "neither band nor wesenheit",
                expected="one of them",
                remedy="remove one" if self.band else 'add band = "H" or wesenheit = {...}',
            )
            return
        key = "band" if self.wesenheit is None else "wesenheit"
        for name in self.used:
            if name not in self.bands:
                yield Problem(
                    found=f"{name!r}, which is not among the bands",
                    expected="names that bands gives a column",
                    remedy=nearest(name, self.bands),
                    key=key,
                )
            if name not in self.errors and "total" not in self.errors:
                yield Problem(
                    found=f"no error column for {name!r}",
                    expected="an error column for each band in use, or total",
                    remedy=f'add {name} = "..." to errors',
                    key="errors",
                )


@dataclass(frozen=True)
class Cepheids:
    """Cepheids in galaxies."""

    table: str = choice("the table of Cepheids, a path relative to this file")
    columns: Columns = choice(
        "column of each role: star (rows are numbered without), host, period or log_period, "
        "period_error, metallicity, metallicity_error, mode, system"
    )
    magnitude: Magnitude = choice("which magnitude the relation is for")
    periods: Range = choice("shortest and longest period [d]", default=(0.0, float("inf")))
    overtones: Overtones = choice(
        "drop overtone pulsators, give them an offset, or convert their periods", default="drop"
    )
    conversion: PeriodRatio = choice(
        "the published period ratio that converts overtone periods",
        default="Feast & Catchpole 1997",
    )
    set_aside: tuple[SetAside, ...] = choice("stars left out by hand", default=())
    shortest: Mapping[str, float] = choice(
        "hosts with a shortest period of their own [d]", default_factory=dict
    )
    completeness: Completeness | None = choice("magnitude limits of the hosts", default=None)
    shared: Mapping[str, SharedTerm] = choice(
        "photometric errors that a host's stars share", default_factory=dict
    )
    outliers: Outliers = choice("how stars off the relation are met", default_factory=Outliers)

    def check(self) -> Iterator[Problem]:
        """Roles and ranges."""
        yield from star_faults(self.columns, ("host",), self.periods, self.overtones)


def star_faults(
    columns: Columns,
    required: tuple[str, ...],
    periods: Range,
    overtones: Overtones,
    others: tuple[str, ...] = (),
) -> Iterator[Problem]:
    """Problems that any section with a table of Cepheids may have."""
    yield from column_faults(columns, required, (*STAR_ROLES, *others))
    yield from period_faults(columns)
    yield from range_faults("periods", periods, " in days", above_zero=True)
    if "metallicity_error" in columns and "metallicity" not in columns:
        yield Problem(
            found="a column of metallicity errors, but none of metallicities",
            expected="both or neither",
            remedy='add metallicity = "..." to columns, or remove metallicity_error',
            key="columns",
        )
    if overtones != "drop" and "mode" not in columns:
        yield Problem(
            found=f"{overtones!r}, but no column that tells overtone pulsators",
            expected="columns.mode",
            remedy='name the column, or set overtones = "drop"',
            key="overtones",
        )
