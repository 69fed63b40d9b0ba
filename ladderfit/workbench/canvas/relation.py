"""The relation with its residuals, drawn once; then only its artists' numbers change."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure

from ladderfit.checks.residuals import (
    HostResiduals,
    at_mean,
    cepheid_residuals,
    line_draws,
    parallax_magnitudes,
    parallax_residuals,
)
from ladderfit.plots.relation import PERIOD_TICKS, binned, groups
from ladderfit.plots.theme import Theme, brighter_up, plain, plain_log_axis
from ladderfit.result import Result
from ladderfit.rounding import PROBABILITIES
from ladderfit.samples import FloatArray
from ladderfit.workbench.canvas.margins import margins, place_label
from ladderfit.workbench.points import Points
from ladderfit.workbench.shown import Shown

_ACCENTS = 3
_STEPS = 80


class RelationView:
    """Top: absolute magnitudes, the line and its band.  Bottom: what is left over."""

    def __init__(self, figure: Figure, shown: Shown, theme: Theme) -> None:
        del shown
        self.theme = theme
        self.top: Axes
        self.bottom: Axes
        self.top, self.bottom = figure.subplots(2, 1, sharex=True, height_ratios=[2.1, 1.0])
        margins(figure, 70, 10, 8, 44, hspace=0.07)
        self._groups = [self._pair(index) for index in range(_ACCENTS + 1)]
        accent = theme.accent(3)
        style: dict[str, Any] = {"linestyle": "none", "color": accent.colour}
        style["marker"] = accent.marker
        (self._stars,) = self.top.plot([], [], markersize=3.2, zorder=3.1, **style)
        self._bars = LineCollection([], colors=accent.colour, linewidths=0.7, zorder=3.0)
        self.top.add_collection(self._bars, autolim=False)
        self._bands = [
            self.top.fill_between(
                [], [], [], color=theme.tint(theme.ink, strength), linewidth=0, zorder=2.5
            )
            for strength in (0.22, 0.45)
        ]
        (self._line,) = self.top.plot([], [], color=theme.ink, linewidth=1.1, zorder=2.7)
        self._edges = [
            self.top.plot([], [], color=theme.ink, linewidth=0.8, linestyle=(0, (2, 2)))[0]
            for _ in range(2)
        ]
        self.bottom.axhline(0.0, color=theme.ink, linewidth=0.8)
        self._means = self.bottom.plot(
            [], [], "o", markersize=4.5, markerfacecolor=theme.paper, color=theme.ink, zorder=3.4
        )[0]
        self._arms = LineCollection([], colors=theme.ink, linewidths=1.1, zorder=3.3)
        self.bottom.add_collection(self._arms, autolim=False)
        self._aside = [self._mark(axes, "x", 5.0, theme.muted) for axes in (self.top, self.bottom)]
        self._label()
        self.points: list[Points] = []
        self._told: list[str] = []

    def _pair(self, index: int) -> tuple[Any, Any]:
        """A group's dots in both panels; index 0 is everything that stands back."""
        theme = self.theme
        if index == 0:
            colour, marker = theme.tint(theme.muted, 0.6), "."
        else:
            accent = theme.accent(index - 1)
            colour, marker = accent.colour, accent.marker
        return tuple(
            axes.plot(
                [], [], marker, color=colour, markersize=2.8, markeredgewidth=0.0, zorder=2.1
            )[0]
            for axes in (self.top, self.bottom)
        )  # type: ignore[return-value]  # two axes make a pair

    @staticmethod
    def _mark(axes: Axes, marker: str, size: float, colour: str) -> Any:
        return axes.plot([], [], marker, markersize=size, color=colour, zorder=3.6)[0]

    def _label(self) -> None:
        for axes in (self.top, self.bottom):
            plain_log_axis(axes, PERIOD_TICKS)
            brighter_up(axes)
        self.top.set_ylabel("Absolute magnitude [mag]")
        self.bottom.set_ylabel("Residual [mag]")
        self.bottom.set_xlabel("Period [d]", labelpad=1)
        for axes in (self.top, self.bottom):
            place_label(axes, 46)

    def fits(self, shown: Shown) -> bool:
        """Always: only numbers change."""
        del shown
        return True

    def update(self, shown: Shown) -> None:
        """Show a posterior; stars set aside by hand are crosses."""
        result, aside = shown.result, shown.aside
        stars = cepheid_residuals(result)
        self.points = []
        self._show_stars(result, stars)
        self._show_aside(aside)
        reach = self._reach(result)
        self._show_line(result, reach)
        self._limits(reach, stars)

    def _show_stars(self, result: Result, stars: HostResiduals | None) -> None:
        told: list[tuple[Any, str]] = []
        for pair in self._groups:
            for line in pair:
                line.set_data([], [])
        if stars is not None:
            period, place = 10.0**stars.x, 1
            names = [result.ladder.hosts[index] for index in stars.host]
            for group in groups(result):
                chosen = np.isin(stars.host, group.hosts)
                pair = self._groups[place if group.accented else 0]
                place += group.accented
                pair[0].set_data(period[chosen], stars.data[chosen])
                pair[1].set_data(period[chosen], stars.residual[chosen])
                told.append((pair[0], f"{plain(group.words)} ({int(chosen.sum()):,})"))
            place_of = {"names": stars.name, "hosts": names, "section": "cepheids"}
            shared: dict[str, Any] = {**place_of, "off": stars.residual, "sd": stars.sd}
            self.points.append(Points(self.top, period, stars.data, **shared))
            self.points.append(Points(self.bottom, period, stars.residual, **shared))
        self._show_parallaxes(result, told)
        period, mean, error = binned(stars) if stars is not None else (np.empty(0),) * 3
        self._means.set_data(period, mean)
        self._arms.set_segments(_vertical(period, mean - error, mean + error))
        self._legend(told)

    def _show_parallaxes(self, result: Result, told: list[tuple[Any, str]]) -> None:
        found = parallax_magnitudes(result)
        self._stars.set_data([], [])
        self._bars.set_segments([])
        if found is None or not len(found[0]):
            return
        stars, below, above = found
        period = 10.0**stars.x
        self._stars.set_data(period, stars.data)
        self._bars.set_segments(_vertical(period, stars.data - below, stars.data + above))
        everything = parallax_residuals(result)
        total = len(stars) if everything is None else len(everything)
        count = (
            f"{len(stars)}" if len(stars) == total else f"{len(stars)} of {total}, over 5 errors"
        )
        told.append((self._stars, f"parallax stars ({count})"))
        self.points.append(
            Points(
                self.top,
                period,
                stars.data,
                stars.name,
                ["Milky Way"] * len(stars),
                "anchors.parallaxes",
                stars.residual,
                stars.sd,
            )
        )

    def _show_aside(self, aside: HostResiduals | None) -> None:
        if aside is None or not len(aside):
            for line in self._aside:
                line.set_data([], [])
            return
        period = 10.0**aside.x
        for axes, line, y in zip(
            (self.top, self.bottom), self._aside, (aside.data, aside.residual), strict=True
        ):
            line.set_data(period, y)
            self.points.append(
                Points(
                    axes,
                    period,
                    y,
                    aside.name,
                    ["" for _ in range(len(aside))],
                    "cepheids",
                    aside.residual,
                    aside.sd,
                    aside=True,
                )
            )

    def _reach(self, result: Result) -> tuple[float, float]:
        samples = (result.ladder.cepheids, result.ladder.parallax_stars)
        found = np.concatenate([sample.log_period for sample in samples if sample is not None])
        return float(np.min(found)) - 0.04, float(np.max(found)) + 0.04

    def _show_line(self, result: Result, reach: tuple[float, float]) -> None:
        log_period = np.linspace(*reach, _STEPS)
        draws = line_draws(result, log_period)
        period, middle = 10.0**log_period, np.mean(draws, axis=0)
        halves = [0.5 * chance for chance in reversed(PROBABILITIES)]
        ends = np.quantile(
            draws, [0.5 + sign * half for half in halves for sign in (-1, 1)], axis=0
        )
        for place, band in enumerate(self._bands):
            low, high = ends[2 * place], ends[2 * place + 1]
            outline = np.column_stack(
                [np.concatenate([period, period[::-1]]), np.concatenate([low, high[::-1]])]
            )
            band.set_verts([outline])
        self._line.set_data(period, middle)
        scatter = at_mean(result, "scatter")
        for sign, edge in zip((-1.0, 1.0), self._edges, strict=True):
            edge.set_data(period, middle + sign * scatter)
            edge.set_visible(scatter > 0.0)

    def _limits(self, reach: tuple[float, float], stars: HostResiduals | None) -> None:
        self.top.set_xlim(10.0 ** reach[0], 10.0 ** reach[1])
        shown = [np.asarray(self._line.get_ydata(), float)]
        shown += [points.y for points in self.points if points.axes is self.top]
        values = np.concatenate(shown)
        low, high = float(np.min(values)), float(np.max(values))
        margin = 0.06 * (high - low)
        self.top.set_ylim(high + margin, low - margin)
        off = [points.y for points in self.points if points.axes is self.bottom]
        widest = float(np.max(np.abs(np.concatenate(off)))) if off else 1.0
        typical = 0.0 if stars is None else 2.0 * float(np.median(stars.sd))
        widest = 1.1 * max(widest, typical)
        self.bottom.set_ylim(widest, -widest)

    def _legend(self, told: list[tuple[Any, str]]) -> None:
        words = [text for _, text in told]
        if words != self._told:
            self._told = words
            handles = [handle for handle, _ in told]
            self.top.legend(handles, words, loc="upper left", markerscale=1.6, borderaxespad=0.2)


def _vertical(x: FloatArray, low: FloatArray, high: FloatArray) -> list[FloatArray]:
    return list(np.stack([np.column_stack([x, low]), np.column_stack([x, high])], axis=1))
