"""Choices on trial: anchors against each other, what is left out, priors, alternatives."""

from __future__ import annotations

from typing import Any

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.alternatives import Comparison
from ladderfit.anchors import AnchorComparison
from ladderfit.influence import Influence
from ladderfit.influence.sets import HOST
from ladderfit.names import label
from ladderfit.plots.alternatives import axis_panel, fit_panel
from ladderfit.plots.anchors import alone_panel, tension_panel
from ladderfit.plots.influence import ranked_panel
from ladderfit.plots.priors import components_panel, sensitivity_panel
from ladderfit.plots.theme import Theme
from ladderfit.sensitivity.power_scaling import PriorSensitivity
from ladderfit.workbench.canvas.margins import margins
from ladderfit.workbench.points import Points
from ladderfit.workbench.shown import Shown

_WIDE = 6.0  # inches from which there is room for one more panel
MOST_OBJECTS, MOST_FITS = 11, 12  # rows that there is room for
_LETTERS = 30
TARGETS = {"anchors": "zero_point", "cepheids": "zero_point"}


def anchors(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """Numbers with each anchor alone and without it, and its tension."""
    comparison: AnchorComparison = shown.worked
    wide = figure.get_figwidth() >= _WIDE
    wanted = ("zero_point", "hubble_constant")[: 2 if wide else 1]
    names = [name for name in wanted if name in comparison.followed] or comparison.followed[:1]
    panels = figure.subplots(1, len(names) + 1, squeeze=False)[0]
    margins(figure, 134, 58, 28, 58, wspace=0.14)
    for name, axes in zip(names, panels, strict=False):
        alone_panel(comparison, name, axes, theme=theme)
        _tidy(axes, 3)
    tension_panel(comparison.cases, panels[-1], theme=theme)
    _tidy(panels[-1], 3)
    panels[-1].set_xlabel("Own value minus\nprediction without it [mag]")
    panels[-1].set_ylim(*panels[0].get_ylim())
    for axes in panels[1:]:
        axes.tick_params(axis="y", labelleft=False)
    _legend(figure, [panels[0]], 4)
    return []


def influence(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """The objects, and the hosts, that move a number most when they are left out."""
    found: Influence = shown.worked
    name = target_of(found, shown.rung)
    table = found.by(name)
    singles = table[table["kind"] != HOST]
    hosts = table[table["kind"] == HOST]
    parts = [part for part in (singles, hosts) if len(part)]
    if not parts:
        return []
    panels = figure.subplots(1, len(parts), squeeze=False)[0]
    margins(figure, 116, 10, 40, 44, wspace=0.68)
    for part, axes in zip(parts, panels, strict=True):
        ranked_panel(part.head(MOST_OBJECTS), name, found.errors[name], axes, theme=theme)
        words = "hosts" if part["kind"].iloc[0] == HOST else "objects"
        axes.set_title(f"{min(len(part), MOST_OBJECTS)} of {len(part):,} {words}", loc="left")
        axes.set_xlabel(f"Change of {label(name)}")
        _tidy(axes, 4)
    _legend(figure, list(panels), 5)
    return []


def target_of(found: Influence, rung: str) -> str:
    """The number that a rung is asked about."""
    wanted = (TARGETS.get(rung, "hubble_constant"), "hubble_constant", "zero_point")
    return next((name for name in wanted if name in found.targets), found.targets[0])


def sensitivity(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """How much each number owes to priors and data, and to which prior."""
    found: PriorSensitivity = shown.worked
    left, right = figure.subplots(1, 2, width_ratios=[1.0, 1.3])
    margins(figure, 44, 10, 28, 58, wspace=0.24)
    sensitivity_panel(found, left, theme=theme)
    components_panel(found, right, theme=theme)
    left.set_xlabel("Change per doubling\nof the power (0: none)")
    right.set_xlabel("Prior; change of the mean per doubling\nof its power [errors]")
    for axes in (left, right):
        axes.xaxis.labelpad = 1
    _legend(figure, [left], 3)
    return []


def alternatives(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """Every fit in a row, or, where there are many, a row of points per axis."""
    comparison: Comparison = shown.worked
    wide = figure.get_figwidth() >= _WIDE
    names = comparison.shown[: 2 if wide else 1]
    if "hubble_constant" in comparison.shown and not wide:
        names = ("hubble_constant",)
    many = len(comparison.fits) > MOST_FITS
    panels = figure.subplots(1, len(names), squeeze=False)[0]
    margins(figure, 206, 12, 28, 58 if many else 44, wspace=0.1)
    for place, (name, axes) in enumerate(zip(names, panels, strict=True)):
        (axis_panel if many else fit_panel)(comparison, name, axes, theme=theme)
        axes.set_yticks(axes.get_yticks(), [_cut(tick) for tick in axes.get_yticklabels()])
        _tidy(axes, 4)
        if place:
            axes.tick_params(axis="y", labelleft=False)
    _legend(figure, [panels[0]], 3)
    return []


def _cut(tick: Any) -> str:
    text = str(tick.get_text())
    return text if len(text) <= _LETTERS else f"…{text[1 - _LETTERS :]}"


def _tidy(axes: Axes, bins: int) -> None:
    axes.tick_params(axis="y", labelsize=7.0)
    axes.locator_params(axis="x", nbins=bins)
    axes.xaxis.labelpad = 1


def _legend(figure: Figure, panels: list[Axes], columns: int) -> None:
    """One legend for all panels, in the top margin."""
    handles: dict[str, Any] = {}
    for axes in panels:
        for handle, words in zip(*axes.get_legend_handles_labels(), strict=True):
            handles.setdefault(words, handle)
    if handles:
        figure.legend(
            list(handles.values()),
            list(handles),
            loc="upper right",
            ncols=columns,
            bbox_to_anchor=(0.995, 1.0),
            borderaxespad=0.2,
            columnspacing=1.0,
            fontsize=7.0,
        )
