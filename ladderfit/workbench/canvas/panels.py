"""Host moduli, and residuals against a column."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.plots.moduli import difference_panel, host_moduli, modulus_panel
from ladderfit.plots.theme import Theme, brighter_up, plain, symmetric
from ladderfit.workbench.canvas.margins import margins
from ladderfit.workbench.columns import ColumnResiduals, against_column
from ladderfit.workbench.points import Points
from ladderfit.workbench.shown import Shown

_MOST_ROWS = 24


def moduli(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """Every host's modulus, and what its own evidence says."""
    entries = host_moduli(shown.result)
    if not entries:
        return []
    left, right = figure.subplots(1, 2, width_ratios=[1.0, 1.25])
    margins(figure, 70, 10, 24, 42, wspace=0.5)
    modulus_panel(entries, left, theme=theme)
    difference_panel(entries, right, theme=theme)
    few = len(entries) <= _MOST_ROWS
    for text in left.texts:
        text.set_fontsize(6.8)
        text.set_visible(few)
    if not few:
        step = -(-len(entries) // _MOST_ROWS)
        rows = range(0, len(entries), step)
        left.set_yticks(list(rows), [plain(entries[row].host) for row in rows])
    left.tick_params(axis="y", labelsize=6.8)
    handles, labels = right.get_legend_handles_labels()
    figure.legend(
        handles, labels, loc="upper right", ncols=3, borderaxespad=0.2, bbox_to_anchor=(0.99, 1.0)
    )
    return []


def column(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """Residuals against a column of the table."""
    found = against_column(shown.result, shown.rung, shown.column)
    axes = figure.subplots()
    margins(figure, 70, 10, 22, 44)
    if found is None or not len(found.x):
        axes.set_axis_off()
        axes.text(0.5, 0.5, "no such numbers here", ha="center", transform=axes.transAxes)
        return []
    return [_column_points(axes, found, theme)]


def _column_points(axes: Axes, found: ColumnResiduals, theme: Theme) -> Points:
    data, accent = found.residuals, theme.accent(0)
    few = len(data) <= 150
    axes.axhline(0.0, color=theme.ink, linewidth=0.8)
    axes.errorbar(
        found.x,
        data.residual,
        yerr=data.sd if few else None,
        **accent.points(3.4 if few else 2.6, 0.7),
    )
    x, mean, error = _binned(found)
    axes.errorbar(
        x,
        mean,
        yerr=error,
        linestyle="none",
        marker="o",
        markersize=5.0,
        markerfacecolor=theme.paper,
        color=theme.ink,
        zorder=3.4,
        label="weighted means in bins of equal numbers",
    )
    symmetric(axes, np.abs(data.residual) + (data.sd if few else 0.0), data.sd)
    if found.data_unit == "mag":
        brighter_up(axes)
    axes.set_xlabel(
        plain(found.column) + (f" [{plain(found.unit)}]" if found.unit else ""), labelpad=1
    )
    axes.set_ylabel(f"Residual [{found.data_unit}]")
    if len(x):
        axes.legend(loc="upper left", bbox_to_anchor=(0.0, 1.08), borderaxespad=0.0)
    nobody = [""] * len(data)
    return Points(
        axes, found.x, data.residual, data.name, nobody, found.section, data.residual, data.sd,
        unit=found.data_unit,
    )  # fmt: skip


def _binned(found: ColumnResiduals) -> tuple[Any, Any, Any]:
    data = found.residuals
    if len(data) < 20:
        return [], [], []
    parts = np.array_split(np.argsort(found.x, kind="stable"), int(np.clip(len(data) // 25, 4, 10)))
    weights = [data.sd[part] ** -2 for part in parts]
    mean = [np.average(data.residual[p], weights=w) for p, w in zip(parts, weights, strict=True)]
    return (
        [float(np.mean(found.x[part])) for part in parts],
        mean,
        [float(np.sum(weight)) ** -0.5 for weight in weights],
    )
