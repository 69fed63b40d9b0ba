"""The ladder as navigation: one axis of log distance, in one SVG."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import anywidget
import traitlets

from ladderfit.plots.theme import DARK, LIGHT, Theme
from ladderfit.workbench.rungs import Rung, overlaps

ASSETS = Path(__file__).parent / "assets"
_COLOURS = {"anchors": 3, "cepheids": 0, "supernovae": 2, "expansion": 1}


def _palette(theme: Theme) -> dict[str, str]:
    return {key: theme.accent(index).colour for key, index in _COLOURS.items()}


class LadderAxis(anywidget.AnyWidget):
    """Segments per rung, marks per object; knows the page's colours.

    Traits
    ------
    rung : str
        Key of the open rung; set by click or Enter.
    dark : bool
        Whether the page is dark.
    width : int
        Of the workbench, in px, as the page has room.
    ready : int
        Counts how often a figure has come to stand in the page.
    rgb : list of float
        The colour that the workbench stands on.
    """

    _esm = ASSETS / "axis.js"
    _css = ASSETS / "axis.css"
    rungs: traitlets.List[Any] = traitlets.List().tag(sync=True)
    overlaps: traitlets.List[Any] = traitlets.List().tag(sync=True)
    rung = traitlets.Unicode().tag(sync=True)
    palette = traitlets.Dict().tag(sync=True)
    dark = traitlets.Bool(False).tag(sync=True)
    ready = traitlets.Int(0).tag(sync=True)
    width = traitlets.Int(1000).tag(sync=True)
    rgb = traitlets.List([255, 255, 255]).tag(sync=True)

    def __init__(self, **traits: Any) -> None:
        super().__init__(palette={"light": _palette(LIGHT), "dark": _palette(DARK)}, **traits)

    def show(self, found: list[Rung]) -> None:
        """Draw these rungs."""
        with self.hold_sync():
            self.rungs = [_plain(rung) for rung in found]
            self.overlaps = [list(pair) for pair in overlaps(found)]


def _plain(rung: Rung) -> dict[str, Any]:
    low, high = rung.ends
    marks = [
        {"place": round(mark.place, 4), "name": mark.name, "kind": mark.kind, "used": mark.used}
        for mark in rung.marks
    ]
    return {
        "key": rung.key,
        "words": rung.words,
        "low": round(low, 4),
        "high": round(high, 4),
        "marks": marks,
    }
