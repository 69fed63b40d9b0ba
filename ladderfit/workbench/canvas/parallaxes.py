"""The parallax stars: measured against photometric parallax, and the zero point they give."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from ladderfit.checks.residuals import parallax_offsets, parallax_residuals
from ladderfit.plots.corner import joint_panel
from ladderfit.plots.parallax import distance_prior_panel, measured_panel, offset_panel
from ladderfit.plots.theme import Theme, symbol
from ladderfit.result import Result
from ladderfit.workbench.canvas.margins import margins, place_label
from ladderfit.workbench.points import Points
from ladderfit.workbench.shown import Shown

PAIR = ("parallax_offset", "zero_point")
_AXES = {
    "zero_point": f"Zero point {symbol('zero_point')} [mag]",
    "parallax_offset": f"Residual offset {symbol('parallax_offset')} [mas]",
}


def joint(result: Result) -> bool:
    """Whether both the zero point and the common offset are free."""
    return all(name in result.draws and np.ptp(result.draws[name]) > 0.0 for name in PAIR)


def parallaxes(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """Measured against photometric parallaxes; zero point and offset jointly."""
    result = shown.result
    both = joint(result)
    panels = figure.subplot_mosaic(
        "MJ;RJ" if both else "M;R",
        height_ratios=[2.0, 1.0],
        width_ratios=[1.5, 1.0] if both else [1.0],
    )
    top, bottom = panels["M"], panels["R"]
    top.sharex(bottom)
    margins(figure, 70, 10, 24, 44, hspace=0.08, wspace=0.42)
    measured_panel(result, top, theme=theme)
    offset_panel(result, bottom, theme=theme)
    top.tick_params(labelbottom=False)
    top.set_ylabel("Measured [mas]")
    bottom.set_ylabel("Difference [mas]")
    _legend(figure, top)
    bottom.xaxis.labelpad = 1
    bottom.yaxis.set_major_locator(MaxNLocator(4, prune="both"))
    for axes in (top, bottom):
        place_label(axes, 44)
    if both:
        across, up = PAIR
        joint_panel(result, across, up, panels["J"], theme=theme)
        panels["J"].set_xlabel(_AXES[across], labelpad=1)
        panels["J"].set_ylabel(_AXES[up])
        panels["J"].set_title("68 % and 95 %")
        panels["J"].xaxis.set_major_locator(MaxNLocator(4))
    return _points(shown, top, bottom)


def _legend(figure: Figure, top: Axes) -> None:
    """One line above the panels: the diagonal leaves no room inside."""
    handles, words = top.get_legend_handles_labels()
    inside = top.get_legend()
    if inside is not None:
        inside.remove()
    short = [text.replace("with the common offset,", "offset") for text in words]
    short = [text.replace(", expected spread", "") for text in short]
    figure.legend(
        handles, short, loc="upper left", ncols=3, bbox_to_anchor=(0.08, 1.0), borderaxespad=0.2,
        columnspacing=1.2,
    )  # fmt: skip


def _points(shown: Shown, top: Axes, bottom: Axes) -> list[Points]:
    stars, sample = parallax_residuals(shown.result), shown.result.ladder.parallax_stars
    if stars is None or sample is None:
        return []
    x = stars.model - parallax_offsets(shown.result, sample)
    found = []
    for axes, y in ((top, stars.data), (bottom, stars.data - x)):
        nobody = [""] * len(stars)
        found.append(
            Points(
                axes, x, y, stars.name, nobody, "anchors.parallaxes", stars.residual, stars.sd,
                unit="mas",
            )
        )  # fmt: skip
    return found


def priors(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """Zero point and offset under each distance prior."""
    results = shown.worked
    names = [name for name in reversed(PAIR) if all(name in r.draws for r in results.values())]
    grid = figure.subplots(1, len(names), sharey=True, squeeze=False)[0]
    margins(figure, 158, 14, 24, 44, wspace=0.1)
    for axes, name in zip(grid, names, strict=True):
        distance_prior_panel(results, name, axes, theme=theme)
        axes.set_xlabel(_AXES[name], labelpad=1)
        axes.margins(x=0.3)
        axes.xaxis.set_major_locator(MaxNLocator(4))
    grid[0].set_title("mean and central 68 %; all else as chosen")
    return []
