"""Columns of widths, colours and what goes with them, told by their names alone."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping

from ladderfit.draft.clues import SURVEY
from ladderfit.draft.facts import Facts
from ladderfit.draft.roles import Choice, Roles
from ladderfit.draft.text import Entry
from ladderfit.inputs.peaks import KINDS
from ladderfit.schema import UNDECIDED

_SHAPE = {"width": "x1|w|width|stretch|s", "decline_rate": "dm15b?|dmb15|deltam15b?|declinerate"}
_COLOUR = "c|colou?r"
_PEAK = "m|mb|mag|peak"
_STEMS = {
    **_SHAPE,
    "colour": _COLOUR,
    "host_mass": "(host)?(log|lg)(st(ellar)?)?(m|mass|mst|mstar)|hostmass|masshost",
}
_POSSIBLE = {
    "width": (-20.0, 20.0),
    "decline_rate": (0.3, 3.0),
    "colour": (-2.0, 5.0),
    "host_mass": (4.0, 14.0),
}
_COVARIANCES = {
    **{f"peak_{name}_covariance": (_PEAK, stem) for name, stem in _SHAPE.items()},
    "peak_colour_covariance": (_PEAK, _COLOUR),
    **{f"{name}_colour_covariance": (stem, _COLOUR) for name, stem in _SHAPE.items()},
}
_TERMS = {
    "width": "{reference = 0.0}",
    "decline_rate": "{reference = 1.1}",
    "colour": "{reference = 0.0}",
    "host_mass": "{step = 10.0}",
}


def take_light_curves(roles: Roles) -> None:
    """Give width, decline rate, colour, host mass and survey the columns named like them."""
    for role, stem in _STEMS.items():
        column = _named(roles, role, stem)
        if column is not None:
            roles.take(role, column, f"named like a {role.replace('_', ' ')}")
            if role != "host_mass":
                roles.error_of(role, needed=False)
    for role, (one, other) in _COVARIANCES.items():
        behind = role.removesuffix("_covariance").removeprefix("peak_").removesuffix("_colour")
        errors = {f"{behind}_error"} | ({"colour_error"} if not role.startswith("peak") else set())
        column = _named(roles, role, f"cov(ar)?(({one})({other})|({other})({one}))")
        if column is not None and errors <= set(roles.chosen):
            roles.take(role, column, "named like a covariance")
    for column in list(roles.free):
        if re.fullmatch(SURVEY, column.stem) and column.filled >= 2 * len(column.labels):
            roles.take("survey", column, f"{len(column.labels)} names that repeat")
            break


def _named(roles: Roles, role: str, stem: str) -> Facts | None:
    """The only free column of numbers with such a name and a unit that fits."""
    low, high = _POSSIBLE.get(role, (-float("inf"), float("inf")))
    found = []
    for column in roles.free:
        numbers = column.in_unit_of(KINDS[role])
        if numbers is not None and not column.error and re.fullmatch(stem, column.stem):
            found += [column] if column.within(low, high, numbers) else []
    return found[0] if len(found) == 1 else None


def peak_relation_entries(tables: Mapping[str, Mapping[str, Choice]]) -> Iterator[Entry]:
    """Terms that every table of supernovae has the columns for; whether they count is left open.

    Parameters
    ----------
    tables : mapping of str to mapping
        By section: the choices of columns.
    """
    section = ("peak_relation",)
    for term, written in _TERMS.items():
        if tables and all(term in columns for columns in tables.values()):
            text = f"{UNDECIDED} none if the peaks are standardised already, or {written}?"
            yield Entry(section, term, Choice(text))
    if tables and all("survey" in columns for columns in tables.values()):
        yield Entry(section, "surveys", Choice([], "names of those with an offset of their own"))
