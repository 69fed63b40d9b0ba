"""What can be pointed at in a view: named points and their numbers."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from ladderfit.rounding import MINUS
from ladderfit.samples import FloatArray, TextArray


@dataclass(frozen=True, eq=False)
class Points:
    """Objects drawn in one panel.

    Attributes
    ----------
    axes : Axes
    x, y : array, shape (n,)
        In data coordinates.
    names : array of str, shape (n,)
    hosts : sequence of str, length n
        Empty where the host does not matter.
    section : str
        Of the ladder file, whose `set_aside` takes them.
    off, sd : array, shape (n,)
        Residual, and the spread expected of it.
    aside : bool
        Whether they are set aside.
    unit : str
        Of the residual.
    """

    axes: Any
    x: FloatArray
    y: FloatArray
    names: TextArray
    hosts: Sequence[str]
    section: str
    off: FloatArray
    sd: FloatArray
    aside: bool = False
    unit: str = "mag"

    def nearest(self, x: float, y: float, within: float) -> tuple[int, float] | None:
        """Index and distance of the nearest point, in pixels; None if none is so near."""
        if not len(self.x):
            return None
        place = self.axes.transData.transform(np.column_stack([self.x, self.y]))
        distance = np.hypot(place[:, 0] - x, place[:, 1] - y)
        index = int(np.argmin(distance))
        return (index, float(distance[index])) if distance[index] <= within else None

    def describe(self, index: int) -> str:
        """Name, host, and how far it is off."""
        host = f", {self.hosts[index]}" if self.hosts[index] else ""
        off, sd = float(self.off[index]), float(self.sd[index])
        numbers = f"residual {off:+.3f} {self.unit}, {off / sd:+.1f} of the expected spread"
        return f"{self.names[index]}{host}: {numbers.replace('-', MINUS)}"


def nearest_of(
    groups: Sequence[Points], axes: Any, x: float, y: float, within: float = 8.0
) -> tuple[Points, int] | None:
    """The nearest point of all groups in these axes, within some pixels."""
    best: tuple[float, Points, int] | None = None
    for points in groups:
        if points.axes is axes:
            found = points.nearest(x, y, within)
            if found is not None and (best is None or found[1] < best[0]):
                best = (found[1], points, found[0])
    return None if best is None else (best[1], best[2])
