"""Every host's distance modulus, and how the evidence on each agrees with it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.transforms import blended_transform_factory

from ladderfit.checks.residuals import peak_residuals
from ladderfit.names import with_group
from ladderfit.plots.theme import COLUMN, LIGHT, WIDTH, Theme, figure_of, new_figure, plain
from ladderfit.result import Result
from ladderfit.rounding import Interval
from ladderfit.samples import FloatArray


@dataclass(frozen=True)
class HostModulus:
    """One host's posterior modulus; what its own geometry and supernovae say, or None.

    `geometric` and `supernovae` are pairs (value minus posterior mean, error) in mag.
    """

    host: str
    interval: Interval
    geometric: tuple[float, float] | None
    supernovae: tuple[float, float] | None


def host_moduli(result: Result) -> list[HostModulus]:
    """All hosts, nearest first."""
    geometric = {anchor.name: anchor for anchor in result.ladder.geometric}
    from_peaks = _from_peaks(result)
    listed = []
    for index, host in enumerate(result.ladder.hosts):
        draws = result.draws.get(with_group("modulus", host))
        if draws is None:
            continue
        interval, anchor = Interval.of(draws), geometric.get(host)
        own = None if anchor is None else (anchor.modulus - interval.mean, anchor.error)
        listed.append(HostModulus(host, interval, own, from_peaks.get(index)))
    return sorted(listed, key=lambda entry: entry.interval.mean)


def _from_peaks(result: Result) -> dict[int, tuple[float, float]]:
    """Per host, the weighted mean of its supernovae's peak minus M, against the posterior."""
    peaks = peak_residuals(result)
    if peaks is None:
        return {}
    found = {}
    for host in np.unique(peaks.host):
        own = peaks.host == host
        weight = peaks.sd[own] ** -2
        mean = float(np.average(peaks.residual[own], weights=weight))
        found[int(host)] = (mean, float(np.sum(weight)) ** -0.5)
    return found


def modulus_panel(entries: list[HostModulus], axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """A list of dots, nearest host on top, with the numbers beside.

    Parameters
    ----------
    entries : list of HostModulus
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    accent = theme.accent(0)
    rows = np.arange(len(entries))
    axes.errorbar(
        [entry.interval.mean for entry in entries],
        rows,
        xerr=np.array([entry.interval.arms for entry in entries]).T,
        linestyle="none",
        marker=accent.marker,
        markersize=3.5,
        color=accent.colour,
        elinewidth=1.2,
    )
    _numbers_beside(entries, axes)
    axes.set_yticks(rows, [plain(entry.host) for entry in entries])
    axes.tick_params(axis="y", length=0)
    axes.set_ylim(len(entries) - 0.4, -0.6)
    axes.set_xlabel("Distance modulus [mag]")
    return figure_of(axes)


def _numbers_beside(entries: list[HostModulus], axes: Axes) -> None:
    beside = blended_transform_factory(axes.transAxes, axes.transData)
    for row, entry in enumerate(entries):
        axes.text(1.03, row, str(entry.interval), transform=beside, va="center", fontsize=7.5)


def difference_panel(entries: list[HostModulus], axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """What geometry and supernovae say of each host, minus the posterior mean.

    The grey bar is the posterior's central 68 %.

    Parameters
    ----------
    entries : list of HostModulus
    axes : Axes
        Drawn into; its rows are those of `modulus_panel`.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    rows = np.arange(len(entries))
    arms = np.array([entry.interval.arms for entry in entries])
    axes.barh(
        rows,
        arms.sum(axis=1),
        left=-arms[:, 0],
        height=0.62,
        color=theme.tint(theme.muted, 0.35),
        label="posterior, 68 %",
    )
    axes.axvline(0.0, color=theme.ink, linewidth=0.8)
    _marks(axes, [entry.geometric for entry in entries], "its geometric value", 1, -0.14, theme)
    _marks(axes, [entry.supernovae for entry in entries], "its supernovae", 2, 0.14, theme)
    axes.set_xlabel("Value minus posterior mean [mag]")
    axes.set_yticks(rows)
    axes.tick_params(axis="y", length=0, labelleft=False)
    axes.set_ylim(len(entries) - 0.4, -0.6)
    return figure_of(axes)


def _marks(
    axes: Axes,
    pairs: list[tuple[float, float] | None],
    words: str,
    index: int,
    shift: float,
    theme: Theme,
) -> None:
    rows = [row for row, pair in enumerate(pairs) if pair is not None]
    known: FloatArray = np.array([pair for pair in pairs if pair is not None])
    if not rows:
        return
    accent = theme.accent(index)
    axes.errorbar(
        known[:, 0],
        np.array(rows) + shift,
        xerr=known[:, 1],
        **accent.points(3.5, 1.0),
        label=words,
    )


def moduli_figure(result: Result, *, theme: Theme = LIGHT, width: float = WIDTH) -> Figure | None:
    """The hosts' moduli in a list, and beside it what each host's own evidence says.

    Parameters
    ----------
    result : Result
    theme : Theme
    width : float
        In inches.

    Returns
    -------
    Figure or None
        None where the ladder has no hosts.
    """
    entries = host_moduli(result)
    if not entries:
        return None
    with theme.applied():
        figure = new_figure(1.1 + 0.2 * max(len(entries), 3), width)
        if width <= COLUMN:
            return _in_one_column(entries, figure, theme)
        left, gap, right = figure.subplots(1, 3, width_ratios=[1.0, 0.34, 1.6])
        gap.set_axis_off()
        modulus_panel(entries, left, theme=theme)
        difference_panel(entries, right, theme=theme)
        figure.legend(*right.get_legend_handles_labels(), loc="outside upper right", ncols=3)
    return figure


def _in_one_column(entries: list[HostModulus], figure: Figure, theme: Theme) -> Figure:
    """The differences alone, with the moduli as numbers beside."""
    axes, gap = figure.subplots(1, 2, width_ratios=[1.0, 0.5])
    gap.set_axis_off()
    difference_panel(entries, axes, theme=theme)
    axes.set_yticks(np.arange(len(entries)), [plain(entry.host) for entry in entries])
    axes.tick_params(axis="y", labelleft=True)
    _numbers_beside(entries, axes)
    figure.legend(*axes.get_legend_handles_labels(), loc="outside upper center", ncols=2)
    return figure
