"""Which view is on show: at most four per rung, each also as a table."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import ipywidgets as widgets

from ladderfit.ladder import Ladder
from ladderfit.workbench.columns import numeric_columns

OFFERED = {
    "anchors": ("relation", "moduli", "column", "corner"),
    "cepheids": ("relation", "column", "moduli", "corner"),
    "supernovae": ("hubble", "moduli", "column", "corner"),
    "expansion": ("hubble", "column", "corner"),
}
WORDS = {
    "relation": "Relation",
    "column": "Residuals",
    "moduli": "Moduli",
    "hubble": "Hubble",
    "corner": "Corner",
}
_TIPS = {
    "relation": "The relation with its residuals",
    "column": "Residuals against any column of the table",
    "moduli": "Distance moduli of the hosts",
    "hubble": "The Hubble diagram",
    "corner": "The joint posterior",
}
_MOST = 4


def offered(ladder: Ladder, rung: str) -> list[str]:
    """Views of a rung that its data allow."""
    stars = ladder.cepheids is not None or ladder.choices.anchors.parallaxes is not None
    allowed = {
        "relation": stars or ladder.choices.cepheids is not None,
        "moduli": bool(ladder.hosts),
        "hubble": ladder.choices.supernovae is not None
        or (ladder.choices.expansion is not None and ladder.choices.expansion.table is not None),
        "column": bool(numeric_columns(ladder, rung)),
        "corner": True,
    }
    return [view for view in OFFERED[rung] if allowed[view]][:_MOST]


class ViewBar:
    """Buttons of the views, the column's menu, the table, all numbers, PNG and PDF.

    Attributes
    ----------
    rung, view, column : str
        What is on show.
    shows : str
        ``view``, ``table`` or ``numbers``.
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
        self._views = {view: self._view_button(view) for view in WORDS}
        self.columns = widgets.Dropdown(
            layout=widgets.Layout(width="96px", display="none", order="10")
        )
        self.columns.tooltip = "Column of the table"
        self.columns.observe(self._picked, "value")
        self.table = self._toggle("Table", "The view's numbers as a table", "table", "50px")
        self.numbers = self._toggle("All numbers", "Every parameter", "numbers", "88px")
        self.save = widgets.Button(
            description="PNG, PDF",
            tooltip="Save the view beside the notebook",
            layout=widgets.Layout(width="68px"),
        )
        self.save.layout.order = "21"
        self.save.on_click(lambda _: save())
        spring = widgets.Box(layout=widgets.Layout(flex="1 1 auto", order="11"))
        self.widget = widgets.HBox(
            [*self._views.values(), self.columns, spring, self.table, self.save],
            layout=widgets.Layout(height="30px", flex="0 0 auto"),
        )
        self.widget.add_class("lf-bar-of-views")

    @property
    def column(self) -> str:
        """The column that residuals are shown against."""
        return self.columns.value or ""

    def open(self, rung: str, ladder: Ladder) -> None:
        """Offer a rung's views; keep the one on show where it is among them."""
        self.rung, self._ladder = rung, ladder
        views = offered(ladder, rung)
        for view, button in self._views.items():
            button.layout.display = "" if view in views else "none"
            button.layout.order = str(views.index(view) if view in views else 9)
        self._quiet = True
        self.columns.options = names = numeric_columns(ladder, rung)
        if self.columns.value is None and names:
            self.columns.value = names[0]
        self._quiet = False
        if self.view not in views or self.view == "corner":
            self.view = views[0]
        self._mark()

    def _view_button(self, view: str) -> Any:
        button = widgets.ToggleButton(
            description=WORDS[view], tooltip=_TIPS[view], layout=widgets.Layout(width="68px")
        )
        button.observe(lambda change: self._chosen(view), "value")
        return button

    def _toggle(self, words: str, tip: str, shows: str, width: str) -> Any:
        button = widgets.ToggleButton(
            description=words, tooltip=tip, layout=widgets.Layout(width=width)
        )
        button.observe(lambda change: self._instead(shows, change["new"]), "value")
        button.layout.order = "20"
        return button

    def _chosen(self, view: str) -> None:
        if self._quiet:
            return
        self.view, self.shows = view, "table" if self.shows == "table" else "view"
        self._mark()
        self._changed()

    def _instead(self, shows: str, pressed: bool) -> None:
        if self._quiet:
            return
        self.shows = shows if pressed else "view"
        self._mark()
        self._changed()

    def _picked(self, _: Any) -> None:
        if not self._quiet and self.view == "column":
            self._changed()

    def _mark(self) -> None:
        """Press the button of what is on show."""
        self._quiet = True
        for view, button in self._views.items():
            button.value = view == self.view and self.shows != "numbers"
        self.table.value = self.shows == "table"
        self.numbers.value = self.shows == "numbers"
        self.columns.layout.display = "" if self.view == "column" else "none"
        self.save.disabled = self.shows == "numbers"
        self._quiet = False
