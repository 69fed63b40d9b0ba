"""Small ladders, one for each term that the simulator restates."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd
from relation_ladders import ERRORS_OF_PARALLAX_STARS, TERMS, Made, made

from ladderfit.ladder import Ladder, build_ladder

STARS = 14  # of each host
SKY = {"anchors.parallaxes.columns.l": "l", "anchors.parallaxes.columns.b": "b"}
LIMIT = {
    "anchors.parallaxes.selection": {"band": "W", "limit": 8.0, "softness": 0.1},
    "anchors.parallaxes.magnitude": {"band": "W", "bands": {"W": "W"}, "errors": {"W": "e_W"}},
}
ANCHORED: dict[str, Any] = {"anchors.geometric.Orrel.use": True}
DISC = {"disc": {"length": 2.5, "height": 0.3}}
CASES: dict[str, Mapping[str, Any]] = {
    "break": TERMS["break"],
    "break below the pivot": {"relation.break": 8.0},
    "curvature": TERMS["curvature"],
    "slope and metallicity": TERMS["slope and metallicity"],
    "groups": TERMS["groups"] | {"priors": {"zero_point_offset": {"normal": [0.0, 0.1]}}},
    "systems": {
        "cepheids.columns.system": "System",
        "anchors.parallaxes.columns.system": "System",
        "groups": {"wide": {"system": "wide"}},
        "relation.zero_points": ["wide"],
        "relation.scatter": ["wide"],
    },
    "errors of periods": {"cepheids.columns.period_error": "e_P"},
    "populations": TERMS["errors of the inputs"] | ERRORS_OF_PARALLAX_STARS,
    "shared errors of anchors": ANCHORED
    | {"anchors.shared_errors": {"s": {"error": 0.08, "loads": {"Tavin": 1.0, "Orrel": 0.5}}}},
    "error scale": {"priors": {"parallax_error_scale": {"log_normal": [1.2, 0.5]}}},
    "groups of offsets": {
        "groups": {"overtones": {"mode": "overtone"}},
        "anchors.parallaxes.offsets": ["overtones"],
    },
    "bounds of moduli": {"anchors.parallaxes.modulus_bounds": [7.0, 14.0]},
    "exponential density": {
        "anchors.parallaxes.distance_prior": {"exponential": 1.0},
        "priors": {"distance_length": {"log_normal": [1.0, 0.5]}},
    },
    "disc": SKY | {"anchors.parallaxes.distance_prior": DISC},
    "limit in a volume": LIMIT | {"anchors.parallaxes.distance_prior": "uniform in volume"},
    "limits in a disc": SKY
    | LIMIT
    | {
        "anchors.parallaxes.distance_prior": DISC,
        "anchors.parallaxes.selection": {"band": "W", "limit": 8.0, "parallax_min": 0.3},
    },
    "clusters": {
        "anchors.parallaxes.columns.cluster": "Cluster",
        "anchors.parallaxes.clusters": {"Hurn": {"parallax": 0.6, "error": 0.02, "offset": True}},
    },
    "clusters in a volume": LIMIT
    | {
        "anchors.parallaxes.distance_prior": "uniform in volume",
        "anchors.parallaxes.columns.cluster": "Cluster",
    },
}


def term_parts() -> Made:
    """The parts of all cases: sky, systems and clusters are in the tables."""
    parts = made(5, stars=STARS)
    rng = np.random.default_rng(51)
    for table in parts.tables.values():
        table["System"] = np.where(np.arange(len(table)) % 3 == 0, "wide", "narrow")
    stars = parts.tables["anchors.parallaxes"]
    stars["l"], stars["b"] = rng.uniform(0.0, 360.0, len(stars)), rng.uniform(-8.0, 8.0, len(stars))
    stars["Cluster"] = ["", "Hurn", "Hurn", "", "Osk", "Osk"]
    return parts


def together(stars: pd.DataFrame) -> None:
    """Have stars of a cluster lie at one distance, in place."""
    x = np.log10(stars["P"]) - 1.0
    light = -5.9 - 3.3 * x - 0.2 * (stars["OH"] - 8.69) - 0.5 * (stars["Mode"] == "1O")
    for name in ("Hurn", "Osk"):
        first, other = np.flatnonzero(stars["Cluster"] == name)
        stars.loc[other, "W"] = stars["W"][first] + light[other] - light[first] + 0.03
        stars.loc[other, "plx"] = stars["plx"][first] + 0.3 * stars["e_plx"][other]


def term_ladder(name: str) -> Ladder:
    """One of `CASES`."""
    parts = term_parts()
    if name.startswith("clusters"):
        together(parts.tables["anchors.parallaxes"])
    plain = parts.choices
    plain["sampling"] = {"seed": 1}
    return build_ladder(plain, parts.tables).change(CASES[name])
