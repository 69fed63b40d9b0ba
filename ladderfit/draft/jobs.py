"""What a table is for, and which of its columns a ladder needs."""

from __future__ import annotations

import re
from dataclasses import dataclass

from ladderfit.draft.clues import SURE
from ladderfit.draft.facts import Facts
from ladderfit.draft.light_curves import take_light_curves
from ladderfit.draft.magnitudes import Photometry, is_magnitude, take_magnitudes
from ladderfit.draft.roles import Choice, Roles, open_choice
from ladderfit.schema import UNDECIDED

CEPHEIDS, PARALLAXES = "cepheids", "anchors.parallaxes"
SUPERNOVAE, EXPANSION, GEOMETRIC = "supernovae", "expansion", "anchors.geometric"

WORDS = {
    CEPHEIDS: "Cepheids in galaxies",
    PARALLAXES: "Cepheids with parallaxes",
    SUPERNOVAE: "supernovae in galaxies",
    EXPANSION: "objects that follow the expansion",
    GEOMETRIC: "geometric distance moduli of galaxies",
}

_COSMIC, _SOLAR = "cmb|hd|cos", "hel"  # in the name of a redshift


@dataclass(frozen=True, eq=False)
class Sketch:
    """What a table gives to a draft.

    Attributes
    ----------
    job : str
        The section of the ladder file.
    why : str
        What the job was told from.
    columns : mapping of str to Choice
        By role.
    photometry : Photometry or None
    roles : Roles
    """

    job: str
    why: str
    columns: dict[str, Choice]
    photometry: Photometry | None
    roles: Roles


def job_of(roles: Roles) -> tuple[str, str] | None:
    """The section a table belongs to, and why; None where nothing fits."""
    best = {role: roles.best(role) for role in _TOLD_BY}
    period = max(best["period"], best["log_period"])
    peaks = [column for column in roles.free if is_magnitude(column)]
    peak = bool(peaks) or best["peak"] >= 1.0
    if period >= SURE and best["parallax"] >= SURE:
        return PARALLAXES, "it has periods and parallaxes"
    if period >= SURE:
        return CEPHEIDS, "it has periods"
    if best["velocity"] >= SURE and best["distance"] >= SURE:
        return EXPANSION, "it has distances and velocities"
    if best["modulus"] >= 4.0 and best["peak"] < 2.0 and best["redshift"] < 4.0:
        return GEOMETRIC, "it has distance moduli"
    if best["redshift"] >= 2.0 and peak and best["host"] < SURE:
        return EXPANSION, "it has redshifts and magnitudes"
    if best["host"] >= SURE and peak:
        two = best["name"] >= SURE
        return (
            (SUPERNOVAE, "it has hosts, names and magnitudes")
            if two or best["peak"] >= 2.0
            else (GEOMETRIC, "it has hosts and one magnitude for each")
        )
    return None


_TOLD_BY = (
    "period",
    "log_period",
    "parallax",
    "velocity",
    "distance",
    "modulus",
    "peak",
    "redshift",
    "host",
    "name",
)


def sketch(roles: Roles, job: str, why: str) -> Sketch:
    """Give the columns of a table the roles that its job has."""
    light = None
    if job in (CEPHEIDS, PARALLAXES):
        magnitudes = take_magnitudes(roles)
        _stars(roles, job)
        light = magnitudes.with_errors(roles)
    elif job == SUPERNOVAE:
        roles.assign("name", "host", "peak")
        _peak(roles)
        roles.need("name", "names of supernovae")
        roles.need("host", "the galaxies' names")
    elif job == GEOMETRIC:
        roles.assign("host", "modulus")
        _only_label(roles)
        roles.error_of("modulus", needed=True)
    else:
        _expansion(roles)
    return Sketch(job, why, roles.chosen, light, roles)


def _stars(roles: Roles, job: str) -> None:
    period = max(("period", "log_period"), key=roles.best)
    wanted = ["star", period, "metallicity", "mode", "system"]
    wanted.append("host" if job == CEPHEIDS else "parallax")
    roles.assign(*wanted)
    if job == CEPHEIDS:
        roles.need("host", "the galaxies' names")
    else:
        roles.error_of("parallax", needed=True)
    roles.error_of(period, needed=False)
    roles.error_of("metallicity", needed=False)


def _peak(roles: Roles) -> None:
    """The peak magnitude and its error; the only magnitude of a table needs no name."""
    magnitudes = [column for column in roles.free if is_magnitude(column)]
    if roles.decided("peak") is None and len(magnitudes) == 1:
        roles.take("peak", magnitudes[0], "the only magnitude")
    elif "peak" not in roles.chosen and magnitudes:
        roles.chosen["peak"] = open_choice([column.name for column in magnitudes])
    roles.need("peak", "a peak magnitude")
    roles.error_of("peak", needed=True)
    take_light_curves(roles)


def _only_label(roles: Roles) -> None:
    """The galaxies' names where each occurs once: the only column of text."""
    texts = [column for column in roles.free if column.numbers is None]
    if roles.decided("host") is None and len(texts) == 1:
        roles.take("host", texts[0], "the only column of text")
    roles.need("host", "the galaxies' names")


def _expansion(roles: Roles) -> None:
    if min(roles.best("velocity"), roles.best("distance")) >= SURE:
        roles.assign("name", "distance", "velocity")
    else:
        roles.assign("name")
        _redshifts(roles)
        roles.assign("peak")
        _peak(roles)
    roles.need("name", "names of the objects")


def _redshifts(roles: Roles) -> None:
    """Redshifts in the frame of the background radiation, and as observed."""
    clues = [clue for clue in roles.clues("redshift") if clue.score >= 2.0]
    named = [clue for clue in clues if clue.score >= 4.0] or clues
    columns = [clue.column for clue in named]
    cosmic, solar = _with(columns, _COSMIC), _with(columns, _SOLAR)
    if len(cosmic) == 1:
        roles.take("redshift", cosmic[0], "named like a redshift, background radiation at rest")
        if len(solar) == 1:
            roles.take("redshift_heliocentric", solar[0], "named like a redshift, Sun at rest")
    elif len(columns) == 1 and not solar:
        roles.take("redshift", columns[0], named[0].why)
    elif len(columns) == 1:
        text = f"{UNDECIDED} {columns[0].name}, although its name says that the Sun is at rest?"
        roles.chosen["redshift"] = Choice(text, offers=(columns[0].name,))
    elif columns:
        offers = [column.name for column in columns]
        roles.chosen["redshift"] = open_choice(offers)
        roles.chosen["redshift_heliocentric"] = open_choice(offers, ", or take this line out")
    roles.need("redshift", "a redshift")


def _with(columns: list[Facts], pattern: str) -> list[Facts]:
    return [column for column in columns if re.search(pattern, column.stem)]
