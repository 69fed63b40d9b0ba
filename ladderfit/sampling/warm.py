"""Drawing a ladder that changes a little at a time.

Star sums that a change does not touch are kept, and the mode is sought from where
it last was, so that the full joint posterior follows a control under the hand.
The draws are as independent as those of `draw`; only the look for further modes
is left to it.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from ladderfit.kernels.compiling import one_blas_thread
from ladderfit.kernels.reduced import SumTable
from ladderfit.ladder import Ladder
from ladderfit.posterior.determined import check_determined
from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.result import Result
from ladderfit.samples import FloatArray
from ladderfit.sampling.direct import Near, Target
from ladderfit.sampling.mode import Mode
from ladderfit.sampling.run import drawn, target

_NARROWEST = 1e-4  # of the prior's width: the least first step


class WarmDrawer:
    """Draws one ladder after another, each from where the last one was."""

    def __init__(self) -> None:
        self._last: Posterior | None = None
        self._mode: Mode | None = None
        self._phi: FloatArray | None = None
        self._pool: int | None = None

    @property
    def last(self) -> tuple[Posterior, FloatArray] | None:
        """The posterior drawn last, and its draws of phi, shape (n, d)."""
        return None if self._last is None or self._phi is None else (self._last, self._phi)

    def draw(self, ladder: Ladder, *, draws: int | None = None, seed: int | None = None) -> Result:
        """As `ladderfit.draw`, faster where `ladder` resembles the one before.

        Raises
        ------
        UndeterminedError
            If the distance scale is undetermined; the drawer keeps its last state.
        SamplingError
            If the posterior cannot be drawn.
        """
        return self._draw(ladder, draws, seed, None)

    def _draw(
        self, ladder: Ladder, draws: int | None, seed: int | None, pool: int | None
    ) -> Result:
        sampling = ladder.choices.sampling
        with one_blas_thread():
            joint = posterior(ladder, self._last)
            check_determined(joint)
            aim = target(joint)
            near = self._near(joint, aim)
            result, found = drawn(
                joint,
                aim if near is None else replace(aim, near=near, pool=pool),
                sampling.seed if seed is None else seed,
                sampling.draws if draws is None else draws,
            )
        self._last, self._phi, self._pool = joint, found.z, found.pool
        self._mode = found.modes[0] if len(found.modes) == 1 else None
        return result

    def aside(self, ladder: Ladder, *, draws: int | None = None, seed: int | None = None) -> Result:
        """As `draw`, but the drawer stays where it is.

        The result depends on where the drawer stands and on the arguments alone, to the
        last digit, not on what else was drawn aside.  Results drawn so with one seed share
        their random numbers, so that small differences show.

        Raises
        ------
        UndeterminedError
            If the distance scale is undetermined.
        SamplingError
            If the posterior cannot be drawn.
        """
        place = self._last, self._mode, self._phi, self._pool
        kept = [(tables, list(tables)) for tables in _tables(self._last)]
        try:
            return self._draw(ladder, draws, seed, self._pool)
        finally:
            self._last, self._mode, self._phi, self._pool = place
            for tables, before in kept:  # finer ones were put in for other scatters
                tables[:] = before

    def _near(self, joint: Posterior, aim: Target) -> Near | None:
        """The last mode, where its parameters still exist with the same kind of coordinate."""
        if self._last is None or self._mode is None:
            return None
        old = {coordinate.name: place for place, coordinate in enumerate(self._last.split.phi)}
        kinds = {coordinate.name: coordinate.kind for coordinate in self._last.split.phi}
        point, width = aim.start.copy(), 0.3 * aim.scale
        deviation = np.sqrt(np.diag(self._mode.covariance))
        for place, coordinate in enumerate(joint.split.phi):
            if kinds.get(coordinate.name) == coordinate.kind:
                before = old[coordinate.name]
                point[place] = self._mode.point[before]
                width[place] = max(deviation[before], _NARROWEST * aim.scale[place])
        return Near(point, width)


def _tables(joint: Posterior | None) -> list[list[SumTable]]:
    """The tabulated sums of a posterior, which later ones share with it."""
    blocks = () if joint is None else joint.blocks
    rows: list[Any] = [getattr(block, "rows", None) for block in blocks]
    return [each.tables for each in rows if hasattr(each, "tables")]
