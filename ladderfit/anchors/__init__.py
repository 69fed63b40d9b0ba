"""What fixes the scale: how much rests on each anchor, and whether they agree."""

from __future__ import annotations

from ladderfit.anchors.comparison import (
    AnchorCase,
    AnchorComparison,
    anchor_names,
    compare_anchors,
    free_zero_points,
    only_anchor,
)
from ladderfit.anchors.tension import PARALLAXES, NoTensionError, Tension, tension
from ladderfit.anchors.weights import AnchorWeights, anchor_weights

__all__ = [
    "PARALLAXES",
    "AnchorCase",
    "AnchorComparison",
    "AnchorWeights",
    "NoTensionError",
    "Tension",
    "anchor_names",
    "anchor_weights",
    "compare_anchors",
    "free_zero_points",
    "only_anchor",
    "tension",
]
