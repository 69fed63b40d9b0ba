"""What a view is: its button, where it is offered, how it is drawn, its table, its work."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Protocol

from matplotlib.figure import Figure

from ladderfit.ladder import Ladder
from ladderfit.plots.theme import Theme
from ladderfit.workbench.points import Points
from ladderfit.workbench.shown import Shown
from ladderfit.workbench.slow import Work

Drawing = Callable[[Figure, Shown, Theme], list[Points]]


class Artists(Protocol):
    """A view drawn in a figure; its artists may stay while their numbers change."""

    points: list[Points]

    def fits(self, shown: Shown) -> bool:
        """Whether the axes can stay for what is shown next."""

    def update(self, shown: Shown) -> None:
        """Show it."""


class Anew:
    """Artists that are made anew every time, by one function."""

    def __init__(self, figure: Figure, theme: Theme, drawing: Drawing) -> None:
        self.points: list[Points] = []
        self._figure, self._theme, self._drawing = figure, theme, drawing

    def fits(self, shown: Shown) -> bool:
        """Never."""
        del shown
        return False

    def update(self, shown: Shown) -> None:
        """Draw into the figure, which is empty."""
        self.points = self._drawing(self._figure, shown, self._theme)


@dataclass(frozen=True)
class View:
    """One entry of the registry.

    Attributes
    ----------
    key : str
        Its name in files.
    words, tip : str
        On its button, in one or two short words; and what it is.
    rungs : tuple of str
        The rungs that offer it.
    suits : callable
        Whether a ladder has, on a rung, what the view shows.
    table : callable
        The view's numbers as HTML.
    draw : callable, optional
        Draws it into an empty figure; returns what can be pointed at.
    artists : callable, optional
        In place of `draw`: makes artists that stay while their numbers change.
    work : callable, optional
        Slow work, of which the outcome is `Shown.worked`: it takes the posterior and
        a function to be told the fraction done after each piece, which may end it.
    doing : str
        What the work does, for the line that tells its progress.
    """

    key: str
    words: str
    tip: str
    rungs: tuple[str, ...]
    suits: Callable[[Ladder, str], bool]
    table: Callable[[Shown], str]
    draw: Drawing | None = None
    artists: Callable[[Figure, Shown, Theme], Artists] | None = None
    work: Work | None = None
    doing: str = ""

    def make(self, figure: Any, shown: Shown, theme: Theme) -> Artists:
        """Artists in an empty figure, yet to be updated."""
        if self.artists is not None:
            return self.artists(figure, shown, theme)
        if self.draw is None:
            raise ValueError(f"the view {self.key!r} has neither artists nor a way to draw")
        return Anew(figure, theme, self.draw)
