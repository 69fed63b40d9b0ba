"""A ladder with its choices made otherwise: many fits, one table, what moves which number."""

from ladderfit.alternatives.axes import Alternative, alternatives_of
from ladderfit.alternatives.comparison import Comparison, Fit
from ladderfit.alternatives.run import run_alternatives
from ladderfit.alternatives.systematics import systematics

__all__ = [
    "Alternative",
    "Comparison",
    "Fit",
    "alternatives_of",
    "run_alternatives",
    "systematics",
]
