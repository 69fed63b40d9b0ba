"""One look for every figure: colours, markers and lines that go together.

The accents keep apart for readers with any of the three kinds of colour
blindness, and each has a marker and a line style of its own, so that nothing
rests on colour alone.  Figures are made without pyplot: nothing global is left
open, and a figure is freed with its last reference.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import to_hex, to_rgb
from matplotlib.figure import Figure
from matplotlib.ticker import FixedLocator, FuncFormatter, NullFormatter

from ladderfit.names import group_of, parameter
from ladderfit.samples import FloatArray

WIDTH = 7.0  # inches, two columns of a journal
COLUMN = 3.4  # inches, one column
CHANCES = "68 % and 95 %"


@dataclass(frozen=True)
class Accent:
    """A colour with the marker and the line style that always go with it."""

    colour: str
    marker: str
    line: Any

    def points(self, size: float, bar: float = 0.8) -> dict[str, Any]:
        """Keywords for points of a size without a line, their error bars of a width [points]."""
        return {
            "linestyle": "none",
            "marker": self.marker,
            "markersize": size,
            "markeredgewidth": 0.0,
            "elinewidth": bar,
            "color": self.colour,
        }


@dataclass(frozen=True)
class Theme:
    """Colours of one variant.

    Attributes
    ----------
    paper, ink, muted, grid : str
        Background; text and lines; what should stand back; grid lines.
    accents : tuple of Accent
        For the few groups that must be told apart.
    """

    name: str
    paper: str
    ink: str
    muted: str
    grid: str
    accents: tuple[Accent, ...]

    def accent(self, index: int) -> Accent:
        """An accent by number, starting over after the last."""
        return self.accents[index % len(self.accents)]

    def tint(self, colour: str, strength: float) -> str:
        """A colour thinned towards the paper; opaque, so that it prints alike everywhere."""
        mixed = [
            strength * own + (1.0 - strength) * paper
            for own, paper in zip(to_rgb(colour), to_rgb(self.paper), strict=True)
        ]
        return to_hex((mixed[0], mixed[1], mixed[2]))

    def settings(self) -> Any:
        """Matplotlib's settings."""
        return {
            "axes.axisbelow": True,
            "axes.edgecolor": self.ink,
            "axes.facecolor": self.paper,
            "axes.grid": True,
            "axes.labelcolor": self.ink,
            "axes.linewidth": 0.7,
            "axes.spines.right": False,
            "axes.spines.top": False,
            "axes.titlesize": 8.5,
            "axes.unicode_minus": True,
            "figure.facecolor": self.paper,
            "font.family": "sans-serif",
            "font.sans-serif": ["DejaVu Sans"],  # comes with matplotlib: alike everywhere
            "font.size": 8.5,
            "grid.color": self.grid,
            "grid.linewidth": 0.6,
            "legend.fontsize": 7.5,
            "legend.frameon": False,
            "legend.handlelength": 1.8,
            "lines.linewidth": 1.4,
            "mathtext.fontset": "dejavusans",
            "pdf.fonttype": 42,  # text stays text
            "savefig.facecolor": self.paper,
            "svg.fonttype": "none",
            "text.color": self.ink,
            "xtick.color": self.ink,
            "xtick.labelsize": 7.5,
            "ytick.color": self.ink,
            "ytick.labelsize": 7.5,
        }

    @contextmanager
    def applied(self) -> Iterator[None]:
        """Matplotlib's settings, for as long as a figure is made or saved."""
        with mpl.rc_context(self.settings()):
            yield


_STYLES: tuple[tuple[str, Any], ...] = (
    ("o", "-"),
    ("s", (0, (5, 1.5))),
    ("D", (0, (1.2, 1.2))),
    ("^", (0, (5, 1.5, 1.2, 1.5))),
)


def _accents(colours: Sequence[str]) -> tuple[Accent, ...]:
    return tuple(Accent(c, *style) for c, style in zip(colours, _STYLES, strict=True))


LIGHT = Theme(
    name="light",
    paper="#ffffff",
    ink="#1c2733",
    muted="#76808c",
    grid="#e4e8ec",
    accents=_accents(("#0f4c81", "#d9730d", "#8a1f4f", "#3fa08a")),
)
DARK = Theme(
    name="dark",
    paper="#14181f",
    ink="#e6eaf0",
    muted="#8f99a6",
    grid="#2b323c",
    accents=_accents(("#4f9ddb", "#f4a259", "#c65f9b", "#d9ecc8")),
)


def plain(text: str) -> str:
    """Text from a table or a ladder file, none of which is read as mathematics."""
    return text.replace("$", r"\$")


def symbol(name: str) -> str:
    """A parameter's symbol and, after it, its group or host."""
    group = group_of(name)
    return parameter(name).symbol + ("" if group is None else f" {plain(group)}")


def new_figure(height: float, width: float = WIDTH) -> Figure:
    """An empty figure of a size in inches, laid out so that no label is clipped."""
    return Figure(figsize=(width, height), layout="constrained")


def brighter_up(axes: Axes) -> None:
    """Turn a magnitude axis so that brighter is up, however its limits change later."""
    if not axes.yaxis_inverted():
        axes.invert_yaxis()


def symmetric(axes: Axes, residual: FloatArray, sd: FloatArray) -> None:
    """Limits round zero that hold every residual and twice a typical expected spread."""
    reach = 1.12 * max(float(np.max(np.abs(residual))), 2.0 * float(np.median(sd)))
    axes.set_ylim(-reach, reach)


def plain_log_axis(axes: Axes, ticks: Sequence[float], *, which: str = "x") -> None:
    """A logarithmic axis whose ticks are written as plain numbers."""
    axis = axes.xaxis if which == "x" else axes.yaxis
    (axes.set_xscale if which == "x" else axes.set_yscale)("log")
    axis.set_major_locator(FixedLocator(list(ticks)))
    axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axis.set_minor_formatter(NullFormatter())


def series_of_ticks(low: float, high: float) -> list[float]:
    """Round numbers between two positive bounds: 1, 2, 3, 5, 7, 10, ..."""
    first = int(np.floor(np.log10(low))) - 1
    last = int(np.ceil(np.log10(high))) + 1
    ticks = [base * 10.0**power for power in range(first, last + 1) for base in (1, 2, 3, 5, 7)]
    return [tick for tick in ticks if low <= tick <= high]


def figure_of(axes: Axes) -> Figure:
    """The figure that holds `axes`.

    Raises
    ------
    ValueError
        If the axes have been removed from their figure.
    """
    figure = axes.get_figure(root=True)
    if figure is None:
        raise ValueError("the axes belong to no figure")
    return figure
