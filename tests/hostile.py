"""A ladder in which every name is an attack on something, and still a name."""

from __future__ import annotations

import copy
from typing import Any

import builders
import numpy as np

from ladderfit.ladder import Ladder, build_ladder

SCRIPT, FORMULA, SPECIALS = "<script>alert(1)</script>", "=cmd()", r"a_b%c&d"
NAMES = (
    SCRIPT,
    FORMULA,
    SPECIALS,
    "+1+1",
    "@SUM(A1)",
    "-2+3",
    r"$x_1^{2}$",
    r"\input{/etc/passwd}",
    "]]> --> <!--",
    "'\"`",
    "[5] * {q} ~ #1 ^ | --",
    "Å é ß Ł ń 中 λ",
)
HOSTS = {"Tavin": SCRIPT, "Orrel": FORMULA, "Q07": SPECIALS}


def tables() -> dict[str, Any]:
    found = builders.tables()
    cepheids, peaks = found["cepheids"], found["supernovae"]
    for table in (cepheids, peaks):
        table["Galaxy"] = table["Galaxy"].replace(HOSTS)
    stars = list(cepheids["ID"])
    stars[: len(NAMES)] = NAMES
    cepheids["ID"] = stars
    found["anchors.parallaxes"].loc[:3, "ID"] = list(NAMES[:4])
    peaks["SN"] = list(NAMES[:3])
    found["expansion"].loc[:11, "SN"] = list(NAMES)
    return found


def choices() -> dict[str, Any]:
    plain = copy.deepcopy(builders.choices())
    plain["title"] = f"{SCRIPT} {SPECIALS} $x$"
    geometric = plain["anchors"]["geometric"]
    plain["anchors"]["geometric"] = {HOSTS[name]: value for name, value in geometric.items()}
    plain["relation"]["metallicity"]["scale"] = f"{SPECIALS}{SCRIPT}"
    plain["cepheids"]["set_aside"] = [
        {"star": NAMES[7], "host": SCRIPT, "reason": f"{SCRIPT} {FORMULA} {SPECIALS}"}
    ]
    return plain


def ladder() -> Ladder:
    return build_ladder(choices(), tables())


def rng() -> np.random.Generator:
    return np.random.default_rng(12)
