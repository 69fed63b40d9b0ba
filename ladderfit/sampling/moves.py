"""How walkers move: differential evolution, and the snooker update.

The snooker update of the sampler library is not used: its jump grows with the
distance between two walkers, and its acceptance does not make up for it, so that it
leaves a wrong spread behind (0.4 to 1.3 times the variance of a normal, measured).
"""

from __future__ import annotations

from typing import Any

import emcee
import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

_SNOOKER = 1.7  # ter Braak & Vrugt 2008: between 1.2 and 2.2


class SnookerMove(emcee.moves.RedBlueMove):  # type: ignore[misc]
    """The snooker update (ter Braak & Vrugt 2008, Stat. Comput. 18, 435).

    A walker at x moves along the line to another walker z, by the difference of
    two more walkers projected on that line.  The jump is symmetric on the line;
    the factor |x' - z|^(d-1) / |x - z|^(d-1) is the change of volume round z.
    """

    def __init__(self, stretch: float = _SNOOKER) -> None:
        super().__init__(nsplits=4)
        self.stretch = stretch

    def get_proposal(
        self, moving: FloatArray, others: list[FloatArray], random: Any
    ) -> tuple[FloatArray, FloatArray]:
        """New positions, shape (n, d), and logs of the factors, shape (n,)."""
        count, dimension = moving.shape
        chosen = np.stack([part[random.randint(len(part), size=count)] for part in others])
        order = np.argsort(random.random_sample((3, count)), axis=0)
        centre, plus, minus = np.take_along_axis(chosen, order[:, :, None], axis=0)
        line = moving - centre
        length = np.linalg.norm(line, axis=1)
        along = line / np.maximum(length, np.finfo(float).tiny)[:, None]
        jump = self.stretch * np.sum(along * (plus - minus), axis=1)
        moved = np.abs(length + jump)
        tiny = np.finfo(float).tiny
        stretched = np.log(np.maximum(moved, tiny)) - np.log(np.maximum(length, tiny))
        return moving + jump[:, None] * along, (dimension - 1) * stretched


def moves() -> list[tuple[Any, float]]:
    """The mixture: differential evolution, now and then from mode to mode, and snooker.

    Differential evolution after ter Braak (2006, Stat. Comput. 16, 239); with a
    factor of 1 it carries walkers between separate modes.
    """
    return [
        (emcee.moves.DEMove(), 0.8),
        (emcee.moves.DEMove(gamma0=1.0), 0.1),
        (SnookerMove(), 0.1),
    ]
