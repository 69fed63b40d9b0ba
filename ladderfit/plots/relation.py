"""The period-luminosity relation: stars, line with its band, and what is left over."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.checks.residuals import (
    LINE,
    HostResiduals,
    Residuals,
    at_mean,
    cepheid_residuals,
    line_draws,
    parallax_magnitudes,
    parallax_residuals,
)
from ladderfit.names import base_name, parameter
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
    plain,
    plain_log_axis,
    symbol,
    symmetric,
)
from ladderfit.result import Result
from ladderfit.rounding import PROBABILITIES, Interval
from ladderfit.samples import FloatArray

PERIOD_TICKS = (1, 2, 3, 5, 7, 10, 20, 30, 50, 70, 100, 200)
_MOST_ACCENTED = 3
_FEW_STARS = 150  # up to here every star has an error bar and lies over the line
_MANY_STARS = 2000  # from here dots are pixels, also in a PDF
_OVER, _UNDER = 3.2, 2.1  # the line and its bands lie between


@dataclass(frozen=True)
class Group:
    """Stars drawn alike: which hosts (indices), under which name, set off or not."""

    hosts: tuple[int, ...]
    words: str
    accented: bool


def groups(result: Result, most: int = _MOST_ACCENTED) -> list[Group]:
    """Hosts to tell apart: up to `most` anchors, or all hosts if so few; the others as one."""
    ladder = result.ladder
    stars = ladder.cepheids
    if stars is None:
        return []
    present = [int(host) for host in np.unique(stars.host)]
    anchors = {anchor.host for anchor in ladder.geometric}
    named = [host for host in present if host in anchors][:most]
    if len(present) <= most:
        named = present
    others = tuple(host for host in present if host not in named)
    listed = [Group((host,), ladder.hosts[host], accented=True) for host in named]
    if not others:
        return listed
    words = f"{len(others)} other hosts" if listed else f"{len(others)} hosts"
    if len(others) == 1:
        words = ladder.hosts[others[0]]
    return [Group(others, words, accented=False), *listed]


def _draw_groups(
    axes: Axes, result: Result, stars: HostResiduals, y: FloatArray, theme: Theme
) -> None:
    few = len(stars) <= _FEW_STARS
    accents = iter(theme.accents)
    for group in groups(result):
        chosen = np.isin(stars.host, group.hosts)
        accent = (
            next(accents) if group.accented else Accent(theme.tint(theme.muted, 0.55), ".", "-")
        )
        axes.errorbar(
            10.0 ** stars.x[chosen],
            y[chosen],
            yerr=stars.sd[chosen] if few else None,
            **accent.points(2.8, 0.6),
            label=f"{plain(group.words)} ({int(np.sum(chosen)):,} stars)",
            rasterized=len(stars) > _MANY_STARS,
            zorder=_OVER if few else _UNDER,
        )


def _draw_line(axes: Axes, result: Result, log_period: FloatArray, theme: Theme) -> None:
    draws = line_draws(result, log_period)
    period = 10.0**log_period
    for chance, strength in zip(reversed(PROBABILITIES), (0.22, 0.45), strict=True):
        low, high = np.quantile(draws, [0.5 - 0.5 * chance, 0.5 + 0.5 * chance], axis=0)
        axes.fill_between(
            period,
            low,
            high,
            color=theme.tint(theme.ink, strength),
            linewidth=0,
            zorder=2.5,
            label=f"line, {CHANCES} bands" if chance == PROBABILITIES[0] else None,
        )
    middle = np.mean(draws, axis=0)
    axes.plot(period, middle, color=theme.ink, linewidth=1.0, zorder=2.7)
    scatter = at_mean(result, "scatter")
    if scatter > 0.0:
        grouped = any(base_name(name) == "scatter" for name in result.draws if name != "scatter")
        whose = "stars in no group" if grouped else "stars"
        for sign in (-1.0, 1.0):
            axes.plot(
                period,
                middle + sign * scatter,
                color=theme.ink,
                linewidth=0.8,
                linestyle=(0, (2, 2)),
                zorder=2.6,
                label=f"intrinsic scatter (68 % of {whose})" if sign > 0 else None,
            )


def _numbers(axes: Axes, result: Result) -> None:
    lines = []
    for name in result.headline:
        if base_name(name) in (*LINE, "metallicity", "overtone_offset", "scatter"):
            interval = Interval.of(result.draws[name])
            lines.append(f"{symbol(name)} = {interval} {parameter(name).unit}")
    axes.text(
        0.985,
        0.04,
        "\n".join(lines),
        transform=axes.transAxes,
        ha="right",
        va="bottom",
        fontsize=7.5,
        linespacing=1.5,
    )


def _draw_parallax_stars(axes: Axes, result: Result, theme: Theme) -> None:
    found = parallax_magnitudes(result)
    everything = parallax_residuals(result)
    if found is None or everything is None or len(found[0]) == 0:
        return
    stars, below, above = found
    accent = theme.accent(3)
    shown = f"{len(stars)}"
    if len(stars) < len(everything):
        shown += f" of {len(everything)}, parallax over 5 errors"
    axes.errorbar(
        10.0**stars.x,
        stars.data,
        yerr=np.stack([below, above]),
        **accent.points(3.0, 0.7),
        label=f"parallax stars ({shown})",
        zorder=_OVER if len(stars) <= _FEW_STARS else _UNDER,
    )


def relation_panel(result: Result, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Absolute magnitudes against periods, the line and its band.

    Magnitudes are reduced to the line by all other terms (the reference metallicity,
    the fundamental mode, no offset of a group), and each galaxy's by the posterior
    mean of its modulus.  Parallax stars are shown where the parallax is
    over 5 of its errors.

    Parameters
    ----------
    result : Result
        With a relation.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    stars = cepheid_residuals(result)
    if stars is not None:
        _draw_groups(axes, result, stars, stars.data, theme)
    _draw_parallax_stars(axes, result, theme)
    low, high = _reach(result)
    _draw_line(axes, result, np.linspace(low, high, 200), theme)
    _period_axis(axes, low, high)
    brighter_up(axes)
    relation = result.choices.relation
    at = ""
    if relation.metallicity != "none":
        at = f"\nat {plain(relation.metallicity.scale)} = {relation.metallicity.reference:g}"
    if "overtone_offset" in result.draws:
        at += f"{',' if at else ''}\nas of the fundamental mode"
    axes.set_ylabel(f"Absolute magnitude [mag]{at}")
    axes.legend(loc="upper left", markerscale=1.5)
    _numbers(axes, result)
    return figure_of(axes)


def residual_panel(
    stars: HostResiduals, result: Result, axes: Axes, *, theme: Theme = LIGHT
) -> Figure:
    """Magnitude minus line against period, with means in bins of equal numbers of stars.

    Parameters
    ----------
    stars : HostResiduals
        From `cepheid_residuals`.
    result : Result
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    axes.axhline(0.0, color=theme.ink, linewidth=0.8)
    _draw_groups(axes, result, stars, stars.residual, theme)
    period, mean, error = binned(stars)
    axes.errorbar(
        period,
        mean,
        yerr=error,
        linestyle="none",
        marker="o",
        markersize=4.5,
        markerfacecolor=theme.paper,
        markeredgewidth=1.1,
        elinewidth=1.1,
        color=theme.ink,
        zorder=3.4,
        label="means in bins of period",
    )
    bars = stars.sd if len(stars) <= _FEW_STARS else 0.0
    symmetric(axes, np.abs(stars.residual) + bars, stars.sd)
    brighter_up(axes)
    axes.set_ylabel("Residual\n[mag]")
    handles, labels = axes.get_legend_handles_labels()
    axes.legend(handles[-1:], labels[-1:], loc="lower right", borderaxespad=0.2)
    return figure_of(axes)


