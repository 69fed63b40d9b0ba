"""What alternatives do to the numbers, and where the error of a number comes from."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.alternatives import Comparison, Fit
from ladderfit.alternatives.systematics import changes_along
from ladderfit.alternatives.words import short
from ladderfit.names import label, parameter
from ladderfit.plots.theme import LIGHT, Theme, figure_of, new_figure, plain
from ladderfit.sensitivity.error_budget import TOTAL, budgeted

MOST_ROWS = 40  # fits that are shown one by one
_LETTERS = 46
_ROW = 0.19  # inches


def alternatives_figure(comparison: Comparison, *, theme: Theme = LIGHT) -> Figure:
    """Every fit in a row of its own; where there are many, a row of points per axis.

    Parameters
    ----------
    comparison : Comparison
    theme : Theme

    Returns
    -------
    Figure
    """
    many = len(comparison.fits) > MOST_ROWS
    rows = len(comparison.axes) if many else 1 + len(comparison.fits)
    with theme.applied():
        figure = _framed(1.0 + _ROW * max(rows, 3) * (1.6 if many else 1.0))
        panels = figure.subplots(1, len(comparison.shown), squeeze=False)[0]
        for place, (name, axes) in enumerate(zip(comparison.shown, panels, strict=True)):
            if many:
                axis_panel(comparison, name, axes, theme=theme)
            else:
                fit_panel(comparison, name, axes, theme=theme)
            if place:
                axes.tick_params(axis="y", labelleft=False)
        handles = panels[0].get_legend_handles_labels()
        figure.legend(*handles, loc="outside upper right", ncols=3)
    return figure


def fit_panel(comparison: Comparison, name: str, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """One parameter of every fit: mean and standard deviation, over the baseline's.

    Open symbols are fits whose Pareto k is not to be trusted; a fit without numbers has
    an empty row that says so.

    Parameters
    ----------
    comparison : Comparison
    name : str
        A parameter.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    fits = [comparison.baseline, *comparison.fits]
    mean, sd = comparison.baseline.mean(name), comparison.baseline.sd(name)
    axes.axvspan(
        mean - sd, mean + sd, color=theme.tint(theme.muted, 0.25), linewidth=0.0,
        label="baseline ± its standard deviation",
    )  # fmt: skip
    axes.axvline(mean, color=theme.muted, linewidth=0.9)
    for row, fit in enumerate(fits):
        if not np.isfinite(fit.mean(name)):
            words = "not fitted" if fit.done else fit.outcome.status
            axes.text(
                mean, row, words, va="center", ha="center", fontsize=7.0, color=theme.ink,
                bbox={"facecolor": theme.paper, "edgecolor": "none", "pad": 1.5},
            )  # fmt: skip
            continue
        accent = theme.accent(0 if row == 0 else 1)
        axes.errorbar(
            fit.mean(name), row, xerr=fit.sd(name), marker=accent.marker, markersize=3.8,
            color=accent.colour, elinewidth=1.1, linestyle="none",
            markerfacecolor=accent.colour if fit.trusted else theme.paper,
        )  # fmt: skip
    axes.set_yticks(range(len(fits)), [plain(_ticks(fit)) for fit in fits])
    _rows(axes, len(fits))
    _rule_axes(axes, fits, theme)
    axes.set_xlabel(label(name))
    axes.locator_params(axis="x", nbins=4)
    return figure_of(axes)


def axis_panel(comparison: Comparison, name: str, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """How far each axis alone moves one parameter, a point per fit, in the baseline's errors.

    Parameters
    ----------
    comparison : Comparison
    name : str
        A parameter.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    accent = theme.accent(1)
    axes.axvspan(
        -1.0, 1.0, color=theme.tint(theme.muted, 0.25), linewidth=0.0,
        label="the baseline's standard deviation",
    )  # fmt: skip
    axes.axvline(0.0, color=theme.muted, linewidth=0.9)
    names = []
    for row, axis in enumerate(comparison.axes):
        changes = np.array([change for _, change in changes_along(comparison, axis, name)])
        shown = changes / comparison.baseline.sd(name)
        axes.plot(
            shown, np.full(len(shown), row), "|", color=accent.colour, alpha=0.5, markersize=9.0
        )
        names.append(f"{_cut(axis)} ({len(shown):,})")
    axes.set_yticks(range(len(names)), [plain(each) for each in names])
    _rows(axes, len(names))
    axes.set_xlabel(f"Change of {parameter(name).symbol}\n[baseline's errors]")
    axes.locator_params(axis="x", nbins=4)
    return figure_of(axes)


def budget_figure(budget: pd.DataFrame, *, theme: Theme = LIGHT) -> Figure | None:
    """Shares of the variance of each number by source, as bars.

    Parameters
    ----------
    budget : DataFrame
        From `ladderfit.sensitivity.error_budget.error_budget`.
    theme : Theme

    Returns
    -------
    Figure or None
        None where the budget has no number.
    """
    names = budgeted(budget)
    sources = [str(source) for source in budget.index if source != TOTAL]
    if not names:
        return None
    with theme.applied():
        figure = _framed(0.9 + 0.24 * max(len(sources), 3))
        panels = figure.subplots(1, len(names), squeeze=False, sharey=True)[0]
        for place, (name, axes) in enumerate(zip(names, panels, strict=True)):
            accent = theme.accent(place)
            shares = 100.0 * budget.loc[sources, f"{name}_share"].clip(lower=0.0)
            bars = axes.barh(range(len(sources)), shares, height=0.6, color=accent.colour)
            axes.bar_label(bars, [_per_cent(share) for share in shares], padding=2, fontsize=7.0)
            axes.set_xlim(0.0, 1.22 * float(shares.max()))
            axes.set_yticks(range(len(sources)), [plain(source) for source in sources])
            _rows(axes, len(sources))
            axes.set_xlabel(f"Share of the variance\nof {parameter(name).symbol} [%]")
            axes.locator_params(axis="x", nbins=4)
    return figure


def comparison_figures(
    comparison: Comparison, budget: pd.DataFrame, *, theme: Theme = LIGHT
) -> Iterator[tuple[str, Figure]]:
    """The figures of a comparison by name: ``alternatives``, and ``budget`` where there is one."""
    yield "alternatives", alternatives_figure(comparison, theme=theme)
    figure = budget_figure(budget, theme=theme)
    if figure is not None:
        yield "budget", figure


def _framed(height: float) -> Figure:
    """A figure with some air beside its long names."""
    figure = new_figure(height)
    figure.set_layout_engine("constrained", w_pad=0.09)
    return figure


def _per_cent(share: float) -> str:
    return f"{share:.0f}" if share >= 0.95 else "<1"


def _ticks(fit: Fit) -> str:
    return short(fit, _LETTERS)


def _cut(text: str) -> str:
    return text if len(text) <= _LETTERS else f"{text[: _LETTERS - 3]}..."


def _rows(axes: Axes, count: int) -> None:
    axes.tick_params(axis="y", length=0)
    axes.set_ylim(count - 0.4, -0.6)
    axes.grid(visible=False, axis="y")


def _rule_axes(axes: Axes, fits: Sequence[Fit], theme: Theme) -> None:
    """Thin lines between rows of different axes."""
    for row in range(1, len(fits)):
        if fits[row].alternative.axes != fits[row - 1].alternative.axes:
            axes.axhline(row - 0.5, color=theme.grid, linewidth=0.6, zorder=0.5)
