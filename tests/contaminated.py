"""Simulated surveys of which one Cepheid in twenty does not follow the relation."""

from __future__ import annotations

from typing import Any

import numpy as np
from astropy.table import Table

from ladderfit.ladder import Ladder, build_ladder
from ladderfit.mock import Plan, simulate
from ladderfit.mock.contamination import Contamination
from ladderfit.mock.plan import Host

# Blends: too bright, and of short periods only, so that a plain slope is pulled as well.
# 0.072 of those under 12 d are 5 % of all.
BLENDS = Contamination(share=0.072, offset=-1.0, width=0.5, longest=12.0)
PLAN = Plan(
    hosts=(
        Host("Tavin", 18.5, 250, geometric_error=0.003),
        Host("Orsell", 24.4, 200, geometric_error=0.003),
        Host("Brelin", 24.6, 150, geometric_error=0.003),
    ),
    contamination=BLENDS,
    missing_cepheids=0,
    parallax_stars=2,
    flow=2,
    flow_outside=0,
)
MIXTURE = {
    "cepheids.outliers.treatment": "mixture",
    "priors.outlier_offset": {"normal": [0.0, 1.0]},
}
STUDENT = {"cepheids.outliers.treatment": "Student-t"}


def survey(seed: int) -> tuple[Ladder, Table]:
    """A ladder of one simulated survey, outliers not modelled, and its table."""
    mock = simulate(PLAN, np.random.default_rng([1105, seed]))
    return ladder_of(mock.cepheids, dict(mock.anchors)), mock.cepheids


def clean(ladder: Ladder, table: Table) -> Ladder:
    """The same without the stars that were simulated as outliers."""
    anchors = {
        name: (anchor.modulus, anchor.error)
        for name, anchor in ladder.choices.anchors.geometric.items()
    }
    return ladder_of(table[table["outlier"] == "no"], anchors)


def ladder_of(table: Table, anchors: dict[str, tuple[float, float]]) -> Ladder:
    """Cepheids and geometric anchors."""
    choices: dict[str, Any] = {
        "cepheids": {
            "columns": {"star": "ID", "host": "Galaxy", "period": "P", "metallicity": "OH"},
            "magnitude": {
                "bands": {"V": "Vmag", "I": "Imag", "H": "Hmag"},
                "errors": {"V": "e_V", "I": "e_I", "H": "e_H"},
                "wesenheit": {"band": "H", "colour": ["V", "I"], "ratio": PLAN.ratio},
            },
        },
        "relation": {
            "pivot": PLAN.pivot,
            "metallicity": {"reference": PLAN.reference, "scale": "12+log(O/H)"},
        },
        "anchors": {"geometric": {n: {"modulus": m, "error": e} for n, (m, e) in anchors.items()}},
    }
    return build_ladder(choices, {"cepheids": table})
