"""What a table says of parallax stars beyond other Cepheids: sky, clusters, limits, zero point."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from ladderfit.choices import Magnitude, Parallaxes
from ladderfit.errors import Problem
from ladderfit.inputs.kinds import ANGLE, COLOUR, MAGNITUDE, NUMBER, PARALLAX, Kind
from ladderfit.inputs.rows import Rows, floats, integers
from ladderfit.inputs.tables import BoolArray, Texts, and_more
from ladderfit.physics.sky import ecliptic_latitude, galactic
from ladderfit.physics.zero_point import (
    COEFFICIENTS,
    COLOURS,
    FIVE_PARAMETERS,
    MAGNITUDES,
    SIX_PARAMETERS,
    parallax_zero_point,
)
from ladderfit.samples import FloatArray, IntArray, ParallaxExtras

KINDS: dict[str, Kind] = {
    "g_magnitude": MAGNITUDE,
    "nu_eff": COLOUR,
    "pseudocolour": COLOUR,
    "astrometric_params_solved": NUMBER,
    "ecliptic_latitude": ANGLE,
    "ra": ANGLE,
    "dec": ANGLE,
    "l": ANGLE,
    "b": ANGLE,
    "extinction": MAGNITUDE,
}

_SEVERAL = 5  # stars that a note names before it only counts


@dataclass(frozen=True, eq=False)
class ParallaxValues:
    """Every row of a table of parallax stars, shape (n,) each; None where not asked for.

    Attributes
    ----------
    parallax, error : array
        In mas; the zero-point recipe applied.
    outside_magnitude, outside_colour : array of bool or None
        Rows outside the range in which the recipe is stated to hold.
    g_magnitude, longitude, latitude, headroom : array or None
        G [mag]; Galactic coordinates [deg]; limit minus magnitude in its band [mag].
    cluster : Texts or None
    """

    parallax: FloatArray
    error: FloatArray
    outside_magnitude: BoolArray | None
    outside_colour: BoolArray | None
    g_magnitude: FloatArray | None
    longitude: FloatArray | None
    latitude: FloatArray | None
    headroom: FloatArray | None
    cluster: Texts | None

    def extras(self, left: IntArray) -> ParallaxExtras:
        """The same for the rows that are left, clusters numbered."""

        def taken(array: FloatArray | None) -> FloatArray | None:
            return None if array is None else floats(array[left])

        cluster, names = np.full(len(left), -1), []
        if self.cluster is not None:
            for place, row in enumerate(left):
                name = str(self.cluster.values[row]).strip()
                if name and not self.cluster.missing[row]:
                    names += [] if name in names else [name]
                    cluster[place] = names.index(name)
        return ParallaxExtras(
            g_magnitude=taken(self.g_magnitude),
            longitude=taken(self.longitude),
            latitude=taken(self.latitude),
            headroom=taken(self.headroom),
            cluster=integers(cluster) if names else None,
            clusters=tuple(names),
        )


def used_columns(section: Parallaxes, columns: Mapping[str, str]) -> dict[str, str]:
    """The columns that some choice needs; the rest of those for parallax stars is not read."""
    recipe = not section.corrected
    needed = {
        "g_magnitude": recipe or section.offset_slope,
        "nu_eff": recipe,
        "pseudocolour": recipe,
        "astrometric_params_solved": recipe,
        "ecliptic_latitude": recipe,
        "extinction": section.extinction_max is not None,
    }
    ecliptic = "ecliptic_latitude" in columns
    equatorial = "ra" in columns and "dec" in columns
    by_galactic = "l" in columns and "b" in columns
    for role in ("ra", "dec"):
        for_sky = section.needs_sky and not by_galactic
        needed[role] = equatorial and (for_sky or (recipe and not ecliptic))
    for role in ("l", "b"):
        needed[role] = by_galactic and section.needs_sky
    return {role: name for role, name in columns.items() if needed.get(role, True)}


def limit_column(section: Parallaxes, magnitude: Magnitude) -> dict[str, str]:
    """The column in which the selection's limit acts, by the band's name."""
    chosen = section.selection
    if chosen is None or chosen.band is None:
        return {}
    return {chosen.band: magnitude.bands.get(chosen.band, chosen.band)}


def parallax_values(
    rows: Rows, columns: Mapping[str, str], section: Parallaxes, magnitude: Magnitude
) -> ParallaxValues:
    """Read every row, correct the parallaxes if asked, and leave out what lies beyond a limit."""
    parallax = rows.number("parallax", columns["parallax"], PARALLAX)
    error = rows.number("parallax_error", columns["parallax_error"], PARALLAX, above=0.0)
    g = _optional(rows, columns, "g_magnitude")
    outside_magnitude = outside_colour = None
    if not section.corrected:
        zero, outside_magnitude, outside_colour = _recipe(rows, columns, g)
        parallax = parallax - zero
    longitude, latitude = _sky(rows, columns) if section.needs_sky else (None, None)
    cluster = rows.table.texts(columns["cluster"]) if "cluster" in columns else None
    headroom = None
    for band, column in limit_column(section, magnitude).items():
        limit = section.selection.limit if section.selection is not None else None
        if limit is not None:
            headroom = limit - rows.number(band, column, MAGNITUDE)
    values = ParallaxValues(
        parallax,
        error,
        outside_magnitude,
        outside_colour,
        g,
        longitude,
        latitude,
        headroom,
        cluster,
    )
    _cut(rows, columns, section, values)
    return values


def _optional(rows: Rows, columns: Mapping[str, str], role: str) -> FloatArray | None:
    return rows.number(role, columns[role], KINDS[role]) if role in columns else None


def _cut(
    rows: Rows, columns: Mapping[str, str], section: Parallaxes, values: ParallaxValues
) -> None:
    if section.extinction_max is not None:
        extinction = rows.number("extinction", columns["extinction"], MAGNITUDE)
        rows.leave_out(
            extinction > section.extinction_max, "above the extinction limit", "extinction_max"
        )
    chosen = section.selection
    if chosen is not None and values.headroom is not None and chosen.softness == 0.0:
        rows.leave_out(values.headroom < 0.0, "beyond the magnitude limit", "selection.limit")
    if chosen is not None and chosen.parallax_min is not None:
        rows.leave_out(
            values.parallax < chosen.parallax_min,
            "below the least parallax",
            "selection.parallax_min",
        )
    if section.min_signal is not None:
        rows.leave_out(
            values.parallax < section.min_signal * values.error,
            "below the least signal of the parallax",
            "min_signal",
        )


def _sky(rows: Rows, columns: Mapping[str, str]) -> tuple[FloatArray, FloatArray]:
    """Galactic coordinates [deg]."""
    if "l" in columns:
        longitude, latitude = (rows.number(role, columns[role], ANGLE) for role in ("l", "b"))
    else:
        ra, dec = (rows.number(role, columns[role], ANGLE) for role in ("ra", "dec"))
        _check_latitude(rows, columns["dec"], dec)
        return galactic(ra, dec)
    _check_latitude(rows, columns["b"], latitude)
    return longitude, latitude


def _check_latitude(rows: Rows, column: str, values: FloatArray) -> None:
    wrong = np.flatnonzero(rows.judged & (np.abs(values) > 90.0))
    if wrong.size:
        rows.problems.append(
            Problem(
                found=f"{values[wrong[0]]:g}" + and_more(wrong.size - 1),
                expected="-90 to 90 degrees",
                remedy="correct the cell, or name the right column",
                file=rows.table.name,
                row=int(wrong[0]) + 1,
                column=column,
            )
        )


def _recipe(
    rows: Rows, columns: Mapping[str, str], g: FloatArray | None
) -> tuple[FloatArray, BoolArray, BoolArray]:
    """Zero points [mas] after Lindegren et al. (2021), and where they are extrapolated."""
    latitude = _optional(rows, columns, "ecliptic_latitude")
    if latitude is None:
        ra, dec = (rows.number(role, columns[role], ANGLE) for role in ("ra", "dec"))
        _check_latitude(rows, columns["dec"], dec)
        latitude = ecliptic_latitude(ra, np.clip(dec, -90.0, 90.0))
    else:
        _check_latitude(rows, columns["ecliptic_latitude"], latitude)
    solved = _solutions(rows, columns)
    colour = _colours(rows, columns, solved)
    if g is None:  # refused by the choices' own check
        raise TypeError("no G magnitudes")
    found = parallax_zero_point(g, colour, np.clip(latitude, -90.0, 90.0), solved)
    return found.value, found.outside_magnitude, found.outside_colour


def _solutions(rows: Rows, columns: Mapping[str, str]) -> IntArray:
    """Which solution each row has; five parameters where the table does not say."""
    role = "astrometric_params_solved"
    if role not in columns:
        return np.full(rows.table.rows, FIVE_PARAMETERS)
    values = rows.number(role, columns[role], NUMBER)
    odd = ~np.isin(values, tuple(COEFFICIENTS)) & ~np.isnan(values)
    wrong = np.flatnonzero(rows.judged & odd)
    if wrong.size:
        rows.problems.append(
            Problem(
                found=f"{values[wrong[0]]:g}" + and_more(wrong.size - 1),
                expected="31 (five parameters) or 95 (six)",
                remedy="correct the cell, or set the star aside",
                file=rows.table.name,
                row=int(wrong[0]) + 1,
                column=columns[role],
            )
        )
    return np.where(values == SIX_PARAMETERS, SIX_PARAMETERS, FIVE_PARAMETERS)


def _colours(rows: Rows, columns: Mapping[str, str], solved: IntArray) -> FloatArray:
    """nu_eff or the pseudocolour, whichever the row's solution asks for."""
    colour = np.full(rows.table.rows, np.nan)
    for role, code in (("nu_eff", FIVE_PARAMETERS), ("pseudocolour", SIX_PARAMETERS)):
        if role in columns:
            numbers = rows.table.numbers(columns[role], COLOUR)
            here = solved == code
            rows.problems.extend(rows.table.cell_problems(columns[role], COLOUR, rows.judged))
            colour[here] = numbers.values[here]
    rows.leave_out(np.isnan(colour) & rows.judged, "missing nu_eff or pseudocolour")
    return colour


