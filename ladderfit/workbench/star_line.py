"""The line under the view: which star is pointed at, and setting it aside or back."""

from __future__ import annotations

import html
from collections.abc import Callable, Sequence
from typing import Any

import ipywidgets as widgets

from ladderfit.ladder import Ladder
from ladderfit.workbench.aside import entries, entry_of, toggled, with_reason
from ladderfit.workbench.controls import Changes
from ladderfit.workbench.points import Points

_SECTIONS = ("cepheids", "anchors.parallaxes", "supernovae", "expansion")


class StarLine:
    """Name, reason and a button; the same by pointer and by keyboard."""

    def __init__(self, change: Callable[[Changes], None]) -> None:
        self._change = change
        self._ladder: Ladder | None = None
        self._places: dict[str, tuple[str, str]] = {}
        self._words: dict[str, str] = {}
        self._quiet = False
        self.name = widgets.Combobox(
            placeholder="object",
            tooltip="Name of an object",
            layout=widgets.Layout(width="132px"),
        )
        self.reason = widgets.Text(
            placeholder="reason",
            tooltip="Reason to set it aside",
            continuous_update=False,
            layout=widgets.Layout(width="150px"),
        )
        self.button = widgets.Button(
            description="Set aside",
            disabled=True,
            layout=widgets.Layout(width="72px", flex="0 0 auto"),
        )
        self.words = widgets.HTML(
            layout=widgets.Layout(flex="1 1 0", min_width="0", margin="0 0 0 6px")
        )
        self.words.add_class("lf-star")
        self.name.observe(self._named, "value")
        self.reason.observe(self._reasoned, "value")
        self.button.on_click(lambda _: self.toggle())
        self.widget = widgets.HBox(
            [self.name, self.reason, self.button, self.words],
            layout=widgets.Layout(height="32px", align_items="center"),
        )
        self.widget.add_class("lf-star-line")

    def offer(self, groups: Sequence[Points], ladder: Ladder) -> None:
        """Offer the names of a view's objects, and of those that are set aside."""
        self._ladder = ladder
        self._places, self._words = {}, {}
        for points in groups:
            for index, name in enumerate(points.names):
                self._places.setdefault(str(name), (points.section, points.hosts[index]))
        for section in _SECTIONS:
            for entry in entries(ladder.choices, section):
                if not entry.whole_host:
                    name = entry.star or entry.name or ""
                    self._places.setdefault(name, (section, entry.host or ""))
        names = tuple(sorted(self._places))
        if self.name.options != names:
            self.name.options = names
        self._show()

    def point(self, points: Points, index: int, ladder: Ladder) -> None:
        """Take what the pointer is on."""
        self._ladder = ladder
        name = str(points.names[index])
        self._places[name] = (points.section, points.hosts[index])
        self._words[name] = points.describe(index)
        self._quiet = True
        self.name.value = name
        self._quiet = False
        self._show()

    def leave(self) -> None:
        """Keep the last name when the pointer leaves it."""

    def toggle(self) -> None:
        """Set the named object aside, or take it back."""
        found = self._found()
        if found is None or self._ladder is None:
            return
        section, host = found
        name = self.name.value
        reason = "" if self._entry() is not None else self.reason.value
        self._change(toggled(self._ladder, section, name, host, reason))

    def _found(self) -> tuple[str, str] | None:
        return self._places.get(self.name.value)

    def _entry(self) -> Any:
        found = self._found()
        if found is None or self._ladder is None:
            return None
        return entry_of(self._ladder.choices, found[0], self.name.value, found[1])

    def _named(self, _: Any) -> None:
        if not self._quiet:
            self._show()

    def _reasoned(self, change: Any) -> None:
        entry, found = self._entry(), self._found()
        if self._quiet or entry is None or found is None or self._ladder is None:
            return
        if change["new"].strip() != entry.reason:
            self._change(with_reason(self._ladder.choices, found[0], entry, change["new"]))

    def _show(self) -> None:
        """Say what is known of the named object."""
        name, found, entry = self.name.value, self._found(), self._entry()
        self.button.disabled = found is None
        self.button.description = "Set aside" if entry is None else "Put back"
        words = self._words.get(name, "")
        if name and found is None:
            words = "no object of this name in this view"
        elif entry is not None:
            words = f"{name} is set aside"
        elif found is not None and not words:
            words = ", ".join(part for part in (name, found[1]) if part)
        escaped = html.escape(words)
        self.words.value = f'<div role="status" title="{escaped}">{escaped}</div>'
        self._quiet = True
        if entry is not None:
            self.reason.value = entry.reason
        self._quiet = False
