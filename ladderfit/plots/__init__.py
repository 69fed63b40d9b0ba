"""Figures of a result; the only folder, with the workbench's canvas, that imports matplotlib."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from matplotlib.figure import Figure

from ladderfit.plots.corner import corner_figure
from ladderfit.plots.hubble import hubble_figure
from ladderfit.plots.moduli import moduli_figure
from ladderfit.plots.outliers import outlier_figure
from ladderfit.plots.parallax import parallax_figure
from ladderfit.plots.peaks import peaks_figure
from ladderfit.plots.relation import relation_figure
from ladderfit.plots.theme import COLUMN, LIGHT, WIDTH, Theme
from ladderfit.result import Result

__all__ = ["COLUMN", "WIDTH", "figures", "save_figures"]

_MAKERS = {
    "relation": relation_figure,
    "parallaxes": parallax_figure,
    "corner": corner_figure,
    "moduli": moduli_figure,
    "hubble": hubble_figure,
    "peaks": peaks_figure,
    "outliers": outlier_figure,
}
DOTS_PER_INCH = 200


def figures(result: Result, *, theme: Theme = LIGHT, width: float = WIDTH) -> dict[str, Figure]:
    """Every figure that the ladder's rungs allow; without its tables, the corner alone.

    Parameters
    ----------
    result : Result
    theme : Theme
    width : float
        In inches: `WIDTH` for a page, `COLUMN` for one column of a journal.

    Returns
    -------
    dict of str to Figure
        Among ``relation``, ``parallaxes``, ``corner``, ``moduli``, ``hubble``, ``peaks`` and
        ``outliers``, in this order.
    """
    return dict(_made(result, theme, width))


def save_figures(result: Result, folder: Path, *, theme: Theme = LIGHT) -> list[Path]:
    """Write every figure as PDF (with its text as text) and as PNG.

    Those for one column of a journal are written beside them, as ``NAME_column.pdf``.
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
    for width, end, suffixes in ((WIDTH, "", (".pdf", ".png")), (COLUMN, "_column", (".pdf",))):
        for name, figure in _made(result, theme, width):
            paths = [folder / f"{name}{end}{suffix}" for suffix in suffixes]
            written += save_figure(figure, paths, theme)
    return written


def save_figure(figure: Figure, paths: list[Path], theme: Theme = LIGHT) -> list[Path]:
    """Write one figure under each path, by its suffix, and free it; gives the paths back.

    Raises
    ------
    OSError
        If a file cannot be written.
    """
    with theme.applied():
        for path in paths:
            metadata = {"CreationDate": None} if path.suffix == ".pdf" else None
            figure.savefig(path, dpi=DOTS_PER_INCH, metadata=metadata)
            figure.set_layout_engine("none")  # laid out once, for all files
    figure.clear()
    return paths


def _made(result: Result, theme: Theme, width: float) -> Iterator[tuple[str, Figure]]:
    for name, maker in _MAKERS.items():
        if result.source is None and name != "corner":
            continue
        figure = maker(result, theme=theme, width=width)
        if figure is not None:
            yield name, figure
