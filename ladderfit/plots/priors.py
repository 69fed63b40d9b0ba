"""Which numbers the prior makes: sensitivity to priors and data, and prior by prior."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.plots.theme import LIGHT, Theme, figure_of, new_figure, symbol
from ladderfit.rounding import MINUS
from ladderfit.sensitivity.power_scaling import SENSITIVE, PriorSensitivity

MOST_PRIORS = 7
_ROW = 0.26  # inches
_FEWEST = 3  # columns
_LEAST = 0.004  # sensitivity that chance makes


def priors_figure(sensitivity: PriorSensitivity, *, theme: Theme = LIGHT) -> Figure:
    """Sensitivities of every parameter, and beside them what each prior does to it.

    Parameters
    ----------
    sensitivity : PriorSensitivity
    theme : Theme

    Returns
    -------
    Figure
    """
    with theme.applied():
        rows = len(sensitivity.table)
        figure = new_figure(1.3 + _ROW * max(rows, 3))
        left, right = figure.subplots(1, 2, width_ratios=[1.0, 1.25])
        sensitivity_panel(sensitivity, left, theme=theme)
        components_panel(sensitivity, right, theme=theme)
        figure.legend(*left.get_legend_handles_labels(), loc="outside lower left", ncols=3)
    return figure


def sensitivity_panel(sensitivity: PriorSensitivity, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """A row per parameter: its sensitivity to all priors together, and to the likelihood.

    Parameters
    ----------
    sensitivity : PriorSensitivity
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    table = sensitivity.table
    rows = np.arange(len(table))
    axes.axvline(
        SENSITIVE, color=theme.muted, linewidth=0.9, linestyle=(0, (4, 2)), label="worth a look"
    )
    for column, words, index in (("likelihood", "data", 0), ("prior", "priors", 1)):
        accent = theme.accent(index)
        axes.plot(
            table[column].to_numpy(), rows, linestyle="none", marker=accent.marker,
            markersize=4.5, color=accent.colour, label=words,
        )  # fmt: skip
    axes.set_yticks(rows, [symbol(str(name)) for name in table.index])
    axes.tick_params(axis="y", length=0)
    axes.set_ylim(len(table) - 0.5, -0.5)
    axes.set_xlim(left=-0.02 * axes.get_xlim()[1])
    axes.set_xlabel("Change of the distribution per doubling\nof the power (0: none)")
    axes.locator_params(axis="x", nbins=5)
    return figure_of(axes)


def components_panel(sensitivity: PriorSensitivity, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """What each prior (column) does to each parameter (row).

    A cell is the darker the more the parameter's distribution changes; the number is
    the change of its mean per doubling of the prior's power, in its errors.

    Parameters
    ----------
    sensitivity : PriorSensitivity
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    largest = sensitivity.components.max(axis=0).sort_values(ascending=False)
    columns = [str(name) for name in largest.index[:MOST_PRIORS] if largest[name] > _LEAST]
    sizes = sensitivity.components[columns].to_numpy()
    shifts = sensitivity.shifts[columns].to_numpy()
    axes.grid(visible=False)
    for row, column in np.ndindex(sizes.shape):
        size = float(sizes[row, column])
        if size <= _LEAST:
            continue
        strength = min(size / (2.0 * SENSITIVE), 1.0)
        axes.fill_between(
            [column - 0.5, column + 0.5], row - 0.5, row + 0.5, linewidth=0.0,
            color=theme.tint(theme.accent(1).colour, 0.12 + 0.5 * strength),
        )  # fmt: skip
        value = round(float(shifts[row, column]), 2)
        text = f"{value:+.2f}".replace("-", MINUS) if value else "0.00"
        axes.text(column, row, text, ha="center", va="center", fontsize=7.0)
    axes.set_xticks(range(len(columns)), [symbol(name) for name in columns])
    axes.set_yticks(range(len(sizes)), [symbol(str(n)) for n in sensitivity.components.index])
    axes.tick_params(axis="both", length=0)
    axes.set_xlim(-0.5, max(len(columns), _FEWEST) - 0.5)
    axes.set_ylim(len(sizes) - 0.5, -0.5)
    axes.set_xlabel("Prior; change of the mean per doubling\nof its power [errors]")
    if not columns:
        axes.text(
            0.5, 0.5, "no prior moves anything", transform=axes.transAxes, ha="center", va="center"
        )
    return figure_of(axes)
