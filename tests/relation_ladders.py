"""Small ladders with every term of the relation, to be changed and compared.

`made` draws choices and tables from a seed; `log_densities` evaluates a ladder's log
density at points of phi given as parameter values, so that ladders with different
data can be compared point by point.
"""

from __future__ import annotations

import copy
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from ladderfit.ladder import Ladder, build_ladder
from ladderfit.names import base_name
from ladderfit.posterior.joint import Posterior, posterior

HOSTS = ("Tavin", "Orrel", "Q07")
MODULUS = {"Tavin": 18.5, "Orrel": 20.2, "Q07": 21.0}
STAR = {"star": "ID", "period": "P", "metallicity": "OH", "mode": "Mode"}
LIGHT = {"band": "W", "bands": {"W": "W"}, "errors": {"W": "e_W"}}
TYPICAL = {
    "slope": (-3.3, 0.2),
    "slope_beyond": (-2.9, 0.2),
    "zero_point": (-5.9, 0.1),
    "metallicity": (-0.2, 0.1),
    "curvature": (0.1, 0.1),
    "slope_metallicity": (0.2, 0.1),
    "overtone_offset": (-0.5, 0.1),
    "zero_point_offset": (0.0, 0.1),
    "slope_offset": (0.0, 0.1),
    "scatter": (0.1, 0.02),
    "metallicity_spread": (0.15, 0.02),
    "parallax_metallicity": (0.1, 0.03),
    "parallax_offset": (0.0, 0.01),
    "shared_error": (0.0, 1.0),
}
TERMS: dict[str, dict[str, Any]] = {
    "plain": {},
    "break": {"relation.break": 18.0},
    "curvature": {"relation.curvature": True},
    "slope and metallicity": {"relation.slope_metallicity": True},
    "groups": {
        "groups": {"far": {"hosts": ["Q07", "Orrel"]}, "overtones": {"mode": "overtone"}},
        "relation.zero_points": ["far"],
        "relation.slopes": ["far"],
        "relation.scatter": ["overtones"],
    },
    "uniform in volume": {
        "hosts.distance_prior": "uniform in volume",
        "anchors.shared_errors": {"model": {"error": 0.03, "loads": {"Tavin": 1.0, "Orrel": 0.5}}},
        "anchors.geometric.Orrel.use": True,
    },
    "errors of the inputs": {
        "cepheids.columns.period_error": "e_P",
        "cepheids.columns.metallicity_error": "e_OH",
    },
}
ERRORS_OF_PARALLAX_STARS = {
    "anchors.parallaxes.columns.period_error": "e_P",
    "anchors.parallaxes.columns.metallicity_error": "e_OH",
}


@dataclass(frozen=True)
class Made:
    """Choices and tables, to be changed before they are built."""

    choices: dict[str, Any]
    tables: dict[str, pd.DataFrame]

    def built(self, changes: Mapping[str, Any] | None = None) -> Ladder:
        return build_ladder(self.choices, self.tables).change(changes or {})

    def copy(self) -> Made:
        tables = {key: table.copy() for key, table in self.tables.items()}
        return Made(copy.deepcopy(self.choices), tables)


def made(seed: int, *, parallaxes: bool = True, stars: int = 8) -> Made:
    """Three hosts, one of them an anchor, and a few parallax stars; overtones have an offset."""
    rng = np.random.default_rng(seed)
    host = np.repeat(HOSTS, stars)
    cepheids = _stars(rng, np.array([MODULUS[name] for name in host]))
    cepheids.insert(1, "Galaxy", host)
    choices: dict[str, Any] = {
        "cepheids": {
            "columns": {**STAR, "host": "Galaxy"},
            "magnitude": LIGHT,
            "overtones": "offset",
        },
        "relation": {"pivot": 10.0, "metallicity": {"reference": 8.69, "scale": "12+log(O/H)"}},
        "anchors": {
            "geometric": {
                "Tavin": {"modulus": 18.49, "error": 0.04},
                "Orrel": {"modulus": 20.25, "error": 0.06, "use": False},
            },
        },
    }
    tables = {"cepheids": cepheids}
    if parallaxes:
        modulus = rng.uniform(8.0, 13.0, 6)
        table = _stars(rng, modulus)
        error = 10.0 ** (2.0 - 0.2 * modulus) / rng.uniform(3.0, 60.0, 6)
        table["plx"] = 10.0 ** (2.0 - 0.2 * modulus) + error * rng.normal(size=6)
        table["e_plx"] = error
        tables["anchors.parallaxes"] = table
        columns = {**STAR, "parallax": "plx", "parallax_error": "e_plx"}
        choices["anchors"]["parallaxes"] = {"columns": columns, "overtones": "offset"}
    return Made(choices, tables)


def _stars(rng: np.random.Generator, modulus: np.ndarray) -> pd.DataFrame:
    n = len(modulus)
    x, metals = rng.uniform(-0.3, 0.7, n), rng.normal(8.7, 0.15, n)
    overtone = np.arange(n) % 4 == 1
    light = -5.9 - 3.3 * x - 0.2 * (metals - 8.69) - 0.5 * overtone
    error = rng.uniform(0.03, 0.1, n)
    measured = modulus + light + np.hypot(error, 0.1) * rng.normal(size=n)
    return pd.DataFrame(
        {
            "ID": [f"S{i:03d}" for i in range(n)],
            "P": 10.0 ** (1.0 + x),
            "e_P": 10.0 ** (1.0 + x) * rng.uniform(0.005, 0.05, n),
            "OH": metals,
            "e_OH": rng.uniform(0.03, 0.15, n),
            "Mode": np.where(overtone, "1O", "F"),
            "W": measured,
            "e_W": error,
        }
    )


def points(
    rng: np.random.Generator, names: Sequence[str], count: int = 4
) -> list[dict[str, float]]:
    """Values of parameters near where they may be."""
    return [
        {
            name: TYPICAL[base_name(name)][0] + TYPICAL[base_name(name)][1] * rng.normal()
            for name in names
        }
        for _ in range(count)
    ]


def log_densities(found: Posterior | Ladder, places: Sequence[Mapping[str, float]]) -> np.ndarray:
    """Log density at points given as parameter values, shape (number of points,)."""
    found = found if isinstance(found, Posterior) else posterior(found)
    return found.log_density(np.stack([found.coordinates(place) for place in places]))


def shape_of(values: np.ndarray) -> np.ndarray:
    """Log densities less the first: what a constant factor leaves alone."""
    return values - values[0]
