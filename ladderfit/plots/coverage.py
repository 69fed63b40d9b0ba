"""Ranks of truths against what is uniform, one panel per quantity."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.coverage.outcome import DRAWS, Experiment
from ladderfit.coverage.ranks import LEVELS, POINTS, band, counts, covered
from ladderfit.names import PARAMETERS, base_name, group_of, parameter
from ladderfit.plots.theme import LIGHT, Theme, figure_of, new_figure, plain

COLUMNS = 4
_HEIGHT = 1.45  # inches a row


def coverage_figure(experiment: Experiment, *, theme: Theme = LIGHT) -> Figure:
    """How far the share of ranks below each point is from uniform, with the band.

    Parameters
    ----------
    experiment : Experiment
    theme : Theme

    Returns
    -------
    Figure
    """
    names = experiment.family
    rows = -(-len(names) // COLUMNS)
    with theme.applied():
        figure = new_figure(0.75 + _HEIGHT * rows)
        grid = figure.subplots(rows, COLUMNS, squeeze=False, sharex=True, sharey=True)
        for place, axes in enumerate(grid.ravel()):
            if place < len(names):
                rank_panel(experiment, names[place], axes, theme=theme)
                below = place + COLUMNS >= len(names)
                axes.tick_params(labelbottom=below)
            else:
                axes.remove()
        figure.supxlabel("Rank of the truth among the draws, as a share", fontsize=8.5)
        figure.supylabel("Share of ranks below, less uniform [%]", fontsize=8.5)
        handles = grid[0, 0].get_legend_handles_labels()
        figure.legend(*handles, loc="outside upper right", ncols=2)
    return figure


def rank_panel(experiment: Experiment, name: str, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """One quantity: the line leaves the band where the ranks are not uniform.

    Parameters
    ----------
    experiment : Experiment
    name : str
        A quantity.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    size, ranks = experiment.size, experiment.ranks[name]
    share = np.arange(POINTS + 1) / POINTS
    off = np.zeros(POINTS + 1)
    off[1:-1] = counts(ranks, DRAWS) / size - share[1:-1]
    low, high = (
        np.concatenate([[0.0], edge / size - share[1:-1], [0.0]])
        for edge in band(size, experiment.chance)
    )
    out = name in experiment.outside
    accent = theme.accent(1 if out else 0)
    axes.fill_between(
        share, 100.0 * low, 100.0 * high, color=theme.tint(theme.muted, 0.25), linewidth=0.0,
        label=f"band ({len(experiment.family)} together: 99 %)",
    )  # fmt: skip
    axes.axhline(0.0, color=theme.muted, linewidth=0.7)
    axes.step(share, 100.0 * off, where="mid", color=accent.colour, linestyle=accent.line,
              linewidth=1.2, label="ranks (dashed where outside)")  # fmt: skip
    inside = " / ".join(f"{100 * covered(ranks, level):.0f}" for level in LEVELS)
    title = f"{plain(_title(name))}\n{inside} %" + (", outside" if out else " covered")
    axes.set_title(title, fontsize=7.2, loc="left")
    axes.set_xlim(0.0, 1.0)
    axes.set_xticks([0.0, 0.5, 1.0], ["0", "0.5", "1"])
    axes.locator_params(axis="y", nbins=4)
    return figure_of(axes)


def _title(name: str) -> str:
    if base_name(name) not in PARAMETERS:
        return name
    words, group = parameter(name).words, group_of(name)
    short = words if len(words) < 28 else name.replace("_", " ")
    return short if group is None else f"{short} ({group})"
