"""The joint posterior of the headline numbers; axes are made once, their contents anew."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from ladderfit.names import parameter
from ladderfit.plots.corner import joint_panel, marginal_panel, varying
from ladderfit.plots.density import Density
from ladderfit.plots.theme import Theme, symbol
from ladderfit.result import Result
from ladderfit.rounding import PROBABILITIES
from ladderfit.workbench.canvas.margins import margins, place_label
from ladderfit.workbench.points import Points
from ladderfit.workbench.shown import Shown

CORNER = ("slope", "zero_point", "metallicity", "peak_magnitude", "hubble_constant")
_OTHERS = ("scatter", "parallax_offset", "velocity_constant", "velocity_scatter", "peak_scatter")
_LEAST = 3
_CELLS = 60
_IN_FULL = "\ndotted: the long run of the same choices"
_WORDS = "filled: smallest regions with 68 % and 95 % of the probability"


def corner_names(result: Result) -> tuple[str, ...]:
    """What the small corner shows: the headline numbers, filled up to three."""
    known = varying(result)
    chosen = [name for name in CORNER if name in known]
    chosen += [name for name in _OTHERS if name in known][: max(_LEAST - len(chosen), 0)]
    return tuple(chosen)


class CornerView:
    """Pairs of parameters below, each on its own on the diagonal.

    Attributes
    ----------
    names : tuple of str
        The parameters; for others another view is needed.
    """

    def __init__(self, figure: Figure, shown: Shown, theme: Theme) -> None:
        self.names = names = corner_names(shown.result)
        self.theme = theme
        self.points: list[Points] = []
        size = max(len(names), 1)
        margins(figure, 66, 8, 26, 50, hspace=0.08, wspace=0.08)
        grid = figure.add_gridspec(size, size)
        self._axes = {
            (row, column): figure.add_subplot(grid[row, column])
            for row in range(len(names))
            for column in range(row + 1)
        }
        for (row, column), axes in self._axes.items():
            self._tidy(axes, row, column)
        self._words = figure.text(0.985, 0.95, _WORDS, ha="right", va="top", fontsize=8)

    def fits(self, shown: Shown) -> bool:
        """Whether the same parameters vary."""
        return self.names == corner_names(shown.result)

    def update(self, shown: Shown) -> None:
        """Show a posterior."""
        result, full = shown.result, shown.full
        self._words.set_text(_WORDS + (_IN_FULL if full is not None else ""))
        for (row, column), axes in self._axes.items():
            for artist in [*axes.lines, *axes.collections]:
                artist.remove()
            if row == column:
                marginal_panel(result, self.names[row], axes, theme=self.theme)
                axes.set_title("")
            else:
                joint_panel(result, self.names[column], self.names[row], axes, theme=self.theme)
            if full is not None:
                self._outline(full, self.names[column], self.names[row], axes)

    def _outline(self, full: Result, across: str, up: str, axes: Axes) -> None:
        """A long run's density or regions as dotted lines, within the limits that there are."""
        if not {across, up} <= set(varying(full)):
            return
        style: dict[str, Any] = {"linestyles": ":", "linewidths": 1.1}
        x = np.linspace(*axes.get_xlim(), _CELLS)
        if across == up:
            draws = full.draws[across][None, :]
            height = Density.of(draws, (-np.inf,)).at(x[None, :])
            live = np.asarray(axes.lines[0].get_xydata())  # drawn to the same area
            height *= np.trapezoid(live[:, 1], live[:, 0]) / np.trapezoid(height, x)
            axes.plot(x, height, color=self.theme.ink, linestyle=":", linewidth=1.1)
            return
        draws = np.stack([full.draws[across], full.draws[up]])
        density = Density.of(draws, (-np.inf, -np.inf))
        y = np.linspace(*axes.get_ylim(), _CELLS)
        levels = sorted(density.level(draws, chance) for chance in PROBABILITIES)
        height = density.at(np.stack(np.meshgrid(x, y)))
        axes.contour(x, y, height, levels=levels, colors=[self.theme.ink], zorder=3.5, **style)

    def _tidy(self, axes: Axes, row: int, column: int) -> None:
        across, up = self.names[column], self.names[row]
        last, first = row == len(self.names) - 1, column == 0 and row > 0
        axes.grid(visible=False)
        axes.xaxis.set_major_locator(MaxNLocator(2, prune="both"))
        if row != column:
            axes.yaxis.set_major_locator(MaxNLocator(2, prune="both"))
        axes.tick_params(labelbottom=last, labelleft=first, labelsize=7)
        if last:
            unit = parameter(across).unit
            axes.set_xlabel(
                symbol(across) + (f" [{unit}]" if unit else ""), fontsize=8.5, labelpad=2
            )
        if first:
            axes.set_ylabel(symbol(up), fontsize=8.5)
            place_label(axes, 42)
