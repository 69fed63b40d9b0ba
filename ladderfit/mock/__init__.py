"""Forward simulation, star by star, from known truth.

Nothing here knows the design matrix, the kernels or the posterior of a fit, so
that recovering the truth proves something.
"""

from __future__ import annotations

from ladderfit.mock.folder import plain_truth, write_mock
from ladderfit.mock.plan import Host, Mock, Plan
from ladderfit.mock.redraw import mock_from_ladder
from ladderfit.mock.scenario import PLAN, SEED, write_sample
from ladderfit.mock.survey import simulate

__all__ = [
    "Host",
    "Mock",
    "Plan",
    "PLAN",
    "SEED",
    "simulate",
    "write_sample",
    "mock_from_ladder",
    "plain_truth",
    "write_mock",
]
