"""Calibrate the cosmic distance ladder.

Public names are imported on first use, so that ``import ladderfit`` is light::

    import ladderfit as lf

    ladder = lf.read_ladder("sample.toml")
    result = lf.draw(ladder, seed=1)
    print(result.summary())
"""

from __future__ import annotations

import importlib
from importlib import metadata
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from ladderfit.alternatives import run_alternatives
    from ladderfit.anchors import compare_anchors
    from ladderfit.checks.completeness import propose_period_cuts
    from ladderfit.checks.predictive import predictive_checks
    from ladderfit.comparison.results import compare_results
    from ladderfit.coverage import run_coverage
    from ladderfit.distances.moduli import distances_of
    from ladderfit.influence import leave_one_out
    from ladderfit.ladder import Ladder, build_ladder, read_ladder
    from ladderfit.predictive.fit import compare_fits, predictive_fit
    from ladderfit.result import Result
    from ladderfit.sampling.live import Run, open_run, start
    from ladderfit.sampling.run import draw
    from ladderfit.sensitivity.power_scaling import prior_sensitivity
    from ladderfit.store import read_result

_HOME = {
    "Ladder": "ladderfit.ladder",
    "build_ladder": "ladderfit.ladder",
    "read_ladder": "ladderfit.ladder",
    "Result": "ladderfit.result",
    "draw": "ladderfit.sampling.run",
    "Run": "ladderfit.sampling.live",
    "open_run": "ladderfit.sampling.live",
    "start": "ladderfit.sampling.live",
    "read_result": "ladderfit.store",
    "compare_anchors": "ladderfit.anchors",
    "compare_results": "ladderfit.comparison.results",
    "distances_of": "ladderfit.distances.moduli",
    "leave_one_out": "ladderfit.influence",
    "outlier_table": "ladderfit.checks.outliers",
    "predictive_checks": "ladderfit.checks.predictive",
    "propose_period_cuts": "ladderfit.checks.completeness",
    "predictive_fit": "ladderfit.predictive.fit",
    "compare_fits": "ladderfit.predictive.fit",
    "prior_sensitivity": "ladderfit.sensitivity.power_scaling",
    "run_alternatives": "ladderfit.alternatives",
    "run_coverage": "ladderfit.coverage",
}

__all__ = [
    "Ladder",
    "build_ladder",
    "read_ladder",
    "Result",
    "draw",
    "Run",
    "open_run",
    "start",
    "read_result",
    "compare_anchors",
    "compare_results",
    "distances_of",
    "leave_one_out",
    "outlier_table",
    "predictive_checks",
    "propose_period_cuts",
    "predictive_fit",
    "compare_fits",
    "prior_sensitivity",
    "run_alternatives",
    "run_coverage",
]


def __getattr__(name: str) -> Any:
    if name == "__version__":
        return metadata.version("ladderfit")
    if name in _HOME:
        return getattr(importlib.import_module(_HOME[name]), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted([*__all__, "__version__"])
