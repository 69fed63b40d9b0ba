"""Controls of choices: a widget, the dotted keys it sets, and a line for what is wrong."""

from __future__ import annotations

import html
from collections.abc import Callable, Iterator, Mapping, Sequence
from typing import Any

import ipywidgets as widgets

from ladderfit.choices import Choices
from ladderfit.workbench.range import Range

Changes = Mapping[str, Any]
Asked = Callable[["Control", Changes, bool], None]

_WIDE = "306px"
_NAMED = {"description_width": "148px"}


class Control:
    """One choice: how it is read from the choices, and what a new value changes.

    Parameters
    ----------
    widget : Widget
        Shows the value.
    read : callable
        The widget's value for given choices.
    write : callable
        Changes by dotted key, for a value of the widget under given choices.
    when : callable, optional
        Whether the choice exists at all under given choices; else it is hidden.
    under : sequence of Control
        Choices that come with this one, shown below it.
    """

    def __init__(
        self,
        widget: Any,
        read: Callable[[Choices], Any],
        write: Callable[[Any, Choices], Changes],
        when: Callable[[Choices], bool] | None = None,
        under: Sequence[Control] = (),
    ) -> None:
        self.widget = widget
        self.read = read
        self.write = write
        self.when = when
        self.under = tuple(under)
        self.message = widgets.HTML(layout=widgets.Layout(width=_WIDE, margin="0", display="none"))
        self.message.add_class("lf-message")
        below: list[Any] = [control.box for control in self.under]
        self.box: Any = widgets.VBox(
            [widget, self.message, *below], layout=widgets.Layout(flex="0 0 auto")
        )
        self.box.add_class("lf-control")
        for box in below:
            box.add_class("lf-under")
        self._choices: Choices | None = None
        self._asked: Asked | None = None
        self._quiet = False
        if isinstance(widget, Range):
            widget.observe(self._moved, "request")
        else:
            widget.observe(self._set, "value")

    def all(self) -> Iterator[Control]:
        """The control and those under it."""
        yield self
        for control in self.under:
            yield from control.all()

    def only_where(self, there: Callable[[Choices], bool]) -> Control:
        """Have the control exist only where `there` holds too; returns it."""
        for control in self.all():
            own = control.when
            control.when = _both(there, own) if own is not None else there
        return self

    def when_asked(self, asked: Asked) -> None:
        """Call `asked` with this control, its changes, and whether they are settled."""
        self._asked = asked

    def show(self, choices: Choices) -> None:
        """Take the value from the choices."""
        self._choices = choices
        if self.when is not None:
            exists = self.when(choices)
            self.box.layout.display = "" if exists else "none"
            if not exists:
                return
        value = self.read(choices)
        self._quiet = True
        try:
            if self.widget.value != value:
                self.widget.value = value
        finally:
            self._quiet = False

    def say(self, words: str) -> None:
        """Say what is wrong, beside the control; nothing where it is empty."""
        self.message.value = f'<div role="alert">{html.escape(words)}</div>' if words else ""
        self.message.layout.display = "" if words else "none"

    def _moved(self, change: Any) -> None:
        asked = change["new"]
        if asked:
            self._ask(asked["value"], settled=bool(asked["settled"]))

    def _set(self, change: Any) -> None:
        self._ask(change["new"], settled=True)

    def _ask(self, value: Any, *, settled: bool) -> None:
        if not self._quiet and self._asked is not None and self._choices is not None:
            self._asked(self, self.write(value, self._choices), settled)


def _both(one: Callable[[Choices], bool], two: Callable[[Choices], bool]) -> Any:
    return lambda choices: one(choices) and two(choices)


def switch(words: str, key: str, read: Callable[[Choices], bool]) -> Control:
    """A tick for a choice that is on or off."""
    box = widgets.Checkbox(description=words, indent=False, layout=widgets.Layout(width=_WIDE))
    return Control(box, read, lambda value, _: {key: value})


def menu(
    words: str,
    options: Sequence[tuple[str, Any]],
    read: Callable[[Choices], Any],
    write: Callable[[Any, Choices], Changes],
    *,
    when: Callable[[Choices], bool] | None = None,
    under: Sequence[Control] = (),
) -> Control:
    """A drop-down of a few values."""
    layout = widgets.Layout(width=_WIDE)
    box = widgets.Dropdown(options=options, description=words, style=_NAMED, layout=layout)
    return Control(box, read, write, when, under)


def several(
    words: str,
    options: Sequence[Any],
    read: Callable[[Choices], tuple[Any, ...]],
    write: Callable[[tuple[Any, ...], Choices], Changes],
) -> Control:
    """A list of which several can be chosen; an option is its value, or words and a value."""
    layout = widgets.Layout(width=_WIDE, height="96px")
    box = widgets.SelectMultiple(
        options=list(options), description=words, style=_NAMED, layout=layout
    )
    return Control(box, read, write)


def number(
    words: str,
    ends: tuple[float, float],
    read: Callable[[Choices], float],
    write: Callable[[float, Choices], Changes],
    *,
    unit: str = "",
    log: bool = False,
    when: Callable[[Choices], bool] | None = None,
) -> Control:
    """One number on a slider and in a field."""
    box = Range(label=words, unit=unit, low=ends[0], high=ends[1], log=log, value=[ends[0]])
    box.layout.width = _WIDE

    def written(value: list[float], choices: Choices) -> Changes:
        return write(value[0], choices)

    return Control(box, lambda choices: [read(choices)], written, when)


def span(
    words: str,
    key: str,
    ends: tuple[float, float],
    read: Callable[[Choices], tuple[float, float]],
    *,
    unit: str = "",
    log: bool = True,
    when: Callable[[Choices], bool] | None = None,
) -> Control:
    """A lower and a higher bound; a bound beyond the slider's end stays until it is moved."""
    low, high = ends

    def shown(choices: Choices) -> list[float]:
        first, second = read(choices)
        return [min(max(first, low), high), max(min(second, high), low)]

    def write(value: list[float], choices: Choices) -> Changes:
        before, known = read(choices), shown(choices)
        kept = [b if v == k else v for b, v, k in zip(before, value, known, strict=True)]
        return {key: kept}

    box = Range(label=words, unit=unit, low=low, high=high, log=log, value=list(ends))
    box.layout.width = _WIDE
    return Control(box, shown, write, when)