def parallax_notes(
    section: Parallaxes,
    columns: Mapping[str, str],
    star: Texts,
    values: ParallaxValues,
    left: IntArray,
) -> tuple[str, ...]:
    """What a reader should know of the parallaxes that take part."""
    notes: list[str] = []
    magnitudes = f"{MAGNITUDES[0]:g} to {MAGNITUDES[1]:g} mag"
    colours = ", ".join(
        f"{low:g} to {high:g} for {'five' if code == FIVE_PARAMETERS else 'six'} parameters"
        for code, (low, high) in COLOURS.items()
    )
    for flags, role, ranges in (
        (values.outside_magnitude, "g_magnitude", magnitudes),
        (values.outside_colour, "nu_eff", colours),
    ):
        outside = [] if flags is None else [int(row) for row in left if flags[row]]
        if outside:
            named = ", ".join(str(star.values[row]) for row in outside[:_SEVERAL])
            more = len(outside) - _SEVERAL
            named += f" and {more:,} more" if more > 0 else ""
            column = columns[role]
            if role == "nu_eff" and "pseudocolour" in columns:
                column += f" or {columns['pseudocolour']}"
            notes.append(
                f"{named}: {column} outside the range of the zero-point recipe ({ranges}); "
                "extrapolated"
            )
    if section.min_signal is not None:
        notes.append(
            f"warning: the cut at {section.min_signal:g} errors of the measured parallax is not "
            "accounted for; it keeps stars whose parallaxes came out large, which biases the fit"
        )
    return tuple(notes)
