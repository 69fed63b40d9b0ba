"""One question of a draft in the page: its words left, its answers right."""

from __future__ import annotations

import html
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import ipywidgets as widgets

from ladderfit.draft.questions import INDEX, NUMBER, Option, Question
from ladderfit.draft.settle import Settling

_WIDE = "440px"
_NAMED = {"description_width": "72px"}
_NO_LINE = "there is no line in the file to note it at"


@dataclass(frozen=True)
class Does:
    """What an answer does; each is called with the question's box."""

    choose: Callable[[QuestionBox, Option], None]
    type: Callable[[QuestionBox, str], None]
    note: Callable[[QuestionBox, str], None]


class QuestionBox:
    """The widgets of one question; made once, so that the keyboard stays where it is.

    Parameters
    ----------
    question : Question
    does : Does
    """

    def __init__(self, question: Question, does: Does) -> None:
        self.question = question
        self._does = does
        self._quiet = False
        self.words = widgets.HTML(layout=widgets.Layout(margin="0"))
        self.options = self._radio()
        self.others = self._menu()
        self.field = self._field()
        self.reason = widgets.Text(
            description="Reason",
            continuous_update=False,
            style=_NAMED,
            layout=widgets.Layout(width=_WIDE, max_width="100%"),
        )
        self.message = widgets.HTML(layout=widgets.Layout(margin="0", display="none"))
        self.reason.observe(self._noted, "value")
        right = [w for w in (self.options, self.others, self.field) if w is not None]
        self.widget = widgets.HBox(
            [
                widgets.VBox([self.words], layout=widgets.Layout(flex="1 1 320px", min_width="0")),
                widgets.VBox(
                    [*right, self.reason, self.message],
                    layout=widgets.Layout(flex="1 1 460px", min_width="0", overflow="hidden"),
                ),
            ],
            layout=widgets.Layout(width="100%", flex_flow="row wrap", grid_gap="4px 20px"),
        )
        self.widget.add_class("lf-question")

    def show(self, settling: Settling) -> None:
        """Take the answer from the file."""
        question, pages = self.question, settling.pages
        chosen, is_open = settling.chosen(question), settling.is_open(question)
        stated = settling.stated(question)
        needed = is_open or chosen is not None or bool(stated)
        if is_open:
            state = "Undecided"
        else:
            state = "Settled" if needed else "No longer asked, by another answer"
        self._quiet = True
        try:
            if self.options is not None:
                self.options.value = chosen if chosen in question.options else None
                self.options.disabled = not needed
            if self.others is not None:
                self.others.value = chosen if chosen in question.others else None
                self.others.disabled = not needed
            if self.field is not None:
                self.field.value = stated
                self.field.disabled = not needed
            noted = not is_open and pages.can_note(question.place)
            self.reason.value = pages.note(question.place) if noted else ""
            self.reason.disabled = not noted
            self.reason.placeholder = self._hint(is_open=is_open, noted=noted)
        finally:
            self._quiet = False
        (self.widget.remove_class if is_open else self.widget.add_class)("lf-settled")
        self.words.value = _told(question, state)

    def say(self, words: str) -> None:
        """Say in one line what is wrong; nothing where `words` is empty."""
        self.message.value = f'<div role="alert">{html.escape(words)}</div>' if words else ""
        self.message.layout.display = "" if words else "none"

    def _hint(self, *, is_open: bool, noted: bool) -> str:
        if is_open:
            return "once it is settled"
        return "kept as a comment in the ladder file" if noted else _NO_LINE

    def _radio(self) -> Any:
        if not self.question.options:
            return None
        made = widgets.RadioButtons(
            options=[(option.words, option) for option in self.question.options],
            value=None,
            layout=widgets.Layout(width="auto", max_width="100%"),
        )
        made.observe(self._chosen, "value")
        return made

    def _menu(self) -> Any:
        if not self.question.others:
            return None
        first = "Another" if self.question.options else "Column"
        made = widgets.Dropdown(
            options=[("choose a column", None)]
            + [(option.words, option) for option in self.question.others],
            description=first,
            style=_NAMED,
            layout=widgets.Layout(width=_WIDE, max_width="100%"),
        )
        made.observe(self._chosen, "value")
        return made

    def _field(self) -> Any:
        typed = self.question.typed
        if not typed:
            return None
        named = {NUMBER: "a number", INDEX: "H - 0.386 (V - I)"}.get(typed, "a value")
        if self.question.unit:
            named += f", in {self.question.unit}"
        made = widgets.Text(
            description="An index" if typed == INDEX else "Another" if self.options else "Value",
            placeholder=named,
            continuous_update=False,
            style=_NAMED,
            layout=widgets.Layout(width=_WIDE, max_width="100%"),
        )
        made.observe(self._typed, "value")
        return made

    def _chosen(self, change: Any) -> None:
        if not self._quiet and change["new"] is not None:
            self._does.choose(self, change["new"])

    def _typed(self, change: Any) -> None:
        if not self._quiet and change["new"].strip():
            self._does.type(self, change["new"])

    def _noted(self, change: Any) -> None:
        if not self._quiet:
            self._does.note(self, change["new"])


def _told(question: Question, state: str) -> str:
    """Question, what the draft saw, why it matters, and the key, escaped."""
    key = html.escape(", ".join(".".join(place) for place in question.places))
    text = f'<div class="lf-ask">{html.escape(question.words)}</div>'
    text += f"<p>{html.escape(question.saw)}</p>"
    if question.matters:
        text += f'<p class="lf-quiet">{html.escape(question.matters)}</p>'
    state = html.escape(state)
    return (
        f'{text}<p class="lf-quiet"><span class="lf-state">{state}</span>: <code>{key}</code></p>'
    )
