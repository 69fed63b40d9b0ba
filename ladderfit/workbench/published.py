"""Entering published values, to be shown as ticks beside the posterior."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import ipywidgets as widgets

from ladderfit.names import parameter
from ladderfit.result import Result
from ladderfit.rounding import MINUS
from ladderfit.workbench.why import NUMBERS, SHORT


class Published:
    """A line with a parameter, a value and a button; empty takes the tick away.

    Parameters
    ----------
    publish : callable
        Called with the parameter's name and its value, or None.
    """

    def __init__(self, publish: Callable[[str, float | None], None]) -> None:
        self._publish = publish
        self.name = widgets.Dropdown(
            description="Published",
            style={"description_width": "72px"},
            layout=widgets.Layout(width="220px"),
        )
        self.value = widgets.Text(
            placeholder="value", tooltip="Published value", layout=widgets.Layout(width="84px")
        )
        self.button = widgets.Button(
            description="Show tick",
            tooltip="Show the published value as a tick; without a value, take it away",
            layout=widgets.Layout(width="92px", flex="0 0 auto"),
        )
        self.message = widgets.HTML()
        self.message.add_class("lf-message")
        self.button.on_click(lambda _: self._enter())
        self.widget = widgets.HBox(
            [self.name, self.value, self.button, self.message],
            layout=widgets.Layout(flex="0 0 auto", height="34px", align_items="center"),
        )

    def offer(self, result: Result) -> None:
        """Offer the headline numbers of a posterior."""
        options = [
            (f"{SHORT[name]} [{parameter(name).unit}]", name)
            for name in NUMBERS
            if name in result.draws
        ]
        if tuple(options) != tuple(self.name.options):
            self.name.options = options
        if self.name.value is None and options:
            self.name.value = options[0][1]

    def _enter(self) -> None:
        text = self.value.value.strip().replace(MINUS, "-").replace(",", ".")
        self.message.value = ""
        if self.name.value is None:
            return
        value = _number(text)
        if text and value is None:
            self._say("Found no number; expected a value such as 73.0; correct it.")
        else:
            self._publish(self.name.value, value)

    def _say(self, words: str) -> None:
        self.message.value = f'<div role="alert">{words}</div>'


def _number(text: str) -> Any:
    try:
        value = float(text)
    except ValueError:
        return None
    return value if math.isfinite(value) else None
