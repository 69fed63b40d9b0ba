"""Surveys of supernovae alone: hosts of known distance, and an expansion; truths from priors."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

import ladderfit as lf
from ladderfit.ladder import Ladder
from ladderfit.mock import mock_from_ladder, plain_truth
from ladderfit.mock.light_curves import LightCurves
from ladderfit.mock.peaks import flow_supernovae, host_supernovae
from ladderfit.mock.plan import Host, Plan

LIGHT = LightCurves()
ANCHOR_ERROR = 0.05
COLUMNS = {
    "name": "SN",
    "peak": "mB",
    "peak_error": "e_mB",
    "width": "w",
    "colour": "c",
    "host_mass": "logM",
    "survey": "Survey",
}
ERRORS = {
    "width_error": "e_w",
    "colour_error": "e_c",
    "peak_width_covariance": "cov_mw",
    "peak_colour_covariance": "cov_mc",
    "width_colour_covariance": "cov_wc",
}
RELATION = {"width": {}, "colour": {}, "host_mass": {}, "surveys": ["Marl", "Sedge"]}
NARROW = {  # priors from which truths are drawn: wide against what the data tell
    "peak_magnitude": {"normal": [-19.3, 0.5]},
    "peak_scatter": {"half_normal": 0.12},
    "alpha": {"normal": [0.14, 0.1]},
    "beta": {"normal": [3.0, 1.0]},
    "width_mean": {"normal": [0.0, 1.0]},
    "width_spread": {"half_normal": 1.0},
    "colour_mean": {"normal": [0.0, 0.1]},
    "colour_spread": {"half_normal": 0.1},
    "shape_colour_correlation": {"uniform": [-0.9, 0.9]},
    "hubble_constant": {"log_normal": [70.0, 0.3]},
}
Change = Callable[[np.random.Generator, Any, Any], Any]  # tables of hosts and expansion -> theirs


def survey(
    seed: int,
    *,
    change: Change | None = None,
    errors: bool = True,
    hosts: int = 16,
    flow: int = 150,
    **more: Any,
) -> Ladder:
    """A survey by the simulator, with a fault planted in its tables where `change` has one."""
    rng = np.random.default_rng([77, seed])
    places = tuple(Host(f"Isle{i:02d}", 29.0 + 0.2 * i, 0, supernovae=1) for i in range(hosts))
    plan = Plan(hosts=places, flow=flow, flow_outside=0, light_curves=LIGHT)
    measured = {host.name: host.modulus + ANCHOR_ERROR * rng.normal() for host in places}
    near, far = host_supernovae(plan, rng), flow_supernovae(plan, rng)
    if change is not None:
        near, far = change(rng, near, far)
    columns = COLUMNS | (ERRORS if errors else {})
    choices: dict[str, Any] = {
        "anchors": {
            "geometric": {n: {"modulus": mu, "error": ANCHOR_ERROR} for n, mu in measured.items()}
        },
        "supernovae": {"columns": columns | {"host": "Galaxy"}},
        "expansion": {"columns": columns | {"redshift": "zcmb", "redshift_heliocentric": "zhel"}},
        "peak_relation": RELATION,
    }
    return lf.build_ladder(choices | more, {"supernovae": near, "expansion": far})


def again(base: Ladder, rng: np.random.Generator) -> tuple[Ladder, dict[str, float]]:
    """The same supernovae measured again in a world drawn from the priors, and its truth."""
    truth = plain_truth(base)
    for name in truth:
        if not name.startswith("modulus"):
            truth[name] = float(base.choices.prior(name).draw(rng, 1)[0])
    return mock_from_ladder(base, truth, rng), truth
