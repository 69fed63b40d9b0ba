"""Predictive checks, and the terms of the peak-magnitude relation."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from matplotlib.figure import Figure

from ladderfit.checks.peak_views import peak_view, views_of
from ladderfit.checks.predictive import Checks
from ladderfit.plots.checks import (
    along_panel,
    distribution_panel,
    list_panel,
    peaks_have_terms,
    supernova_panels,
)
from ladderfit.plots.peaks import term_panel
from ladderfit.plots.theme import Theme
from ladderfit.workbench.canvas.margins import margins, place_label
from ladderfit.workbench.points import Points
from ladderfit.workbench.shown import Shown

_WIDE = 6.0  # inches from which a legend has three columns
_PEAKS = ("supernovae", "expansion")  # rungs
_ALONG = ("period", "colour", "metallicity", "distance", "stated error")


def checks(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """Deviations: whether normal, and along what may matter; else p-values.

    They are those of the Cepheids, and on the supernovae's rungs those of supernovae.
    """
    found: Checks = shown.worked
    sample = next((one for one in found.samples if one.name == "Cepheids"), None)
    if peaks_have_terms(found) and (sample is None or shown.rung in _PEAKS):
        panels = np.ravel(figure.subplots(2, 3))
        margins(figure, 58, 10, 32, 40, hspace=0.72, wspace=0.3)
        supernova_panels(found, list(panels), theme=theme)
        _small(panels)
        return []
    if sample is None:
        axes = figure.subplots()
        margins(figure, 190, 14, 10, 44)
        list_panel(found, axes, theme=theme)
        return []
    names = [name for name in _ALONG if name in sample.along]
    panels = np.ravel(figure.subplots(2, 3))
    margins(figure, 58, 10, 32, 40, hspace=0.72, wspace=0.3)
    distribution_panel(sample, panels[0], theme=theme)
    panels[0].legend(
        loc="upper center", ncols=2, columnspacing=0.6, handlelength=1.0, handletextpad=0.3,
        borderaxespad=0.0, fontsize=6.0,
    )  # fmt: skip
    for name, axes in zip(names, panels[1:], strict=False):
        along_panel(found, sample, name, axes, theme=theme)
    for axes in panels[1 + len(names) :]:
        axes.set_axis_off()
    _small(panels)
    return []


def _small(panels: npt.NDArray[Any]) -> None:
    for axes in panels:
        axes.xaxis.labelpad = 1
        axes.xaxis.label.set_fontsize(7.5)


def peaks(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """One panel for each term of the peak-magnitude relation."""
    result = shown.result
    terms = views_of(result)[:3]
    if not terms:
        return []
    panels = figure.subplots(1, len(terms), squeeze=False, sharey=True)[0]
    wide = figure.get_figwidth() >= _WIDE
    margins(figure, 64, 12, 56 if wide else 72, 44, wspace=0.12)
    found = []
    for term, axes in zip(terms, panels, strict=True):
        term_panel(result, axes, term, theme=theme)
        axes.xaxis.labelpad = 1
        axes.xaxis.label.set_fontsize(7.5)
        axes.title.set_fontsize(7.5)
        view = peak_view(result, term)
        for section, chosen in (("supernovae", view.in_hosts), ("expansion", ~view.in_hosts)):
            nobody = [""] * int(chosen.sum())
            found.append(
                Points(
                    axes, view.x[chosen], view.data[chosen], view.name[chosen], nobody, section,
                    view.residual[chosen], view.sd[chosen],
                )
            )  # fmt: skip
    panels[0].set_ylabel("Peak less all else [mag]")
    place_label(panels[0], 46)
    handles: dict[str, Any] = {}
    for axes in panels:
        for handle, words in zip(*axes.get_legend_handles_labels(), strict=True):
            handles.setdefault(words, handle)
    figure.legend(
        list(handles.values()), list(handles), loc="upper right", ncols=3 if wide else 2,
        bbox_to_anchor=(0.995, 1.0), borderaxespad=0.2, columnspacing=1.0, fontsize=7.0,
    )  # fmt: skip
    return found
