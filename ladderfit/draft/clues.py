"""How well a column fits a role, by its name, its unit and its values.

Each clue adds to a score: a name that fits exactly 4, one that begins so 2, a unit
that only this role has 3, values that hardly anything else has up to 3.  A unit of
another kind or impossible values rule a column out.
"""

from __future__ import annotations

import re
from collections.abc import Collection
from dataclasses import dataclass

import numpy as np

from ladderfit.draft.facts import Facts
from ladderfit.inputs.kinds import (
    DISTANCE,
    LOG_PERIOD,
    MAGNITUDE,
    METALLICITY,
    PARALLAX,
    PERIOD,
    REDSHIFT,
    VELOCITY,
    Kind,
)
from ladderfit.inputs.star_values import FUNDAMENTAL, OVERTONE
from ladderfit.samples import FloatArray

SURE = 3.0  # score from which a column is taken for granted
LEAD = 1.5  # by which it has to lead the next


@dataclass(frozen=True, eq=False)
class Clue:
    """A column that may have a role: how well it fits, and why."""

    column: Facts
    score: float
    why: str


@dataclass(frozen=True)
class Quantity:
    """What is known of a number before any table is seen.

    Attributes
    ----------
    words : str
        What it is, for the summary.
    exact, begins : str
        Patterns of a name's stem: the whole of it, or its beginning.
    kind : Kind
    possible : pair of float
        Nearly all values lie in here, in the unit of `kind`.
    usual : tuple of (low, high, score)
        Ranges that speak for it if nearly all values lie in one.
    by_unit : bool
        Whether hardly anything else has such a unit.
    """

    words: str
    exact: str
    begins: str
    kind: Kind
    possible: tuple[float, float]
    usual: tuple[tuple[float, float, float], ...] = ()
    by_unit: bool = False


QUANTITIES = {
    "period": Quantity(
        "a period",
        "p|per|period|pd|pday|perd",
        "period|per|pfund",
        PERIOD,
        (0.1, 400.0),
        ((1.0, 200.0, 1.0),),
        by_unit=True,
    ),
    "log_period": Quantity(
        "log10 of a period",
        "log(10)?p(er|eriod)?|lgp|lp",
        "logp|lgp",
        LOG_PERIOD,
        (-1.0, 2.6),
    ),
    "metallicity": Quantity(
        "a metallicity",
        "(12)?(plus)?(log)?oh(12)?|feh|mh|met|metal|metallicity",
        "metal|feh|oh|logoh",
        METALLICITY,
        (-3.0, 9.8),
        ((7.5, 9.3, 2.5), (-2.5, 0.8, 0.5)),
    ),
    "parallax": Quantity(
        "a parallax",
        "plx|parallax|varpi|pi|par",
        "plx|parallax|varpi",
        PARALLAX,
        (-10.0, 60.0),
        ((-0.5, 20.0, 1.0),),
        by_unit=True,
    ),
    "redshift": Quantity(
        "a redshift",
        "z|zcmb|zhd|zcosmo|zcor|redshift|zhel|zhelio|zhe|zspec",
        "z(cmb|hel|hd|cos)|redshift",
        REDSHIFT,
        (1e-4, 5.0),
        ((1e-4, 0.3, 2.0), (0.3, 2.5, 0.5)),
    ),
    "velocity": Quantity(
        "a velocity",
        "v|vel|velocity|cz|vcmb|vhel|vlg|vr|vrad",
        "vel",
        VELOCITY,
        (-1e3, 3e5),
        by_unit=True,
    ),
    "distance": Quantity(
        "a distance",
        "d|dist|distance|r|dmpc",
        "dist",
        DISTANCE,
        (1e-4, 1e4),
        by_unit=True,
    ),
    "modulus": Quantity(
        "a distance modulus",
        "mu|mu0|dm|modulus|distmod|distancemodulus|m0|mm",
        "mu|dm|dist.*mod",
        MAGNITUDE,
        (5.0, 45.0),
        ((17.0, 34.0, 0.5),),
    ),
    "peak": Quantity(
        "a peak magnitude",
        "mb|bmax|mbmax|mpeak|peak|peakmag|peakmagnitude|mbcorr|mbstd",
        "mb|peak|bmax",
        MAGNITUDE,
        (2.0, 30.0),
    ),
}


