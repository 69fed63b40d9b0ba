"""The headline parameters against one another: regions by probability, and the numbers."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Patch
from matplotlib.ticker import MaxNLocator

from ladderfit.names import parameter
from ladderfit.plots.density import Density
from ladderfit.plots.theme import COLUMN, LIGHT, WIDTH, Theme, figure_of, new_figure, symbol
from ladderfit.result import Result
from ladderfit.rounding import PROBABILITIES, Interval
from ladderfit.samples import FloatArray

_FILLS = (0.75, 0.35)  # strength of the colour, innermost region first
_CELLS = 90
_MOST = 10  # parameters that a page can hold
_IN_COLUMN = 3  # parameters that one column of a journal can hold
_RANK = {"hubble_constant": 0, "zero_point": 1, "peak_magnitude": 2, "slope": 3}
_FIRST = (
    "slope",
    "slope_beyond",
    "curvature",
    "zero_point",
    "metallicity",
    "scatter",
    "parallax_offset",
    "peak_magnitude",
    "peak_scatter",
    "hubble_constant",
)


def varying(result: Result) -> tuple[str, ...]:
    """The headline parameters that are not fixed."""
    return tuple(name for name in result.headline if np.ptp(result.draws[name]) > 0.0)


def shown(result: Result, width: float = WIDTH) -> tuple[str, ...]:
    """What a corner figure shows by default: all that vary, or the first in rank if too many."""
    every = varying(result)
    if width <= COLUMN:
        ranked = sorted(every, key=lambda name: _RANK.get(name, len(_RANK)))[:_IN_COLUMN]
        return tuple(name for name in every if name in ranked)
    return every if len(every) <= _MOST else tuple(name for name in every if name in _FIRST)


def limits(draws: FloatArray, floor: float) -> tuple[float, float]:
    """A range that holds 99.8 % of the draws with a margin, and does not cross a bound."""
    low, high = (float(end) for end in np.quantile(draws, [0.001, 0.999]))
    margin = 0.08 * (high - low)
    low, high = low - margin, high + margin
    return (max(low, floor), high) if np.isfinite(floor) else (low, high)


def _floor(result: Result, name: str) -> float:
    return float(result.choices.prior(name).bounds[0])


def marginal_panel(result: Result, name: str, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """One parameter's density, the mean and the central 68 %, with the numbers above.

    Parameters
    ----------
    result : Result
    name : str
        Of the parameter.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    draws, floor = result.draws[name], _floor(result, name)
    interval = Interval.of(draws)
    density = Density.of(draws[None, :], (floor,))
    low, high = limits(draws, floor)
    x = np.linspace(low, high, 240)
    y = density.at(x[None, :])
    accent = theme.accent(0)
    axes.plot(x, y, color=accent.colour, linewidth=1.2)
    inside = (x >= interval.low) & (x <= interval.high)
    axes.fill_between(
        x, y, where=inside.tolist(), color=theme.tint(accent.colour, _FILLS[1]), linewidth=0
    )
    axes.axvline(interval.mean, color=theme.ink, linewidth=0.9)
    axes.set_xlim(low, high)
    axes.set_ylim(0.0, 1.08 * float(np.max(y)))
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.set_title(f"{_words(name, ' ')}\n{interval}", fontsize=7.5)
    return figure_of(axes)


def joint_panel(
    result: Result, across: str, up: str, axes: Axes, *, theme: Theme = LIGHT
) -> Figure:
    """Two parameters: the smallest regions that hold 68 % and 95 % of the draws.

    Parameters
    ----------
    result : Result
    across, up : str
        Names of the parameters on the two axes.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    draws = np.stack([result.draws[across], result.draws[up]])
    floors = (_floor(result, across), _floor(result, up))
    density = Density.of(draws, floors)
    ranges = [limits(row, floor) for row, floor in zip(draws, floors, strict=True)]
    x, y = (np.linspace(low, high, _CELLS) for low, high in ranges)
    height = density.at(np.stack(np.meshgrid(x, y)))
    levels = [density.level(draws, chance) for chance in reversed(PROBABILITIES)]
    colour = theme.accent(0).colour
    axes.contourf(
        x,
        y,
        height,
        levels=[*levels, max(float(np.max(height)), levels[-1]) * 1.001],
        colors=[theme.tint(colour, fill) for fill in reversed(_FILLS)],
    )
    axes.contour(
        x,
        y,
        height,
        levels=levels,
        colors=[colour],
        linewidths=0.8,
        linestyles=[theme.accent(1).line, "-"],
    )
    axes.plot(*draws.mean(axis=1), marker="+", markersize=5, color=theme.paper, linestyle="none")
    axes.set_xlim(*ranges[0])
    axes.set_ylim(*ranges[1])
    return figure_of(axes)


def corner_figure(
    result: Result,
    names: Sequence[str] | None = None,
    *,
    theme: Theme = LIGHT,
    width: float = WIDTH,
) -> Figure | None:
    """Every pair of the headline parameters, and each on its own.

    Parameters
    ----------
    result : Result
    names : sequence of str, optional
        Which parameters, in which order; those of `shown` by default.
    theme : Theme
    width : float
        In inches; at page width the figure is as large as its panels need.

    Returns
    -------
    Figure or None
        None where nothing varies.

    Raises
    ------
    KeyError
        If a name is not among the draws.
    """
    chosen = shown(result, width) if names is None else tuple(names)
    if not chosen:
        return None
    size = len(chosen)
    with theme.applied():
        side = width if width <= COLUMN else max(3.0, min(0.95 * size + 0.9, 10.0))
        figure = new_figure(side, side)
        grid = figure.subplots(size, size, squeeze=False)
        for row, up in enumerate(chosen):
            for column, across in enumerate(chosen):
                axes = grid[row, column]
                if column > row:
                    axes.remove()
                    continue
                if column == row:
                    marginal_panel(result, up, axes, theme=theme)
                else:
                    joint_panel(result, across, up, axes, theme=theme)
                if column == row and width <= COLUMN:
                    axes.set_title(str(Interval.of(result.draws[up])), fontsize=7.5)
                _tidy(axes, across, up, first=column == 0 and row > 0, last=row == size - 1)
        figure.align_labels()
        _legend(figure, theme, outside=size < 3)
    return figure


def _tidy(axes: Axes, across: str, up: str, *, first: bool, last: bool) -> None:
    axes.grid(visible=False)
    axes.xaxis.set_major_locator(MaxNLocator(3, prune="both"))
    if axes.get_yticks().size:
        axes.yaxis.set_major_locator(MaxNLocator(3, prune="both"))
    axes.tick_params(labelbottom=last, labelleft=first, labelsize=6.5)
    axes.tick_params(axis="x", rotation=45)
    if last:
        axes.set_xlabel(_words(across), fontsize=8)
    if first:
        axes.set_ylabel(_words(up), fontsize=8)


def _words(name: str, between: str = "\n") -> str:
    unit = parameter(name).unit
    return symbol(name) + (f"{between}[{unit}]" if unit else "")


def _legend(figure: Figure, theme: Theme, *, outside: bool) -> None:
    colour = theme.accent(0).colour
    handles = [
        Patch(
            facecolor=theme.tint(colour, fill),
            edgecolor=colour,
            linestyle=line,
            label=f"{chance:.0%} of the probability".replace("%", " %"),
        )
        for chance, fill, line in zip(
            PROBABILITIES, _FILLS, ("-", theme.accent(1).line), strict=True
        )
    ]
    if outside:
        figure.legend(handles=handles, loc="outside lower center", fontsize=8.5)
    else:
        figure.legend(handles=handles, loc="upper right", fontsize=8.5)
