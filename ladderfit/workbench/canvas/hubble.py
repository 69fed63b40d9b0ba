"""The Hubble diagram with residuals and their running mean, and H0 along the redshift cuts."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from ladderfit.checks.residuals import Residuals, flow_residuals, peak_residuals, velocity_residuals
from ladderfit.checks.running import running_mean
from ladderfit.names import parameter
from ladderfit.plots.cuts import cut_panel
from ladderfit.plots.hubble import flow_panel, peak_panel, velocity_panel
from ladderfit.plots.theme import Accent, Theme, brighter_up, symmetric
from ladderfit.workbench.canvas.margins import margins, place_label
from ladderfit.workbench.points import Points
from ladderfit.workbench.shown import Shown


def hubble(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """Supernovae in hosts and in the expansion, or velocities against distances."""
    result = shown.result
    velocities = velocity_residuals(result)
    columns: list[tuple[Residuals, str, str, Any]] = []
    if velocities is not None:
        columns.append((velocities, "expansion", "Distance [Mpc]", velocity_panel))
    else:
        peaks, flow = peak_residuals(result), flow_residuals(result)
        if peaks is not None:
            columns.append((peaks, "supernovae", "Modulus of the host [mag]", peak_panel))
        if flow is not None:
            columns.append((flow, "expansion", "Redshift", flow_panel))
    if not columns:
        return []
    unit = "mag" if velocities is None else "km/s"
    grid = figure.subplots(
        2,
        len(columns),
        sharex="col",
        height_ratios=[2.0, 1.0],
        width_ratios=[1.0, 1.4] if len(columns) == 2 else [1],
        squeeze=False,
    )
    margins(figure, 64, 10, 24, 44, hspace=0.07, wspace=0.17)
    found = []
    for place, (data, section, words, panel) in enumerate(columns):
        top, bottom = grid[0, place], grid[1, place]
        panel(result, top, theme=theme)
        _left_over(bottom, data, theme.accent(2 if section == "supernovae" else 0), theme)
        bottom.set_xlabel(words, labelpad=1)
        top.set_ylabel("")
        if unit == "mag":
            brighter_up(bottom)
            for text in top.texts:  # the strip of numbers is right above
                text.set_visible(False)
        found.append(_points(top, data, section, unit, data.data))
        found.append(_points(bottom, data, section, unit, data.residual))
    grid[0, 0].set_ylabel("Peak magnitude [mag]" if unit == "mag" else "Velocity [km/s]")
    grid[1, 0].set_ylabel(f"Residual [{unit}]")
    for axes in grid[:, 0]:
        place_label(axes, 46)
    return found


def _left_over(axes: Axes, data: Residuals, accent: Accent, theme: Theme) -> None:
    axes.axhline(0.0, color=theme.ink, linewidth=0.8)
    axes.errorbar(
        data.x,
        data.residual,
        yerr=data.sd,
        linestyle="none",
        marker=accent.marker,
        markersize=2.6,
        elinewidth=0.7,
        color=accent.colour,
        ecolor=theme.tint(accent.colour, 0.45),
    )
    symmetric(axes, np.abs(data.residual) + data.sd, data.sd)
    axes.yaxis.set_major_locator(MaxNLocator(4, prune="both"))
    mean = running_mean(data)
    if mean is None:
        return
    line = theme.accent(1).colour
    low, high = mean.mean - mean.error, mean.mean + mean.error
    axes.fill_between(mean.x, low, high, color=line, alpha=0.3, linewidth=0, zorder=2.7)
    axes.plot(mean.x, mean.mean, color=line, linewidth=1.5, linestyle=(0, (4, 1.5)), zorder=2.8)
    axes.annotate(
        f"dashed: running mean of {mean.size}, and its error",
        (0.99, 1.0),
        xycoords="axes fraction",
        xytext=(0, -1),
        textcoords="offset points",
        ha="right",
        va="top",
        fontsize=7.0,
    )


def _points(axes: Axes, data: Residuals, section: str, unit: str, y: Any) -> Points:
    nobody = [""] * len(data)
    return Points(axes, data.x, y, data.name, nobody, section, data.residual, data.sd, unit=unit)


def cuts(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """The Hubble constant along the lower and the upper redshift cut."""
    left, right = figure.subplots(1, 2, sharey=True)
    margins(figure, 64, 10, 24, 44, wspace=0.08)
    cut_panel(shown.worked, left, lower=True, theme=theme)
    cut_panel(shown.worked, right, lower=False, theme=theme)
    known = parameter("hubble_constant")
    left.set_ylabel(f"{known.words} [{known.unit}]")
    place_label(left, 46)
    ends = zip((left, right), ("Lower", "Upper"), shown.worked.chosen, strict=True)
    for axes, words, chosen in ends:
        axes.set_xlabel(f"{words} redshift cut ({chosen:g} chosen)", labelpad=1)
    low, high = left.get_ylim()
    left.set_ylim(low, high + 0.2 * (high - low))  # room for the legend
    left.legend(loc="upper left", borderaxespad=0.1)
    return []
