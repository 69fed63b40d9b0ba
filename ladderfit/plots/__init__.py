"""Figures of a result; the only folder, with the workbench's canvas, that imports matplotlib."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from matplotlib.figure import Figure

from ladderfit.plots.corner import corner_figure
from ladderfit.plots.hubble import hubble_figure
from ladderfit.plots.moduli import moduli_figure
from ladderfit.plots.parallax import parallax_figure
from ladderfit.plots.relation import relation_figure
from ladderfit.plots.theme import LIGHT, Theme
from ladderfit.result import Result

__all__ = ["figures", "save_figures"]

_MAKERS = {
    "relation": relation_figure,
    "parallaxes": parallax_figure,
    "corner": corner_figure,
    "moduli": moduli_figure,
    "hubble": hubble_figure,
}
DOTS_PER_INCH = 200


def figures(result: Result, *, theme: Theme = LIGHT) -> dict[str, Figure]:
    """Every figure that the ladder's rungs allow; without its tables, the corner alone.

    Parameters
    ----------
    result : Result
    theme : Theme

    Returns
    -------
    dict of str to Figure
        Among ``relation``, ``parallaxes``, ``corner``, ``moduli`` and ``hubble``, in this order.
    """
    return dict(_made(result, theme))


def save_figures(result: Result, folder: Path, *, theme: Theme = LIGHT) -> list[Path]:
    """Write every figure as PDF (with its text as text) and as PNG.

    Figures are made, written and freed one after another.

    Parameters
    ----------
    result : Result
    folder : Path
        Made if absent.
    theme : Theme

    Returns
    -------
    list of Path
        The files written.

    Raises
    ------
    OSError
        If a file cannot be written.
    """
    folder.mkdir(parents=True, exist_ok=True)
    written = []
    for name, figure in _made(result, theme):
        with theme.applied():
            for suffix, metadata in ((".pdf", {"CreationDate": None}), (".png", None)):
                path = folder / f"{name}{suffix}"
                figure.savefig(path, dpi=DOTS_PER_INCH, metadata=metadata)
                written.append(path)
                figure.set_layout_engine("none")  # laid out once, for all files
        figure.clear()
    return written


def _made(result: Result, theme: Theme) -> Iterator[tuple[str, Figure]]:
    for name, maker in _MAKERS.items():
        if result.source is None and name != "corner":
            continue
        figure = maker(result, theme=theme)
        if figure is not None:
            yield name, figure