def number_clue(role: str, column: Facts) -> Clue | None:
    """How well a column fits a role of `QUANTITIES`; None where it cannot have it."""
    quantity = QUANTITIES[role]
    numbers = column.in_unit_of(quantity.kind)
    if numbers is None or column.error or not column.within(*quantity.possible, numbers):
        return None
    score, why = _of_name(column, quantity.exact, quantity.begins, quantity.words)
    if column.unit is not None:
        score += 3.0 if quantity.by_unit else 1.0
        why.append(f"in {column.unit}")
    for low, high, worth in quantity.usual:
        if column.within(low, high, numbers):
            score += worth
            break
    why.append(spread_of(numbers))
    return Clue(column, score, ", ".join(why)) if score > 0.0 else None


def _of_name(column: Facts, exact: str, begins: str, words: str) -> tuple[float, list[str]]:
    if re.fullmatch(exact, column.stem):
        return 4.0, [f"named like {words}"]
    if re.match(begins, column.stem):
        return 2.0, [f"its name begins like {words}"]
    return 0.0, []


def spread_of(numbers: FloatArray) -> str:
    """For example ``3.2 to 98``."""
    low, high = float(np.min(numbers)), float(np.max(numbers))
    return f"{low:.4g} to {high:.4g}" if low < high else f"{low:.4g} throughout"


SURVEY = "survey|surveyname|idsurvey|surveyid"  # stems of a column that names surveys

# --- columns of text ---------------------------------------------------------------------

_NAMES = (
    "id|star|name|cepheid|source|object|objectname|starname|starid|sourceid|designation|"
    "sn|snname|cid|hv|ogle|supernova"
)


def name_clue(column: Facts, hosts: Collection[str]) -> Clue | None:
    """How well a column fits names of stars or supernovae."""
    if not _is_label(column) or not _mostly_unique(column):
        return None
    score, why = _of_name(column, _NAMES, "id|star|name|sn|source|object", "names")
    if column.numbers is None and column.unique:
        score += 3.0
        why.append("text that never repeats")
    elif column.unique:
        score += 0.5
    overlap = _overlap(column, hosts)
    if overlap:
        score -= 3.0
    return Clue(column, score, ", ".join(why)) if score > 0.0 else None


def host_clue(column: Facts, hosts: Collection[str]) -> Clue | None:
    """How well a column fits the galaxies' names; `hosts` are those of other tables."""
    if column.numbers is not None or column.error or re.fullmatch(SURVEY, column.stem):
        return None
    if all(_as_mode(label) for label in column.labels):
        return None
    exact = "gal|galaxy|host|hostgalaxy|hostname|galaxyname|field|hosts"
    score, why = _of_name(column, exact, "gal|host", "a host")
    shared = _overlap(column, hosts)
    if shared:
        score += 3.0
        why.append(f"{shared} of its {len(column.labels)} names are hosts of another table")
    if column.filled >= 2 * len(column.labels):
        score += 3.0 if len(column.labels) > 1 else 1.0
        why.append(f"{len(column.labels)} names that repeat")
    return Clue(column, score, ", ".join(why)) if score > 0.0 else None


def mode_clue(column: Facts, _: Collection[str]) -> Clue | None:
    """How well a column fits the mode of pulsation."""
    known = [label for label in column.labels if _as_mode(label)]
    if len(known) != len(column.labels) or len(column.labels) > 4:
        return None
    score, why = _of_name(column, "mode|pulsation|pmode|type|class|modes", "mode|puls", "a mode")
    if column.numbers is None:
        score += 3.0
    why.append(f"it says {' and '.join(repr(label) for label in column.labels)}")
    return Clue(column, score, ", ".join(why)) if score > 0.0 else None


def system_clue(column: Facts, _: Collection[str]) -> Clue | None:
    """How well a column fits the photometric system; told by its name alone."""
    if column.numbers is not None or column.filled < 2 * len(column.labels):
        return None
    exact = "system|photsystem|photometricsystem|camera|instrument|detector|phot"
    score, why = _of_name(column, exact, "system|camera|instrum", "a photometric system")
    return Clue(column, score, ", ".join(why)) if score > 0.0 else None


def _is_label(column: Facts) -> bool:
    """Text, or whole numbers that may be names."""
    if column.error or column.unit is not None:
        return False
    return column.numbers is None or bool(np.all(column.numbers == np.floor(column.numbers)))


def _mostly_unique(column: Facts) -> bool:
    return len(column.labels) > 0.5 * column.filled


def _overlap(column: Facts, hosts: Collection[str]) -> int:
    return len(set(column.labels) & set(hosts))


def _as_mode(label: str) -> bool:
    return " ".join(label.lower().split()) in FUNDAMENTAL | OVERTONE
