"""The middle of the workbench: one view as a picture or a table, or all numbers."""

from __future__ import annotations

import html
from pathlib import Path
from typing import Any

import ipywidgets as widgets

from ladderfit.checks.residuals import HostResiduals
from ladderfit.errors import LadderfitError
from ladderfit.result import Result
from ladderfit.workbench.aside import aside_residuals
from ladderfit.workbench.canvas import Picture
from ladderfit.workbench.canvas.view import View
from ladderfit.workbench.claims import Beside, ClaimsFiles
from ladderfit.workbench.published import Published
from ladderfit.workbench.shelf import Shelf
from ladderfit.workbench.shown import Shown
from ladderfit.workbench.slow import Job, Slow
from ladderfit.workbench.star_line import StarLine
from ladderfit.workbench.state import Session
from ladderfit.workbench.tables import all_numbers
from ladderfit.workbench.view_bar import ViewBar

HEIGHT = "336px"
_AGAIN = 2  # beats after slow work with which its picture is sent once more


class Frame:
    """What stands in the middle, and the slow work behind it.

    Parameters
    ----------
    session : Session
    bar : ViewBar
        Says what is to be shown.
    picture : Picture
    stars : StarLine
    entry : Published
    published : dict
        Published values, by parameter.
    shelf : Shelf
        Pins and long runs.
    """

    def __init__(
        self,
        session: Session,
        bar: ViewBar,
        picture: Picture,
        stars: StarLine,
        entry: Published,
        published: dict[str, float],
        shelf: Shelf,
    ) -> None:
        self.session, self.bar, self.picture, self.stars = session, bar, picture, stars
        self.entry, self.published, self.shelf = entry, published, shelf
        self.claims = ClaimsFiles(session.ladder)
        self.slow = Slow(background=shelf.runs.background)
        self._aside: tuple[object, HostResiduals | None] | None = None
        self._drawn = ""
        self._again = 0
        self.table = widgets.HTML(layout=widgets.Layout(margin="0"))
        self.busy = widgets.HTML(layout=widgets.Layout(display="none", margin="0"))
        self.busy.add_class("lf-busy")
        self._scroll = widgets.VBox(
            [entry.widget, self.table, shelf.panel.widget],
            layout=widgets.Layout(width="100%", height=HEIGHT, display="none"),
        )
        self._scroll.add_class("lf-scroll")
        self.widget = widgets.Box(
            [picture.canvas, self._scroll, self.busy],
            layout=widgets.Layout(height=HEIGHT, flex="0 0 auto", overflow="hidden"),
        )
        self.widget.add_class("lf-frame")

    def show(self) -> None:
        """Show what the bar says of the posterior of the session."""
        result, bar = self.session.result, self.bar
        if result is None:
            return
        drawn = bar.shows == "view"
        self.claims.chosen = bar.claims.value or ""
        self._scroll.layout.display = "none" if drawn else ""
        self.picture.canvas.layout.display = "" if drawn else "none"
        entered = bar.shows == "numbers" or (bar.view == "published" and bar.shows == "table")
        if entered:
            self.entry.offer(result)
        self.entry.widget.layout.display = "" if entered else "none"
        self.table.layout.display = "none" if bar.shows == "board" else ""
        self.shelf.panel.widget.layout.display = "" if bar.shows == "board" else "none"
        if bar.shows in ("numbers", "board"):
            self.pause()
            self.numbers()
            return
        view = bar.chosen
        worked = self._worked(view)
        if view.work is not None and worked is None:
            return
        if drawn:
            self.picture.show(view, self._shown(worked))
            self.stars.offer(self.picture.points, self.session.settled)
            self._drawn = view.key
        else:
            self.table.value = view.table(self._shown(worked))

    def numbers(self) -> None:
        """Bring the table of all numbers, or the board, up to date where it is on show."""
        session = self.session
        if self.bar.shows == "board":
            self.shelf.panel.refresh()
        elif self.bar.shows == "numbers" and session.result is not None:
            self.entry.offer(session.result)
            full = self.shelf.full()
            self.table.value = all_numbers(session.result, session.pinned, self.published, full)

    def pause(self) -> None:
        """Let go of slow work: something newer is coming."""
        self.slow.cancel()
        self._wait("")

    @property
    def waits(self) -> bool:
        """Whether slow work is under way, or done and perhaps not seen yet."""
        return self.slow.current is not None or self._again > 0

    def progress(self) -> None:
        """Say how far slow work is, or show what it gave.

        A page that is still taking in a picture drops word of a newer one, so that
        the outcome is sent once more with the next beats.
        """
        job = self.slow.current
        if job is None and self._again > 0:
            self._again -= 1
            self.picture.canvas.draw_idle()
        elif job is not None and job.done:
            self._again = _AGAIN
            self.show()
        elif job is not None:
            self._tell(self.bar.chosen, job)

    def recolour(self) -> None:
        """Draw again, whatever has to be waited for."""
        self._drawn = ""
        self.show()

    def save(self, stem: Path) -> list[Path]:
        """Write the view as PNG and PDF."""
        view = self.bar.chosen
        worked = self._worked(view)
        if self.session.result is None or (view.work is not None and worked is None):
            raise LadderfitError("there is no such view yet to save")
        return self.picture.save(stem, view, self._shown(worked))

    def _worked(self, view: View) -> Any:
        """What a view's slow work gave; None while there is nothing to show."""
        result = self.session.result
        if view.work is None or result is None:
            self.pause()
            return None
        job = self.slow.ask(view.key, result, view.work)
        if job.done and not job.words:
            self._wait("")
            return job.value
        if job.words:
            self._wait("")
            self._instead(view, job.words)
        else:
            if self._drawn != view.key or self.bar.shows == "table":
                self._instead(view, f"{view.doing[:1].upper()}{view.doing[1:]} ...")
            self._tell(view, job)
        return None

    def _instead(self, view: View, words: str) -> None:
        """Words in place of the view."""
        self._drawn = ""
        self.table.value = f"<p>{html.escape(words)}</p>"
        if self.bar.shows == "view":
            self.picture.say(words)
            self.stars.offer([], self.session.settled)

    def _tell(self, view: View, job: Job) -> None:
        self._wait(f"{view.doing}: {100.0 * job.share:.0f} %")

    def _wait(self, words: str) -> None:
        """Say that the view on show waits for something, or that it no longer does."""
        escaped = html.escape(words)
        self.busy.value = f'<div role="status">{escaped}</div>' if words else ""
        self.busy.layout.display = "" if words else "none"
        (self.widget.add_class if words else self.widget.remove_class)("lf-waiting")

    def _shown(self, worked: Any) -> Shown:
        result = self.session.result
        if result is None:
            raise LadderfitError("there is no posterior to show")
        aside = self._aside_stars() if self.bar.view == "relation" else None
        full, bar = self.shelf.full(), self.bar
        claims = self._beside(result) if bar.view == "published" else Beside()
        return Shown(result, bar.rung, bar.column, aside, worked, full, self.published, claims)

    @property
    def trouble(self) -> str:
        """What is wrong with the claims file, where the view on show is of claims."""
        result = self.session.result
        if result is None or self.bar.view != "published" or self.bar.shows in ("numbers", "board"):
            return ""
        return " ".join(f"{line}." for line in self.claims.beside(result).trouble)

    def _beside(self, result: Result) -> Beside:
        """The claims of the file picked, held against a posterior."""
        self.bar.offer_claims(self.claims.offered(), self.claims.chosen)
        return self.claims.beside(result)

    def _aside_stars(self) -> HostResiduals | None:
        """Stars set aside, worked out once per posterior."""
        result = self.session.result
        if result is None:
            return None
        if self._aside is None or self._aside[0] is not result:
            self._aside = (result, aside_residuals(result))
        return self._aside[1]
