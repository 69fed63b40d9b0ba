"""The relation with what each star is taken for: how likely an outlier, or of which weight."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patheffects import withStroke

from ladderfit.checks.outliers import outlier_table
from ladderfit.checks.residuals import Residuals, cepheid_residuals, line_draws, parallax_magnitudes
from ladderfit.plots.relation import PERIOD_TICKS
from ladderfit.plots.theme import (
    COLUMN,
    LIGHT,
    WIDTH,
    Theme,
    brighter_up,
    figure_of,
    new_figure,
    plain,
    plain_log_axis,
)
from ladderfit.result import Result
from ladderfit.samples import BoolArray, FloatArray, IntArray

LIKELY, SURE = 0.5, 0.9  # probabilities from which a star stands out; in words below
LIGHT_WEIGHT, LIGHTER = 0.6, 0.3  # weights under a Student-t below which it does; likewise
_NAMED = 6  # stars that get their name


def outlier_figure(result: Result, *, theme: Theme = LIGHT, width: float = WIDTH) -> Figure | None:
    """Stars round the line, marked by the probability of being outliers, and their residuals.

    Under a Student-t stars are marked by their weight in the fit.

    Parameters
    ----------
    result : Result
    theme : Theme
    width : float
        In inches.

    Returns
    -------
    Figure or None
        None where outliers are not modelled.
    """
    table = outlier_table(result)
    if table is None:
        return None
    stars = list(marked(result, table))
    if not stars:
        return None
    with theme.applied():
        figure = new_figure(4.8 if width > COLUMN else 4.6, width)
        upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=[3, 1.6])
        relation_panel(result, stars, upper, theme=theme)
        residual_panel(stars, lower, theme=theme, named=_NAMED if width > COLUMN else 0)
        lower.set_xlabel("Period [d]")
        figure.align_ylabels([upper, lower])
        figure.legend(
            *upper.get_legend_handles_labels(),
            loc="outside upper left",
            ncols=2 if width > COLUMN and len(_measures(stars)) == 1 else 1,
        )
    return figure


Marked = tuple[Residuals, pd.DataFrame]


def marked(result: Result, table: pd.DataFrame) -> Iterator[Marked]:
    """Residuals of each sample with the rows of the table that belong to them."""
    by_sample = dict(tuple(table.groupby("sample")))
    hosts = cepheid_residuals(result)
    if "cepheids" in by_sample and hosts is not None:
        yield hosts, by_sample["cepheids"].reset_index(drop=True)
    found = parallax_magnitudes(result)
    if "anchors.parallaxes" in by_sample and found is not None and len(found[0]):
        rows = by_sample["anchors.parallaxes"].set_index("star")
        yield found[0], rows.loc[list(found[0].name)].reset_index()


def _measures(stars: list[Marked]) -> set[str]:
    """Which of probabilities and weights the stars have."""
    whole = pd.concat([table for _, table in stars])
    return {name for name in ("probability", "weight") if whole[name].notna().any()}


def _kinds(table: pd.DataFrame) -> list[tuple[str, BoolArray]]:
    """What stars are called, from those that follow the relation to those that do not."""
    p, w = table.probability.to_numpy(), table.weight.to_numpy()
    mixed, student = ~np.isnan(p), ~np.isnan(w)
    level = np.zeros(len(table), dtype=np.int64)
    level[mixed] = np.digitize(p[mixed], [LIKELY, SURE])
    level[student] = 2 - np.digitize(w[student], [LIGHTER, LIGHT_WEIGHT])
    words = {
        "probability of an outlier under 0.5": mixed,
        "weight in the fit of 0.6 and over": student,
    }
    first = ", or ".join(text for text, there in words.items() if there.any())
    middle = ", or ".join(t for t, m in (("0.5 to 0.9", mixed), ("0.3 to 0.6", student)) if m.any())
    last = ("0.9 and over", mixed), ("under 0.3", student)
    farthest = ", or ".join(text for text, there in last if there.any())
    return [(text, level == kind) for kind, text in enumerate((first, middle, farthest))]


def _draw(axes: Axes, stars: list[Marked], y: list[FloatArray], theme: Theme) -> None:
    whole = pd.concat([table for _, table in stars], ignore_index=True)
    x, height = np.concatenate([part.x for part, _ in stars]), np.concatenate(y)
    strong, second = theme.accent(1), theme.accent(0)
    looks: tuple[dict[str, Any], ...] = (
        {"marker": ".", "color": theme.tint(theme.muted, 0.6), "markersize": 3.0},
        {"marker": second.marker, "color": second.colour, "markersize": 4.2, "fillstyle": "none"},
        {"marker": strong.marker, "color": strong.colour, "markersize": 4.2},
    )
    for (words, chosen), look in zip(_kinds(whole), looks, strict=True):
        axes.plot(
            10.0 ** x[chosen],
            height[chosen],
            linestyle="none",
            label=f"{words} ({_counted(int(chosen.sum()))})",
            rasterized=len(x) > 2000,
            **look,
        )


def relation_panel(
    result: Result, stars: list[Marked], axes: Axes, *, theme: Theme = LIGHT
) -> Figure:
    """Absolute magnitudes against periods, with the line."""
    _draw(axes, stars, [part.data for part, _ in stars], theme)
    ends = np.concatenate([part.x for part, _ in stars])
    log_period = np.linspace(ends.min() - 0.04, ends.max() + 0.04, 100)
    middle = line_draws(result, log_period).mean(axis=0)
    axes.plot(10.0**log_period, middle, color=theme.ink, linewidth=1.0, label="the line")
    plain_log_axis(axes, PERIOD_TICKS)
    axes.set_xlim(10.0 ** log_period[0], 10.0 ** log_period[-1])
    brighter_up(axes)
    axes.set_ylabel("Absolute magnitude [mag]")
    return figure_of(axes)


def residual_panel(
    stars: list[Marked], axes: Axes, *, theme: Theme = LIGHT, named: int = _NAMED
) -> Figure:
    """Magnitude minus line against period; the likeliest outliers by name."""
    residual = [part.residual for part, _ in stars]
    axes.axhline(0.0, color=theme.ink, linewidth=0.8)
    _draw(axes, stars, residual, theme)
    brighter_up(axes)
    axes.margins(y=0.12)
    axes.set_ylabel("Residual [mag]")
    whole = pd.concat([table for _, table in stars], ignore_index=True)
    x, height = np.concatenate([part.x for part, _ in stars]), np.concatenate(residual)
    off = ~_kinds(whole)[0][1]
    for place in _apart(x, height, np.flatnonzero(off), named):
        axes.annotate(
            plain(str(whole.star[place])),
            (10.0 ** x[place], height[place]),
            xytext=(4, 0),
            textcoords="offset points",
            va="center",
            fontsize=6.5,
            color=theme.ink,
            path_effects=[withStroke(linewidth=2.0, foreground=theme.paper)],
        )
    return figure_of(axes)


def _counted(stars: int) -> str:
    return "1 star" if stars == 1 else f"{stars:,} stars"


def _apart(x: FloatArray, y: FloatArray, among: IntArray, most: int) -> list[int]:
    """The stars farthest off whose names do not cover one another."""
    taken: list[int] = []
    reach = max(float(np.ptp(y)), 1e-9)
    for place in among[np.argsort(-np.abs(y[among]))].tolist():
        gaps = [(abs(x[place] - x[other]), abs(y[place] - y[other])) for other in taken]
        if all(across > 0.2 or up > 0.12 * reach for across, up in gaps):
            taken.append(place)
    return taken[:most]
