"""Margins in pixels, whatever the size of the figure."""

from __future__ import annotations

from matplotlib.axes import Axes
from matplotlib.figure import Figure


def margins(
    figure: Figure,
    left: float,
    right: float,
    top: float,
    bottom: float,
    *,
    hspace: float = 0.0,
    wspace: float = 0.0,
) -> None:
    """Leave so many pixels (at 100 to the inch) at each side."""
    width, height = (100.0 * float(size) for size in figure.get_size_inches())
    figure.subplots_adjust(
        left=left / width,
        right=1.0 - right / width,
        top=1.0 - top / height,
        bottom=bottom / height,
        hspace=hspace,
        wspace=wspace,
    )


def place_label(axes: Axes, pixels: float) -> None:
    """Put the label of the vertical axis so many pixels left of it."""
    figure = axes.get_figure(root=True)
    if figure is not None:
        width = 100.0 * float(figure.get_size_inches()[0]) * axes.get_position().width
        axes.yaxis.set_label_coords(-pixels / width, 0.5)
