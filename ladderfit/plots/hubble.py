"""The last rungs: supernovae in hosts, the expansion, and what is left over."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.checks.residuals import (
    Residuals,
    at_mean,
    flow_model,
    flow_residuals,
    peak_residuals,
    velocity_residuals,
)
from ladderfit.checks.running import running_mean
from ladderfit.names import parameter
from ladderfit.plots.theme import (
    CHANCES,
    COLUMN,
    LIGHT,
    WIDTH,
    Accent,
    Theme,
    brighter_up,
    figure_of,
    new_figure,
    plain_log_axis,
    series_of_ticks,
    symbol,
    symmetric,
)
from ladderfit.result import Result
from ladderfit.rounding import PROBABILITIES, Interval
from ladderfit.samples import FloatArray


def _points(
    axes: Axes, data: Residuals, y: FloatArray, accent: Accent, theme: Theme, *, bars: bool
) -> None:
    many = len(data) > 60
    axes.errorbar(
        data.x,
        y,
        yerr=data.sd if bars else None,
        **accent.points(2.4 if many else 3.5, 0.8),
        ecolor=theme.tint(accent.colour, 0.45) if many else accent.colour,
    )


def _line(axes: Axes, x: FloatArray, y: FloatArray, theme: Theme) -> None:
    axes.plot(x, y, color=theme.ink, linewidth=1.0, zorder=2.6)


def _numbers(axes: Axes, result: Result, names: tuple[str, ...], *, left: bool) -> None:
    words = [
        f"{symbol(name)} = {Interval.of(result.draws[name])} {parameter(name).unit}".rstrip()
        for name in names
        if name in result.draws
    ]
    axes.text(
        0.03 if left else 0.97,
        0.04,
        "\n".join(words),
        transform=axes.transAxes,
        ha="left" if left else "right",
        va="bottom",
        fontsize=7.5,
        linespacing=1.5,
    )


def _left_over(axes: Axes, data: Residuals, accent: Accent, theme: Theme) -> None:
    axes.axhline(0.0, color=theme.ink, linewidth=0.8)
    _points(axes, data, data.residual, accent, theme, bars=True)
    _running(axes, data, theme)
    symmetric(axes, np.abs(data.residual) + data.sd, data.sd)


def _running(axes: Axes, data: Residuals, theme: Theme) -> None:
    """The running mean with its error, where there are enough objects."""
    found = running_mean(data)
    if found is None:
        return
    low, high = found.mean - found.error, found.mean + found.error
    axes.fill_between(
        found.x, low, high, color=theme.ink, alpha=0.18, linewidth=0, zorder=2.7, label="_"
    )
    axes.plot(
        found.x,
        found.mean,
        color=theme.ink,
        linewidth=1.3,
        linestyle=(0, (4, 1.5)),
        zorder=2.8,
        label=f"running mean of {found.size}, and its error",
    )
    axes.legend(
        loc="upper left",
        borderaxespad=0.2,
        frameon=True,
        framealpha=0.85,
        facecolor=theme.paper,
        edgecolor="none",
    )


def peak_words(result: Result) -> str:
    """What the peaks are called: standardised where the fit has taken terms off."""
    relation = result.choices.peak_relation
    words = "Standardised peak" if relation.roles else "Peak magnitude"
    return f"{words} [mag]"


def peak_panel(result: Result, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Peak magnitudes of supernovae in hosts against the hosts' moduli.

    Parameters
    ----------
    result : Result
        With supernovae in hosts.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    data = peak_residuals(result)
    if data is None:
        raise ValueError("the ladder has no supernovae in hosts")
    _points(axes, data, data.data, theme.accent(2), theme, bars=True)
    x = np.array([np.min(data.x) - 0.2, np.max(data.x) + 0.2])
    _line(axes, x, x + at_mean(result, "peak_magnitude"), theme)
    axes.set_xlim(x[0], x[1])
    brighter_up(axes)
    axes.set_title(f"{len(data)} supernovae in hosts")
    axes.set_ylabel(peak_words(result))
    _numbers(axes, result, ("peak_magnitude", result.choices.peak_scatters[0]), left=True)
    return figure_of(axes)


def flow_panel(result: Result, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Peak magnitudes of supernovae in the expansion against redshift.

    Parameters
    ----------
    result : Result
        With supernovae in the expansion.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    data = flow_residuals(result)
    if data is None:
        raise ValueError("the ladder has no supernovae in the expansion")
    _points(axes, data, data.data, theme.accent(0), theme, bars=len(data) <= 60)
    low, high = float(np.min(data.x)) / 1.06, float(np.max(data.x)) * 1.06
    z = np.geomspace(low, high, 80)
    _line(axes, z, flow_model(result, z), theme)
    plain_log_axis(axes, series_of_ticks(low, high))
    axes.set_xlim(low, high)
    brighter_up(axes)
    axes.set_title(f"{len(data)} supernovae in the expansion")
    in_hosts, own = result.choices.peak_scatters
    told = result.ladder.peaks is not None and own == in_hosts
    names = ("hubble_constant", "intercept", *(() if told else (own,)))
    _numbers(axes, result, names, left=True)
    return figure_of(axes)


def velocity_panel(result: Result, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Velocities against distances, and the linear law with its band.

    Parameters
    ----------
    result : Result
        With velocities.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    data = velocity_residuals(result)
    if data is None:
        raise ValueError("the ladder has no velocities")
    x = np.linspace(min(0.0, float(np.min(data.x))), 1.05 * float(np.max(data.x)), 60)
    draws = result.draws["hubble_constant"][:, None] * x[None, :]
    if "velocity_constant" in result.draws:
        draws = draws + result.draws["velocity_constant"][:, None]
    for chance, strength in zip(reversed(PROBABILITIES), (0.12, 0.28), strict=True):
        low, high = np.quantile(draws, [0.5 - 0.5 * chance, 0.5 + 0.5 * chance], axis=0)
        inner = chance == PROBABILITIES[0]
        axes.fill_between(
            x,
            low,
            high,
            color=theme.tint(theme.ink, strength),
            linewidth=0,
            label=f"line, {CHANCES} bands" if inner else None,
        )
    _line(axes, x, draws.mean(axis=0), theme)
    _points(axes, data, data.data, theme.accent(0), theme, bars=False)
    axes.set_xlim(x[0], x[-1])
    axes.set_title(f"{len(data)} objects")
    axes.set_ylabel("Velocity [km/s]")
    axes.legend(loc="upper left")
    _numbers(
        axes,
        result,
        ("hubble_constant", "velocity_constant", "velocity_scatter"),
        left=False,
    )
    return figure_of(axes)


def _velocity_figure(result: Result, data: Residuals, theme: Theme, width: float) -> Figure:
    figure = new_figure(5.0, 5.5) if width > COLUMN else new_figure(4.2, width)
    top, bottom = figure.subplots(2, 1, sharex=True, height_ratios=[3, 1])
    velocity_panel(result, top, theme=theme)
    _left_over(bottom, data, theme.accent(0), theme)
    bottom.set_ylabel("Residual\n[km/s]")
    bottom.set_xlabel("Distance [Mpc]")
    figure.align_ylabels()
    return figure


def hubble_figure(result: Result, *, theme: Theme = LIGHT, width: float = WIDTH) -> Figure | None:
    """Supernovae in hosts and in the expansion, or velocities against distances.

    Parameters
    ----------
    result : Result
    theme : Theme
    width : float
        In inches.

    Returns
    -------
    Figure or None
        None where the ladder has neither supernovae nor velocities.
    """
    velocities = velocity_residuals(result)
    peaks, flow = peak_residuals(result), flow_residuals(result)
    with theme.applied():
        if velocities is not None:
            return _velocity_figure(result, velocities, theme, width)
        columns = [
            (data, index, words, panel)
            for data, index, words, panel in (
                (peaks, 2, "Distance modulus of the host [mag]", peak_panel),
                (flow, 0, "Redshift", flow_panel),
            )
            if data is not None
        ]
        if not columns:
            return None
        figure, pairs = _panel_pairs(len(columns), width)
        for (top, bottom), (data, index, words, panel) in zip(pairs, columns, strict=True):
            panel(result, top, theme=theme)
            _left_over(bottom, data, theme.accent(index), theme)
            bottom.set_xlabel(words)
        reach = max(float(np.max(np.abs(data.residual) + data.sd)) for data, _, _, _ in columns)
        for place, (top, bottom) in enumerate(pairs):
            bottom.set_ylim(1.08 * reach, -1.08 * reach)
            if place and width > COLUMN:
                top.set_ylabel("")
                bottom.tick_params(labelleft=False)
            else:
                top.set_ylabel(peak_words(result))
                bottom.set_ylabel("Residual\n[mag]")
        for pair in pairs:
            figure.align_ylabels(list(pair))
    return figure


def _panel_pairs(count: int, width: float) -> tuple[Figure, list[tuple[Axes, Axes]]]:
    """Panels for data and what is left over: side by side, or stacked in one column."""
    if width > COLUMN:
        figure = new_figure(4.6, width if count > 1 else min(width, 5.0))
        grid = figure.subplots(
            2,
            count,
            sharex="col",
            height_ratios=[2.4, 1],
            width_ratios=[1, 1.5] if count == 2 else [1] * count,
            squeeze=False,
        )
        return figure, [(grid[0, place], grid[1, place]) for place in range(count)]
    figure = new_figure(3.6 * count, width)
    pairs: list[tuple[Axes, Axes]] = []
    for part in figure.subfigures(count, 1, squeeze=False)[:, 0]:
        top, bottom = part.subplots(2, 1, sharex=True, height_ratios=[2.2, 1])
        pairs.append((top, bottom))
    return figure, pairs
