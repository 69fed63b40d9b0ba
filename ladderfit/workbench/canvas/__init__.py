"""One canvas, made once without pyplot; its artists are updated, or made anew per view."""

from __future__ import annotations

import threading
from collections.abc import Callable, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

from ipympl.backend_nbagg import Canvas, FigureManager
from matplotlib.figure import Figure

from ladderfit.plots.theme import DARK, LIGHT, Theme
from ladderfit.workbench.canvas.view import Artists, View
from ladderfit.workbench.points import Points, nearest_of
from ladderfit.workbench.shown import Shown

__all__ = ["Picture"]

WIDTH, HEIGHT = 662, 336
_DPI = 100

Pointed = Callable[[Points | None, int, bool], None]


class _Canvas(Canvas):  # type: ignore[misc]  # ipympl has no types
    """A canvas that is never rendered while another thread changes its figure."""

    def __init__(self, figure: Figure, lock: threading.RLock) -> None:
        self._lock = lock
        super().__init__(figure)

    def draw(self) -> None:
        """Render."""
        with self._lock:
            super().draw()


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
        self._lock = threading.RLock()
        self.canvas = _Canvas(self.figure, self._lock)
        FigureManager(self.canvas, 0)
        self.canvas.header_visible = False
        self.canvas.footer_visible = False
        self.canvas.toolbar_visible = False
        self.canvas.resizable = False
        self.theme = LIGHT
        self._pointed = pointed
        self._artists: Artists | None = None
        self._shown: tuple[str, Theme] | None = None
        self._under: tuple[Points, int] | None = None
        self.canvas.mpl_connect("motion_notify_event", self._hover)
        self.canvas.mpl_connect("button_press_event", self._click)

    @property
    def points(self) -> list[Points]:
        """What can be pointed at."""
        return [] if self._artists is None else self._artists.points

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

    def show(self, view: View, shown: Shown) -> None:
        """Draw a view."""
        with self._lock, self.theme.applied():
            artists, again = self._artists, self._shown == (view.key, self.theme)
            if artists is None or not (again and artists.fits(shown)):
                self._clear()
                artists = view.make(self.figure, shown, self.theme)
            self._shown, self._artists = (view.key, self.theme), artists
            artists.update(shown)
            self.canvas.draw_idle()

    def say(self, words: str) -> None:
        """Show a sentence in place of a view."""
        with self._lock, self.theme.applied():
            self._clear()
            self._shown = self._artists = None
            self.figure.text(0.5, 0.5, words, ha="center", va="center", wrap=True)
            self.canvas.draw_idle()

    def _clear(self) -> None:
        self.figure.clear()
        self.figure.set_facecolor(self.theme.paper)
        self._under = None

    def save(self, stem: Path, view: View, shown: Shown) -> list[Path]:
        """Write the view as PNG and PDF, on white; returns the paths."""
        figure = Figure(figsize=(WIDTH / _DPI, HEIGHT / _DPI))
        written = []
        with LIGHT.applied():
            figure.set_facecolor(LIGHT.paper)
            view.make(figure, shown, LIGHT).update(shown)
            for suffix in (".png", ".pdf"):
                path = stem.with_name(f"{stem.name}{suffix}")
                figure.savefig(path, dpi=200)
                written.append(path)
        return written

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
