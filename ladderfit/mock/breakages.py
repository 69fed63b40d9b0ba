"""What may be wrong with a ladder and no model here knows: options of the simulator."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ladderfit.samples import BoolArray, FloatArray

CROWDED_AT = 32.0  # mag: the modulus at which `crowding` is stated


@dataclass(frozen=True)
class Breakage:
    """Departures from the model; all are zero, or none, by default.

    Attributes
    ----------
    slope_in_anchors : float
        By how much the slope of Cepheids in anchors, and of parallax stars, is larger than
        that in other hosts [mag/dex].
    crowding : float
        By how much unresolved stars brighten a Cepheid at a modulus of 32 mag [mag], in all
        bands.  Their light within a fixed solid angle keeps its brightness while the
        Cepheid's falls with the distance squared, so that the error grows with it.
    dust_ratio : float
        By how much A_H / E(V-I) of the dust is larger than the ratio of the index.
    reddest : float or None
        Supernovae of the expansion that are measured to be redder than this at their
        peak are not in the table [mag]; light curves alone.
    """

    slope_in_anchors: float = 0.0
    crowding: float = 0.0
    dust_ratio: float = 0.0
    reddest: float | None = None

    def brightening(self, modulus: FloatArray) -> FloatArray:
        """What crowding takes off the magnitudes [mag], any shape."""
        return np.asarray(self.crowding * 10.0 ** (0.4 * (modulus - CROWDED_AT)))

    def found(self, colour: FloatArray) -> BoolArray:
        """Which supernovae are in the table, by their measured colours, shape (n,)."""
        if self.reddest is None:
            return np.ones(len(colour), bool)
        return np.asarray(colour <= self.reddest)
