"""One canvas, made once without pyplot; its artists are updated, or made anew per view."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

from ipympl.backend_nbagg import Canvas, FigureManager
from matplotlib.figure import Figure

from ladderfit.plots.theme import DARK, LIGHT, Theme
from ladderfit.residuals import HostResiduals
from ladderfit.result import Result
from ladderfit.workbench.canvas import panels
from ladderfit.workbench.canvas.corner import CornerView, corner_names
from ladderfit.workbench.canvas.relation import RelationView
from ladderfit.workbench.points import Points, nearest_of

__all__ = ["VIEWS", "Picture"]

VIEWS = {
    "relation": "Relation",
    "column": "Residuals against ...",
    "moduli": "Host moduli",
    "hubble": "Hubble diagram",
    "corner": "Joint posterior",
}
WIDTH, HEIGHT = 662, 336
_DPI = 100
_PANELS: Mapping[str, Callable[[Figure, Result, Theme], list[Points]]] = {
    "moduli": panels.moduli,
    "hubble": panels.hubble,
}

Pointed = Callable[[Points | None, int, bool], None]


class Picture:
    """The view on show.

    Parameters
    ----------
    pointed : callable
        Called with the points and the index under the pointer (None and 0 where there
        is nothing), and whether it was clicked.
    """

    def __init__(self, pointed: Pointed) -> None:
        self.figure = Figure(figsize=(WIDTH / _DPI, HEIGHT / _DPI), dpi=_DPI)
        self.canvas = Canvas(self.figure)
        FigureManager(self.canvas, 0)
        self.canvas.header_visible = False
        self.canvas.footer_visible = False
        self.canvas.toolbar_visible = False
        self.canvas.resizable = False
        self.theme = LIGHT
        self._pointed = pointed
        self._relation: RelationView | None = None
        self._corner: CornerView | None = None
        self._shown: tuple[str, Theme] | None = None
        self._under: tuple[Points, int] | None = None
        self.points: list[Points] = []
        self.canvas.mpl_connect("motion_notify_event", self._hover)
        self.canvas.mpl_connect("button_press_event", self._click)

    def take_colours(self, dark: bool, rgb: Sequence[float]) -> None:
        """Use the page's own background."""
        paper = "#" + "".join(f"{round(part):02x}" for part in rgb)
        self.theme = replace(DARK if dark else LIGHT, paper=paper)

    def resize(self, width: int) -> None:
        """Take a new width in px."""
        if width == round(self.figure.get_figwidth() * _DPI):
            return
        self.figure.set_size_inches(width / _DPI, HEIGHT / _DPI, forward=False)
        self._shown = None
        self.anew()

    def anew(self) -> None:
        """Tell the page the size once more, and send the next picture whole."""
        size = self.figure.bbox.size
        self.canvas.manager.resize(float(size[0]), float(size[1]))
        self.canvas._force_full = True

    def show(
        self,
        view: str,
        result: Result,
        *,
        aside: HostResiduals | None = None,
        rung: str = "",
        column: str = "",
    ) -> None:
        """Draw a view of a posterior."""
        with self.theme.applied():
            again = self._shown == (view, self.theme)
            if not (again and self._kept(view, result)):
                self.figure.clear()
                self.figure.set_facecolor(self.theme.paper)
                self._relation = self._corner = None
            self._shown = (view, self.theme)
            self._under = None
            self.points = self._draw(view, result, aside, rung, column)
            self.canvas.draw_idle()

    def _kept(self, view: str, result: Result) -> bool:
        """Whether the axes of a view can stay, and only what is in them changes."""
        if view == "corner":
            return self._corner is not None and self._corner.names == corner_names(result)
        return view == "relation"

    def _draw(
        self, view: str, result: Result, aside: HostResiduals | None, rung: str, column: str
    ) -> list[Points]:
        if view == "relation":
            if self._relation is None:
                self._relation = RelationView(self.figure, self.theme)
            self._relation.update(result, aside)
            return self._relation.points
        if view == "corner":
            if self._corner is None:
                self._corner = CornerView(self.figure, corner_names(result), self.theme)
            self._corner.update(result)
            return []
        if view == "column":
            return panels.column(self.figure, result, self.theme, rung, column)
        return _PANELS[view](self.figure, result, self.theme)

    def save(
        self,
        stem: Path,
        view: str,
        result: Result,
        *,
        aside: HostResiduals | None = None,
        rung: str = "",
        column: str = "",
    ) -> list[Path]:
        """Write the view as PNG and PDF, on white; returns the paths."""
        figure = Figure(figsize=(WIDTH / _DPI, HEIGHT / _DPI))
        written = []
        with LIGHT.applied():
            figure.set_facecolor(LIGHT.paper)
            if view == "relation":
                RelationView(figure, LIGHT).update(result, aside)
            elif view == "corner":
                CornerView(figure, corner_names(result), LIGHT).update(result)
            elif view == "column":
                panels.column(figure, result, LIGHT, rung, column)
            else:
                _PANELS[view](figure, result, LIGHT)
            for suffix in (".png", ".pdf"):
                path = stem.with_name(f"{stem.name}{suffix}")
                figure.savefig(path, dpi=200)
                written.append(path)
        return written

    def mark(self, found: tuple[Points, int] | None) -> None:
        """Ring a point of the relation, or none."""
        if self._relation is not None:
            self._relation.ring(found)
            self.canvas.draw_idle()

    def _find(self, event: Any) -> tuple[Points, int] | None:
        if event.inaxes is None:
            return None
        return nearest_of(self.points, event.inaxes, event.x, event.y)

    def _hover(self, event: Any) -> None:
        found = self._find(event)
        before, self._under = self._under, found
        if found is None and before is not None:
            self._pointed(None, 0, False)
        elif found is not None and found != before:
            self._pointed(*found, False)

    def _click(self, event: Any) -> None:
        found = self._find(event)
        if found is not None and event.button == 1:
            self._pointed(*found, True)
