"""The foot of the workbench: pin, undo, redo, save, and a sentence of trust."""

from __future__ import annotations

import html
import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import ipywidgets as widgets

from ladderfit.errors import LadderfitError
from ladderfit.ladder import Ladder
from ladderfit.workbench.state import Session

Click = Callable[[Any], None]


@dataclass(frozen=True)
class Does:
    """What the buttons do."""

    pin: Click
    undo: Click
    redo: Click
    save: Click
    sample: Click


class Foot:
    """Pin, undo, redo, save, and a sentence of trust."""

    def __init__(self, ladder: Ladder, does: Does) -> None:
        self.pin = button("Pin", "Count changes from these numbers", does.pin)
        self.undo = button("Undo", "Take the last change back", does.undo)
        self.redo = button("Redo", "Make it again", does.redo)
        self.save = button("Save ladder file", "Write every choice", does.save, "106px")
        self.sample = button(
            "Sample in full",
            "Start a long run that goes on without this page",
            does.sample,
            "98px",
        )
        self.name = widgets.Text(
            tooltip="Name of the file to save", layout=widgets.Layout(width="128px")
        )
        self.trust = line("lf-trust")
        self.widget = widgets.HBox(
            [self.pin, self.undo, self.redo, self.name, self.save, self.sample, self.trust],
            layout=widgets.Layout(width="100%", height="40px", align_items="center"),
        )
        self.widget.add_class("lf-foot")
        self.suggest(ladder)

    def can(self, session: Session) -> None:
        """Enable what can be done."""
        self.undo.disabled = not session.can_undo
        self.redo.disabled = not session.can_redo
        self.pin.disabled = self.sample.disabled = session.trouble is not None

    def suggest(self, ladder: Ladder) -> None:
        """Offer a name that is free."""
        stem = "ladder" if ladder.path is None else re.sub(r"-\d+$", "", ladder.path.stem)
        self.name.value = free(stem or "ladder", (".toml",)).name + ".toml"

    def path(self) -> Path:
        """Where to save."""
        name = self.name.value.strip()
        if not name:
            raise LadderfitError("give the ladder file a name")
        return Path(name if name.endswith(".toml") else f"{name}.toml")


def free(stem: str, suffixes: tuple[str, ...]) -> Path:
    """The first STEM-01, STEM-02, ... of which none of these files exists."""
    number = 1
    while any(Path(f"{stem}-{number:02d}{suffix}").exists() for suffix in suffixes):
        number += 1
    return Path(f"{stem}-{number:02d}")


def button(words: str, tooltip: str, do: Any, width: str = "52px") -> Any:
    """A button of fixed width."""
    made = widgets.Button(
        description=words, tooltip=tooltip, layout=widgets.Layout(width=width, flex="0 0 auto")
    )
    made.on_click(do)
    return made


def line(name: str) -> Any:
    """A line of text that takes the room there is, styled by a class."""
    made = widgets.HTML(layout=widgets.Layout(flex="1 1 0", min_width="0", margin="0"))
    made.add_class(name)
    return made


def text(words: str, name: str = "") -> str:
    """Words as HTML, escaped; in full on hovering."""
    escaped = html.escape(words)
    return f'<div class="{name}" role="status" title="{escaped}">{escaped}</div>'
