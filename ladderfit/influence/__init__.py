"""What each star, supernova and host does to a calibration, by leaving it out."""

from __future__ import annotations

from ladderfit.influence.objects import KINDS
from ladderfit.influence.sets import NotCoveredError
from ladderfit.influence.table import Influence, leave_one_out

__all__ = ["KINDS", "Influence", "NotCoveredError", "leave_one_out"]
