"""Parallax stars: measured against photometric parallaxes, and the zero point they give."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.checks.residuals import Residuals, parallax_offsets, parallax_residuals
from ladderfit.plots.corner import joint_panel
from ladderfit.plots.theme import (
    COLUMN,
    LIGHT,
    WIDTH,
    Theme,
    figure_of,
    new_figure,
    plain,
    symbol,
    symmetric,
)
from ladderfit.result import Result
from ladderfit.rounding import Interval
from ladderfit.samples import FloatArray

_LONG_WORDS = 30  # letters of a legend that one column holds
_FEW = 150  # stars up to which each has its bar


def _photometric(result: Result) -> tuple[Residuals, FloatArray] | None:
    """The stars, and their photometric parallaxes [mas]."""
    stars, sample = parallax_residuals(result), result.ladder.parallax_stars
    if stars is None or sample is None:
        return None
    return stars, stars.model - parallax_offsets(result, sample)


def _band(axes: Axes, x: FloatArray, result: Result, above: FloatArray, theme: Theme) -> None:
    """The common offset on top of a line, with its central 68 %."""
    if "parallax_offset" not in result.draws:
        return
    interval = Interval.of(result.draws["parallax_offset"])
    accent = theme.accent(0)
    axes.fill_between(
        x,
        above + interval.low,
        above + interval.high,
        color=theme.tint(accent.colour, 0.35),
        linewidth=0,
    )
    axes.plot(
        x,
        above + interval.mean,
        color=accent.colour,
        linewidth=1.2,
        label=f"with the common offset, {interval} mas",
    )


def measured_panel(result: Result, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Measured against photometric parallax, each star with its expected spread.

    Parameters
    ----------
    result : Result
        Of a ladder with parallax stars.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    found = _photometric(result)
    if found is not None:
        stars, x = found
        ends = np.array([min(0.0, float(x.min())), 1.04 * float(x.max())])
        axes.plot(ends, ends, color=theme.ink, linewidth=0.8, linestyle="--", label="equal")
        _band(axes, ends, result, ends, theme)
        _stars(axes, x, stars.data, stars.sd, theme)
        axes.set_xlim(*ends)
        axes.legend(loc="upper left")
    axes.set_ylabel("Measured parallax [mas]")
    return figure_of(axes)


def offset_panel(result: Result, axes: Axes, *, theme: Theme = LIGHT) -> Figure:
    """Measured minus photometric parallax against the latter, and the common offset."""
    found = _photometric(result)
    if found is not None:
        stars, x = found
        ends = np.array([min(0.0, float(x.min())), 1.04 * float(x.max())])
        axes.axhline(0.0, color=theme.ink, linewidth=0.8, linestyle="--")
        _band(axes, ends, result, np.zeros(2), theme)
        _stars(axes, x, stars.data - x, stars.sd, theme)
        symmetric(axes, np.abs(stars.data - x) + stars.sd, stars.sd)
        axes.set_xlim(*ends)
    axes.set_xlabel("Photometric parallax [mas]")
    axes.set_ylabel("Measured minus\nphotometric [mas]")
    return figure_of(axes)


def _stars(axes: Axes, x: FloatArray, y: FloatArray, sd: FloatArray, theme: Theme) -> None:
    accent = theme.accent(3)
    axes.errorbar(
        x,
        y,
        yerr=sd if len(x) <= _FEW else None,
        **accent.points(3.0, 0.7),
        label=f"{len(x)} stars, expected spread",
    )


def parallax_figure(result: Result, *, theme: Theme = LIGHT, width: float = WIDTH) -> Figure | None:
    """Measured against photometric parallaxes, and zero point against offset.

    Parameters
    ----------
    result : Result
    theme : Theme
    width : float
        In inches.

    Returns
    -------
    Figure or None
        None where the ladder has no parallax stars.
    """
    if parallax_residuals(result) is None:
        return None
    free = [
        name
        for name in ("zero_point", "parallax_offset")
        if name in result.draws and np.ptp(result.draws[name]) > 0.0
    ]
    joint = len(free) == 2
    with theme.applied():
        figure, panels = _parallax_panels(width, joint=joint)
        measured_panel(result, panels["M"], theme=theme)
        panels["M"].tick_params(labelbottom=False)
        offset_panel(result, panels["R"], theme=theme)
        if joint:
            joint_panel(result, "parallax_offset", "zero_point", panels["J"], theme=theme)
            panels["J"].set_xlabel(f"Residual offset {symbol('parallax_offset')} [mas]")
            panels["J"].set_ylabel(f"Zero point {symbol('zero_point')} [mag]")
            panels["J"].set_title("regions of 68 % and 95 %")
        if width <= COLUMN:
            _break_legend(panels["M"])
        figure.align_ylabels([panels["M"], panels["R"]])
    return figure


def _break_legend(axes: Axes) -> None:
    """Long entries on two lines."""
    legend = axes.get_legend()
    for entry in () if legend is None else legend.get_texts():
        if len(entry.get_text()) > _LONG_WORDS:
            entry.set_text(entry.get_text().replace(", ", ",\n"))


def _parallax_panels(width: float, *, joint: bool) -> tuple[Figure, dict[str, Axes]]:
    """M, measured parallaxes; R, what is left over; J, joint density: stacked in one column."""
    if width > COLUMN:
        figure = new_figure(4.6, width)
        panels = figure.subplot_mosaic(
            "MJ;RJ" if joint else "M;R",
            height_ratios=[2.2, 1.0],
            width_ratios=[1.35, 1.0] if joint else [1.0],
        )
    else:
        figure = new_figure(6.8 if joint else 4.2, width)
        rows, heights = ("M;R;J", [2.2, 1.0, 2.0]) if joint else ("M;R", [2.2, 1.0])
        panels = figure.subplot_mosaic(rows, height_ratios=heights)
    return figure, panels


def distance_prior_panel(
    results: Mapping[str, Result], name: str, axes: Axes, *, theme: Theme = LIGHT
) -> Figure:
    """One parameter under each distance prior: mean, central 68 %, and the numbers.

    Parameters
    ----------
    results : mapping of str to Result
        From `ladderfit.sensitivity.distance_priors.along_distance_priors`.
    name : str
        Of the parameter.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    rows = np.arange(len(results))
    intervals = [Interval.of(result.draws[name]) for result in results.values()]
    accent = theme.accent(0)
    axes.errorbar(
        [interval.mean for interval in intervals],
        rows,
        xerr=np.array([interval.arms for interval in intervals]).T,
        linestyle="none",
        marker=accent.marker,
        markersize=4.0,
        elinewidth=1.2,
        color=accent.colour,
    )
    for row, interval in zip(rows, intervals, strict=True):
        axes.annotate(
            str(interval),
            (interval.mean, row),
            xytext=(0, 5),
            textcoords="offset points",
            ha="center",
            fontsize=7.5,
        )
    axes.set_yticks(rows, [plain(label) for label in results])
    axes.set_ylim(len(results) - 0.5, -0.6)
    axes.grid(visible=False, axis="y")
    return figure_of(axes)


def distance_prior_figure(results: Mapping[str, Result], *, theme: Theme = LIGHT) -> Figure:
    """Zero point and residual offset along the distance priors.

    Parameters
    ----------
    results : mapping of str to Result
        From `ladderfit.sensitivity.distance_priors.along_distance_priors`; at least one.
    theme : Theme

    Returns
    -------
    Figure
    """
    shown = [
        name
        for name in ("zero_point", "parallax_offset")
        if all(name in result.draws for result in results.values())
    ]
    titles = {"zero_point": "Zero point", "parallax_offset": "Residual offset"}
    units = {"zero_point": "mag", "parallax_offset": "mas"}
    with theme.applied():
        figure = new_figure(1.0 + 0.5 * len(results))
        grid = figure.subplots(1, len(shown), sharey=True, squeeze=False)[0]
        for axes, name in zip(grid, shown, strict=True):
            distance_prior_panel(results, name, axes, theme=theme)
            axes.set_xlabel(f"{titles[name]} {symbol(name)} [{units[name]}]")
            axes.margins(x=0.25)
    return figure