def binned(stars: Residuals) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Weighted means of the residuals in bins of equal numbers of stars.

    Returns
    -------
    period, mean, error : array
        Geometric mean period [d], weighted mean residual and its error [mag] per bin;
        4 to 10 bins, or none for fewer than 20 stars.
    """
    if len(stars) < 20:
        return np.empty(0), np.empty(0), np.empty(0)
    count = int(np.clip(len(stars) // 25, 4, 10))
    parts = np.array_split(np.argsort(stars.x), count)
    weights = [stars.sd[part] ** -2 for part in parts]
    period = [10.0 ** np.mean(stars.x[part]) for part in parts]
    mean = [
        np.average(stars.residual[part], weights=w) for part, w in zip(parts, weights, strict=True)
    ]
    error = [np.sum(w) ** -0.5 for w in weights]
    return np.array(period), np.array(mean), np.array(error)


def parallax_panel(stars: Residuals, result: Result, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Measured minus predicted parallax against period, with the expected spread as bars.

    Parameters
    ----------
    stars : Residuals
        From `parallax_residuals`.
    result : Result
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    accent = theme.accent(3)
    axes.axhline(0.0, color=theme.ink, linewidth=0.8)
    axes.errorbar(
        10.0**stars.x,
        stars.residual,
        yerr=stars.sd if len(stars) <= _FEW_STARS else None,
        **accent.points(3.0, 0.7),
    )
    symmetric(axes, np.abs(stars.residual) + stars.sd, stars.sd)
    axes.set_ylabel("Parallax\nresidual [mas]")
    return figure_of(axes)


def relation_figure(result: Result, *, theme: Theme = LIGHT, width: float = WIDTH) -> Figure | None:
    """The relation with its residuals in magnitude and, where there are any, in parallax.

    Parameters
    ----------
    result : Result
    theme : Theme
    width : float
        In inches.

    Returns
    -------
    Figure or None
        None where the ladder has no relation.
    """
    cepheids, parallaxes = cepheid_residuals(result), parallax_residuals(result)
    if cepheids is None and parallaxes is None:
        return None
    heights = [3.0] + [1.0] * ((cepheids is not None) + (parallaxes is not None))
    with theme.applied():
        size = 1.15 if width > COLUMN else 0.8
        figure = new_figure((1.2 if width > COLUMN else 1.6) + size * sum(heights), width)
        grid = figure.subplots(len(heights), 1, sharex=True, height_ratios=heights, squeeze=False)
        panels = list(grid[:, 0])
        relation_panel(result, panels[0], theme=theme)
        if cepheids is not None:
            residual_panel(cepheids, result, panels[1], theme=theme)
        if parallaxes is not None:
            parallax_panel(parallaxes, result, panels[-1], theme=theme)
        panels[-1].set_xlabel("Period [d]")
        if width <= COLUMN:
            _legend_above(figure, panels[0])
        figure.align_ylabels(panels)
    return figure


def _legend_above(figure: Figure, axes: Axes) -> None:
    """The legend out of the way of the stars, where there is little room."""
    inside = axes.get_legend()
    if inside is not None:
        inside.remove()
    figure.legend(
        *axes.get_legend_handles_labels(),
        loc="outside upper left",
        ncols=2,
        markerscale=1.5,
        fontsize=6.5,
        columnspacing=1.0,
    )


def _reach(result: Result) -> tuple[float, float]:
    """Log periods from the shortest to the longest, with a margin."""
    samples = (result.ladder.cepheids, result.ladder.parallax_stars)
    found = np.concatenate([sample.log_period for sample in samples if sample is not None])
    return float(np.min(found)) - 0.04, float(np.max(found)) + 0.04


def _period_axis(axes: Axes, low: float, high: float) -> None:
    plain_log_axis(axes, PERIOD_TICKS)
    axes.set_xlim(10.0**low, 10.0**high)
