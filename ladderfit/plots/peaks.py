"""The peak-magnitude relation, term by term: width, decline rate, colour, host mass."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.checks.peak_views import PeakView, measured_line, peak_view, term_draws, views_of
from ladderfit.checks.running import running_mean
from ladderfit.names import parameter
from ladderfit.peak_terms import powers_of
from ladderfit.plots.theme import (
    CHANCES,
    COLUMN,
    LIGHT,
    WIDTH,
    Theme,
    brighter_up,
    figure_of,
    new_figure,
    symbol,
)
from ladderfit.result import Result
from ladderfit.rounding import PROBABILITIES, Interval
from ladderfit.samples import BoolArray, FloatArray

_PANEL = 3.0  # inches
_MANY = 60


def width_panel(result: Result, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Peaks against the light curve's width, as `term_panel`."""
    return term_panel(result, axes, "width", theme=theme)


def decline_rate_panel(result: Result, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Peaks against the decline rate, as `term_panel`."""
    return term_panel(result, axes, "decline_rate", theme=theme)


def colour_panel(result: Result, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Peaks against the colour, as `term_panel`."""
    return term_panel(result, axes, "colour", theme=theme)


def mass_panel(result: Result, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Residuals and step against the host's mass, as `term_panel`."""
    return term_panel(result, axes, "host_mass", theme=theme)


def term_panel(result: Result, axes: Axes, term: str, *, theme: Theme = LIGHT) -> Figure:
    """Peaks less distance, standard peak and all terms but one, against that one's input.

    The band is the relation in the true input.  Where the input has errors, measured
    inputs follow it less steeply: the dashed line is what the fit expects of them.

    Parameters
    ----------
    result : Result
        With supernovae and that term.
    axes : Axes
        Drawn into.
    term : str
        One of `ladderfit.checks.peak_views.views_of(result)`.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.

    Raises
    ------
    ValueError
        If the relation has no such term.
    """
    view = peak_view(result, term)
    reach = 0.04 * float(np.ptp(view.x)) or 0.5
    x = np.linspace(float(np.min(view.x)) - reach, float(np.max(view.x)) + reach, 400)
    _band(axes, x, term_draws(result, term, x), theme)
    _points(axes, view, theme)
    if view.diluted:
        axes.plot(
            x,
            measured_line(view, x),
            color=theme.ink,
            linestyle=(0, (4, 1.5)),
            linewidth=1.2,
            zorder=2.9,
            label="expected at the measured value",
        )
    elif term == "host_mass":
        _running(axes, view, theme)
    axes.set_xlim(x[0], x[-1])
    brighter_up(axes)
    _limits(axes, view)
    axes.set_xlabel(view.label)
    axes.set_title(_numbers(result, term))
    return figure_of(axes)


def peaks_figure(result: Result, *, theme: Theme = LIGHT, width: float = WIDTH) -> Figure | None:
    """One panel for each term of the peak-magnitude relation that has a view.

    Parameters
    ----------
    result : Result
    theme : Theme
    width : float
        In inches; panels are stacked in one column of a journal.

    Returns
    -------
    Figure or None
        None where peaks are standardised already, or there are no supernovae.
    """
    terms = views_of(result)
    if not terms:
        return None
    stacked = width <= COLUMN
    with theme.applied():
        rows, columns = (len(terms), 1) if stacked else (1, len(terms))
        figure = new_figure(
            0.8 + (2.3 * len(terms) if stacked else _PANEL), min(width, 0.8 + 2.9 * columns)
        )
        grid = figure.subplots(rows, columns, squeeze=False).ravel()
        for place, term in enumerate(terms):
            term_panel(result, grid[place], term, theme=theme)
        figure.supylabel("Peak less distance and all other terms [mag]", fontsize=8.5)
        _legend(figure, list(grid), min(3, columns))
    return figure


def _band(axes: Axes, x: FloatArray, draws: FloatArray, theme: Theme) -> None:
    """The relation with its 68 % and 95 % bands."""
    for chance, strength in zip(reversed(PROBABILITIES), (0.12, 0.28), strict=True):
        low, high = np.quantile(draws, [0.5 - 0.5 * chance, 0.5 + 0.5 * chance], axis=0)
        axes.fill_between(
            x, low, high, color=theme.tint(theme.ink, strength), linewidth=0, zorder=2.2
        )
    axes.plot(
        x,
        draws.mean(axis=0),
        color=theme.ink,
        linewidth=1.2,
        zorder=2.8,
        label=f"relation in the true value, {CHANCES} bands",
    )


def _points(axes: Axes, view: PeakView, theme: Theme) -> None:
    """Supernovae in the expansion behind, those in hosts in front."""
    groups: tuple[tuple[BoolArray, int, str], ...] = (
        (~view.in_hosts, 0, "supernovae in the expansion"),
        (view.in_hosts, 2, "supernovae in hosts"),
    )
    for chosen, index, words in groups:
        if not np.any(chosen):
            continue
        accent, many = theme.accent(index), int(np.sum(chosen)) > _MANY
        axes.errorbar(
            view.x[chosen],
            view.data[chosen],
            xerr=view.x_error[chosen] if view.diluted else None,
            yerr=view.sd[chosen],
            **accent.points(2.4 if many else 3.8, 0.6),
            ecolor=theme.tint(accent.colour, 0.25 if many else 0.6),
            label=words,
            zorder=2.4 if many else 2.6,
        )


def _running(axes: Axes, view: PeakView, theme: Theme) -> None:
    """The running mean of the data, where there are enough supernovae."""
    found = running_mean(view)
    if found is None:
        return
    level = np.interp(found.x, np.sort(view.x), view.model[np.argsort(view.x)])
    accent, mean = theme.accent(1), found.mean + level
    axes.fill_between(
        found.x,
        mean - found.error,
        mean + found.error,
        color=accent.colour,
        alpha=0.3,
        linewidth=0,
        zorder=2.7,
    )
    axes.plot(
        found.x,
        mean,
        color=accent.colour,
        linewidth=1.2,
        linestyle=accent.line,
        zorder=2.9,
        label=f"running mean of {found.size}, and its error",
    )


def _limits(axes: Axes, view: PeakView) -> None:
    """Vertical limits that hold all supernovae; zero in the middle."""
    reach = 1.1 * float(np.max(np.abs(view.data) + view.sd))
    axes.set_ylim(reach, -reach)


def _numbers(result: Result, term: str) -> str:
    """The coefficients of a term, for a title."""
    relation = result.choices.peak_relation
    names = (
        ("mass_step",)
        if term == "host_mass"
        else tuple(power.name for power in powers_of(relation, term))
    )
    words = [
        f"{symbol(name)} = {Interval.of(result.draws[name])} {parameter(name).unit}".rstrip()
        for name in names
    ]
    return "\n".join(words)


def _legend(figure: Figure, panels: list[Axes], columns: int) -> None:
    """One legend for all panels, under them."""
    handles: dict[str, Any] = {}
    for axes in panels:
        for handle, words in zip(*axes.get_legend_handles_labels(), strict=True):
            handles.setdefault(words, handle)
    figure.legend(
        list(handles.values()),
        list(handles),
        loc="outside lower center",
        ncols=columns,
        columnspacing=1.2,
    )
