"""Which view is on show: at most four have buttons, the rest stand under "more"."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import ipywidgets as widgets

from ladderfit.ladder import Ladder
from ladderfit.workbench.canvas.view import View
from ladderfit.workbench.columns import numeric_columns
from ladderfit.workbench.views import BY_KEY, VIEWS, offered

_MORE = "more ..."
_NO_CLAIMS = ("claims file ...", "")


class ViewBar:
    """Buttons of the views, menus of the others, of columns and claims files; table, PNG and PDF.

    Attributes
    ----------
    rung, view, column : str
        What is on show.
    shows : str
        ``view``, ``table``, or the key of a button that takes the view's place.
    """

    def __init__(
        self, ladder: Ladder, changed: Callable[[], None], save: Callable[[], None]
    ) -> None:
        self.rung = ""
        self.view = "corner"
        self.shows = "view"
        self._changed = changed
        self._quiet = False
        self._ladder = ladder
        self._views = {view.key: self._view_button(view) for view in VIEWS}
        self.more = widgets.Dropdown(layout=widgets.Layout(width="130px", order="9"))
        self.more.tooltip = "More views"
        self.more.observe(self._other, "value")
        # a row above, as four views and a column leave no room for Table and PNG
        self.columns = widgets.Dropdown(
            layout=widgets.Layout(width="96px", display="none", order="10")
        )
        self.columns.tooltip = "Column of the table"
        self.columns.observe(self._picked, "value")
        self.claims = widgets.Dropdown(
            options=[_NO_CLAIMS], layout=widgets.Layout(width="176px", display="none", order="10")
        )
        self.claims.tooltip = "Claims file beside the ladder file"
        self.claims.observe(self._claimed, "value")
        self.table = self._toggle("Table", "The view's numbers as a table", "table", "50px")
        self.numbers = self._toggle("All numbers", "Every parameter", "numbers", "88px")
        self.board = self._toggle("Pins, runs", "The board of pins and long runs", "board", "84px")
        self.save = widgets.Button(
            description="PNG, PDF",
            tooltip="Save the view beside the notebook",
            layout=widgets.Layout(width="68px"),
        )
        self.save.layout.order = "21"
        self.save.on_click(lambda _: save())
        spring = widgets.Box(layout=widgets.Layout(flex="1 1 auto", order="11"))
        self.widget = widgets.HBox(
            [*self._views.values(), self.more, spring, self.table, self.save],
            layout=widgets.Layout(height="30px", flex="0 0 auto"),
        )
        self.widget.add_class("lf-bar-of-views")

    @property
    def chosen(self) -> View:
        """The view on show."""
        return BY_KEY[self.view]

    @property
    def column(self) -> str:
        """The column that residuals are shown against."""
        return self.columns.value or ""

    def open(self, rung: str, ladder: Ladder) -> None:
        """Offer a rung's views; keep the one on show where it is among them."""
        self.rung, self._ladder = rung, ladder
        first, more = offered(ladder, rung)
        for key, button in self._views.items():
            button.layout.display = "" if key in first else "none"
            button.layout.order = str(first.index(key) if key in first else 8)
        self._quiet = True
        options = [(_MORE, ""), *((BY_KEY[key].words, key) for key in more)]
        if tuple(options) != tuple(self.more.options):
            self.more.options = options
        self.more.layout.display = "" if more else "none"
        self.columns.options = names = numeric_columns(ladder, rung)
        if self.columns.value is None and names:
            self.columns.value = names[0]
        self._quiet = False
        if self.view not in (*first, *more) or self.view == "corner":
            self.view = first[0]
        self._mark()

    def prefer(self, view: str) -> None:
        """Show a view where the open rung offers it."""
        first, more = offered(self._ladder, self.rung)
        if view in (*first, *more):
            self.view = view
            self._mark()

    def _view_button(self, view: View) -> Any:
        button = widgets.ToggleButton(
            description=view.words, tooltip=view.tip, layout=widgets.Layout(width="auto")
        )
        button.add_class("lf-view")
        button.observe(lambda change: self.choose(view.key), "value")
        return button

    def _toggle(self, words: str, tip: str, shows: str, width: str) -> Any:
        button = widgets.ToggleButton(
            description=words, tooltip=tip, layout=widgets.Layout(width=width)
        )
        button.observe(lambda change: self._instead(shows, pressed=change["new"]), "value")
        button.layout.order = "20"
        return button

    def choose(self, view: str) -> None:
        """Show a view."""
        if self._quiet:
            return
        self.view, self.shows = view, "table" if self.shows == "table" else "view"
        self._mark()
        self._changed()

    def _other(self, change: Any) -> None:
        if not self._quiet and change["new"]:
            self.choose(change["new"])

    def show_board(self) -> None:
        """Show the board of pins and runs."""
        self._instead("board", pressed=True)

    def _instead(self, shows: str, *, pressed: bool) -> None:
        if self._quiet:
            return
        self.shows = shows if pressed else "view"
        self._mark()
        self._changed()

    def offer_claims(self, names: list[str], chosen: str) -> None:
        """Offer the claims files that there are now."""
        options = (_NO_CLAIMS, *((name, name) for name in names))
        self._quiet = True
        if options != tuple(self.claims.options):
            self.claims.options = options
        self.claims.value = chosen
        self._quiet = False
        shown = self.view == "published" and self.shows in ("view", "table") and bool(names)
        self.claims.layout.display = "" if shown else "none"

    def _claimed(self, _: Any) -> None:
        if not self._quiet:
            self._changed()

    def _picked(self, _: Any) -> None:
        if not self._quiet and self.view == "column":
            self._changed()

    def _mark(self) -> None:
        """Press the button of what is on show."""
        self._quiet = True
        on_show = self.shows in ("view", "table")
        for view, button in self._views.items():
            button.value = view == self.view and on_show
        others = [key for _, key in self.more.options]
        self.more.value = self.view if self.view in others and on_show else ""
        self.table.value = self.shows == "table"
        self.numbers.value = self.shows == "numbers"
        self.board.value = self.shows == "board"
        self.columns.layout.display = "" if self.view == "column" else "none"
        self.claims.layout.display = "none"  # until its files are offered
        self.save.disabled = not on_show
        self._quiet = False
