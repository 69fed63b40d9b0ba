"""Anchors against each other: each alone, each left out, and how far each is from the rest."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.transforms import blended_transform_factory

from ladderfit.anchors import AnchorCase, AnchorComparison
from ladderfit.names import label
from ladderfit.plots.theme import LIGHT, Theme, figure_of, new_figure, plain
from ladderfit.result import Result
from ladderfit.samples import FloatArray

_SHOWN = ("zero_point", "hubble_constant")
_ROW = 0.42  # inches
_APART = 0.16  # rows between the two marks of an anchor


def anchors_figure(comparison: AnchorComparison, *, theme: Theme = LIGHT) -> Figure:
    """A row per anchor: the numbers with it alone and without it, and its tension.

    Parameters
    ----------
    comparison : AnchorComparison
    theme : Theme

    Returns
    -------
    Figure
    """
    shown = [name for name in _SHOWN if name in comparison.followed] or comparison.followed[:1]
    with theme.applied():
        rows = len(comparison.cases) + (comparison.free is not None)
        figure = new_figure(1.15 + _ROW * max(rows, 2))
        panels = figure.subplots(1, len(shown) + 1, squeeze=False)[0]
        for place, (name, axes) in enumerate(zip(shown, panels, strict=False)):
            alone_panel(comparison, name, axes, theme=theme)
            if place:
                axes.tick_params(axis="y", labelleft=False)
        tension_panel(comparison.cases, panels[-1], theme=theme)
        panels[-1].tick_params(axis="y", labelleft=False)
        panels[-1].set_ylim(*panels[0].get_ylim())
        handles = panels[0].get_legend_handles_labels()
        figure.legend(*handles, loc="outside upper center", ncols=4)
    return figure


def alone_panel(
    comparison: AnchorComparison, name: str, axes: Axes, *, theme: Theme = LIGHT
) -> Figure:
    """One parameter with each anchor alone and without each; the band is the fit with all.

    Parameters
    ----------
    comparison : AnchorComparison
    name : str
        A followed parameter.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    mean, sd = comparison.base.mean(name), comparison.base.sd(name)
    band = theme.tint(theme.muted, 0.25)
    axes.axvspan(mean - sd, mean + sd, color=band, linewidth=0.0, label="anchors as they are")
    axes.axvline(mean, color=theme.muted, linewidth=0.9)
    kinds: Sequence[tuple[str, str, float, int]] = (
        ("alone", "this anchor alone", -_APART, 1),
        ("without", "without this anchor", _APART, 0),
    )
    for field, words, shift, accent in kinds:
        results = [getattr(case, field) for case in comparison.cases]
        rows = np.arange(len(results), dtype=np.float64) + shift
        _marks(axes, name, results, rows, words, accent, theme)
    names = [_row_name(case) for case in comparison.cases]
    if comparison.free is not None:
        row = np.array([float(len(names))])
        _marks(axes, name, [comparison.free], row, "all zero points free", 2, theme)
        names.append("free zero points")
    axes.set_yticks(range(len(names)), [plain(each) for each in names])
    axes.tick_params(axis="y", length=0)
    axes.set_ylim(len(names) - 0.5, -0.5)
    axes.set_xlabel(label(name))
    axes.locator_params(axis="x", nbins=5)
    return figure_of(axes)


def _row_name(case: AnchorCase) -> str:
    name = case.anchor.removeprefix("the ")
    if not case.in_use:
        return f"{name} (not in use)"
    return name if not np.isfinite(case.weight) else f"{name} (weight {100.0 * case.weight:.0f} %)"


def _marks(
    axes: Axes,
    name: str,
    results: Sequence[Result | None],
    rows: FloatArray,
    words: str,
    index: int,
    theme: Theme,
) -> None:
    known = [
        (result.mean(name), result.sd(name), row)
        for result, row in zip(results, rows.tolist(), strict=True)
        if result is not None and name in result.draws
    ]
    if not known:
        return
    means, errors, places = np.array(known).T
    accent = theme.accent(index)
    axes.errorbar(
        means, places, xerr=errors, linestyle="none", marker=accent.marker, markersize=4.0,
        color=accent.colour, elinewidth=1.2, label=words,
    )  # fmt: skip


def tension_panel(cases: Sequence[AnchorCase], axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Each anchor's own value minus what the ladder says without it, and in deviations.

    Of a geometric anchor it is the modulus, of the parallaxes the zero point.

    Parameters
    ----------
    cases : sequence of AnchorCase
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    axes.axvline(0.0, color=theme.muted, linewidth=0.9)
    accent = theme.accent(3)
    beside = blended_transform_factory(axes.transAxes, axes.transData)
    for row, case in enumerate(cases):
        tension = case.tension
        words = "nothing to compare" if tension is None else f"{tension.deviations:.1f} sd"
        axes.text(1.03, row, words, transform=beside, va="center", fontsize=7.5)
        if tension is not None:
            axes.errorbar(
                tension.difference, row, xerr=tension.error, linestyle="none",
                marker=accent.marker, markersize=4.5, color=accent.colour, elinewidth=1.2,
            )  # fmt: skip
    axes.set_yticks(range(len(cases)), [plain(case.anchor) for case in cases])
    axes.tick_params(axis="y", length=0)
    axes.set_ylim(len(cases) - 0.5, -0.5)
    axes.set_xlabel("Own value minus prediction\nwithout it [mag]")
    axes.locator_params(axis="x", nbins=5)
    return figure_of(axes)
