"""What moves a number the most when it is left out: single objects, and whole hosts."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.transforms import blended_transform_factory

from ladderfit.influence import KINDS, Influence
from ladderfit.influence.reweighting import NOT_TRUSTED, UNDETERMINED
from ladderfit.influence.sets import FLOW, HOST
from ladderfit.names import parameter
from ladderfit.plots.theme import LIGHT, Theme, figure_of, new_figure, plain

MOST = 12  # objects that are named
_ROW = 0.2  # inches
_LETTERS = 26
_FIRST = ("hubble_constant", "zero_point")


def influence_figure(
    influence: Influence, name: str | None = None, *, most: int = MOST, theme: Theme = LIGHT
) -> Figure:
    """The most influential objects, and beside them the most influential hosts.

    Parameters
    ----------
    influence : Influence
    name : str, optional
        One of its targets; by default the Hubble constant, else the zero point.
    most : int
        How many objects and hosts are shown.
    theme : Theme

    Returns
    -------
    Figure

    Raises
    ------
    KeyError
        If the parameter is not among the targets.
    """
    if name is None:
        known = [each for each in _FIRST if each in influence.targets]
        name = known[0] if known else influence.targets[0]
    table = influence.by(name)
    hosts = table[table["kind"] == HOST].head(most)
    singles = table[table["kind"] != HOST].head(most)
    parts = [part for part in (singles, hosts) if len(part)]
    with theme.applied():
        figure = new_figure(1.25 + _ROW * max([len(part) for part in parts] or [3]))
        panels = figure.subplots(1, max(len(parts), 1), squeeze=False)[0]
        for part, axes in zip(parts, panels, strict=False):
            ranked_panel(part, name, influence.errors[name], axes, theme=theme)
            whole = part["kind"].iloc[0] == HOST
            total = int(np.sum((table["kind"] == HOST) == whole))
            words = "whole hosts" if whole else "single objects"
            axes.set_title(f"{len(part)} of {total:,} {words}", loc="left")
        handles = {
            words: handle
            for axes in panels
            for handle, words in zip(*axes.get_legend_handles_labels(), strict=True)
        }
        figure.legend(
            handles.values(), handles.keys(), loc="outside lower center", ncols=min(len(handles), 5)
        )
    return figure


def ranked_panel(
    table: pd.DataFrame, name: str, error: float, axes: Axes, *, theme: Theme = LIGHT
) -> Figure:
    """A row per object, in the order of the table: the change when it is left out.

    Parameters
    ----------
    table : DataFrame
        Rows of `Influence.table`.
    name : str
        The parameter.
    error : float
        Its posterior standard deviation; the band.
    axes : Axes
        Drawn into.
    theme : Theme

    Returns
    -------
    Figure
        The figure that holds `axes`.
    """
    known, unit = parameter(name), parameter(name).unit
    band = theme.tint(theme.muted, 0.25)
    axes.axvspan(-error, error, color=band, linewidth=0.0, label="error of the calibration")
    axes.axvline(0.0, color=theme.muted, linewidth=0.9)
    beside = blended_transform_factory(axes.transAxes, axes.transData)
    for row, (_, line) in enumerate(table.iterrows()):
        if line["how"] == UNDETERMINED:
            axes.text(
                0.5, row, "scale undetermined without it", transform=beside, ha="center",
                va="center", fontsize=7.0,
                bbox={"facecolor": theme.paper, "edgecolor": "none", "pad": 1.0},
            )  # fmt: skip
            continue
        accent = theme.accent(KINDS.index(str(line["kind"])) if line["kind"] != HOST else 3)
        words = str(line["kind"])
        axes.plot(
            [0.0, float(line[name])], [row, row], color=accent.colour, linewidth=1.0, alpha=0.6
        )
        axes.errorbar(
            float(line[name]), row, xerr=float(line[f"{name}_mcse"]), linestyle="none",
            marker=accent.marker, markersize=4.0, color=accent.colour, elinewidth=1.0,
            markerfacecolor=theme.paper if line["how"] == NOT_TRUSTED else accent.colour,
            label=f"supernova {words}" if words == FLOW else words,
        )  # fmt: skip
    axes.set_yticks(range(len(table)), [plain(_short(line)) for _, line in table.iterrows()])
    axes.tick_params(axis="y", length=0)
    axes.set_ylim(len(table) - 0.4, -0.6)
    axes.set_xlabel(f"Change of {known.symbol} when left out" + (f" [{unit}]" if unit else ""))
    axes.locator_params(axis="x", nbins=6)
    return figure_of(axes)


def _short(line: pd.Series[Any]) -> str:
    name, host = str(line["name"]), str(line["host"])
    text = name if not host or host == name else f"{name} ({host})"
    return text if len(text) <= _LETTERS else f"{text[: _LETTERS - 1]}\N{HORIZONTAL ELLIPSIS}"
