"""The pin board in the page: pins and runs in one list, two of them compared."""

from __future__ import annotations

import html
import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import ipywidgets as widgets

from ladderfit.choices import Choices
from ladderfit.rounding import rounded
from ladderfit.workbench.comparing import Side, bar, compared
from ladderfit.workbench.foot import button
from ladderfit.workbench.keeping import Left
from ladderfit.workbench.long_runs import LongRun, LongRuns
from ladderfit.workbench.pins import (
    Numbers,
    Pin,
    PinBoard,
    fit_difference,
    label_of,
    numbers_of,
)
from ladderfit.workbench.state import Session

NOW, BASE, LEFT = "now", "baseline", "left"
_HEADLINE = (("hubble_constant", "H0"), ("zero_point", "zero point"))
_OFF, _SURE = "Take off", "Really?"
_SENTENCES = re.compile(r"(?:^|(?<=\. ))[a-z]")  # their first letters
_WORST = re.compile(r"\w+(?=(?:\[[^\]]*\])? is worst)")  # the parameter's name
_LABEL = widgets.Layout(width="196px")


@dataclass(frozen=True)
class Asks:
    """What the board asks of the workbench."""

    go_back: Callable[[Choices, str], None]
    measure_against: Callable[[Pin], None]
    changed: Callable[[], None]


class BoardPanel:
    """The list, what can be done with the entry chosen, and a comparison.

    Parameters
    ----------
    session : Session
    board : PinBoard
    runs : LongRuns
    left : Left or None
        What an earlier session left, and this one did not take up.
    asks : Asks
    """

    def __init__(
        self, session: Session, board: PinBoard, runs: LongRuns, left: Left | None, asks: Asks
    ) -> None:
        self.session, self.board, self.runs, self.left = session, board, runs, left
        self._asks = asks
        self._start = session.ladder.choices
        self._quiet = False
        self._goal_of: str | None = None  # the run whose goal the field shows
        self._doubted: str | None = None  # the pin that is about to go
        self.entries = widgets.Select(
            options=[], rows=4, layout=widgets.Layout(width="99%", height="80px")
        )
        self.entries.tooltip = "Pins and runs"
        self.back = button("Go back to it", "Make these choices", self._go_back, "92px")
        self.against = button("Count from it", "Count changes from it", self._measure, "94px")
        self.remove = button(_OFF, "Take the pin off, and its files away", self._off, "66px")
        self.label = widgets.Text(
            placeholder="label", tooltip="Label of the pin", continuous_update=False, layout=_LABEL
        )
        self.stop = button("Stop", "Stop, and keep what is drawn", self._stop, "52px")
        self.resume = button("Resume", "Go on until so many effective draws", self._resume, "62px")
        self.goal = widgets.Text(
            tooltip="Effective draws of the worst parameter", layout=widgets.Layout(width="84px")
        )
        self.goal.value = str(session.ladder.choices.sampling.draws)
        self.beside = widgets.Dropdown(
            description="Compare with",
            style={"description_width": "94px"},
            layout=widgets.Layout(width="224px"),
        )
        self.beside.tooltip = "Compare it with"
        self._new_goal = self.goal.value
        self.details = widgets.HTML(layout=widgets.Layout(margin="0"))
        goal_words = widgets.HTML(
            '<span style="white-space:nowrap; font-size:12px">effective draws wanted</span>'
        )
        self._of_run = [self.stop, self.resume]
        self._of_pin = [self.against, self.remove, self.label]
        doing = [self.back, self.against, self.remove, self.stop, self.resume]
        above = _row([*doing, self.goal, goal_words])
        below = _row([self.beside, self.label])
        self._with_entries = [self.entries, self.back, below]
        self.widget = widgets.VBox(
            [self.entries, above, below, self.details], layout=widgets.Layout(flex="0 0 auto")
        )
        self.entries.observe(self._chosen, "value")
        self.beside.observe(self._chosen, "value")
        self.label.observe(self._labelled, "value")
        self.refresh()

    @property
    def effective(self) -> float | None:
        """The number of effective draws asked for; None where it is no number."""
        try:
            value = float(self.goal.value.replace(",", ""))
        except ValueError:
            return None
        return value if 1.0 <= value < 1e9 else None

    def choose(self, name: str) -> None:
        """Choose an entry."""
        self.refresh()
        if name in [value for _, value in self.entries.options]:
            self.entries.value = name

    def refresh(self) -> None:
        """Show pins and runs as they are."""
        options = [(self._line(pin), pin.name) for pin in self.board.pins()]
        options += [(_run_line(run), run.name) for run in self.runs.runs]
        if self.left is not None:
            words = label_of(self.left.choices, self._start)
            options.append((f"earlier session   {words}", LEFT))
        others = [("now", NOW), ("baseline", BASE), *((name, name) for _, name in options)]
        self._quiet = True
        chosen, beside = self.entries.value, self.beside.value
        if tuple(options) != tuple(self.entries.options):
            self.entries.options = options
            known = [value for _, value in options]
            self.entries.value = chosen if chosen in known else (known[-1] if known else None)
        if tuple(others) != tuple(self.beside.options):
            self.beside.options = others
            self.beside.value = beside if beside in [value for _, value in others] else NOW
        self._quiet = False
        self._show()

    def _line(self, pin: Pin) -> str:
        parts = [pin.name, _headline(pin.numbers)]
        if pin.choices is not None:
            changed = len(fit_difference(pin.choices, self._start))
            parts.append(f"{changed} {'change' if changed == 1 else 'changes'}")
        if pin.name == self.session.pinned_name:
            parts.append("counted from")
        return "   ".join(part for part in (*parts, pin.label) if part)

    def _show(self) -> None:
        """What can be done with the entry chosen, and how it compares."""
        name = self.entries.value
        if name != self._doubted:
            self.remove.description, self._doubted = _OFF, None
        pin, run = self._pin(), self._run()
        for item in self._of_pin:
            item.layout.display = "" if pin is not None else "none"
        for item in self._of_run:
            item.layout.display = "" if run is not None else "none"
        for item in self._with_entries:
            item.layout.display = "" if self.entries.options else "none"
        self.back.disabled = self._choices(name) is None
        self.beside.disabled = not name
        if pin is not None and self.label.value != pin.label:
            self._quiet = True
            self.label.value = pin.label
            self._quiet = False
        self._show_goal(run)
        if run is not None:
            self.stop.disabled = not run.going
            self.resume.disabled = run.state not in ("stopped", "finished", "failed")
        self.details.value = self._details(name)

    def _show_goal(self, run: LongRun | None) -> None:
        """The goal of the run chosen, until another is typed; else that of a new run."""
        name = None if run is None or run.progress is None else run.name
        if name == self._goal_of:
            return
        if self._goal_of is None:
            self._new_goal = self.goal.value
        self._goal_of = name
        known = None if run is None or run.progress is None else run.progress.goal.ess
        self.goal.value = self._new_goal if known is None else f"{known:.0f}"

    def _details(self, name: str | None) -> str:
        if not name:
            return (
                "<p>Nothing is pinned yet. <b>Pin</b> writes the choices on show as a ladder file "
                f"into {html.escape(self.board.folder.name)}, with their numbers; <b>Sample in "
                "full</b> starts a long run that goes on without this page.</p>"
            )
        pin, run = self._pin(), self._run()
        text = ""
        if pin is not None and pin.words:
            text += f'<p class="lf-bad">{html.escape(pin.words)}</p>'
        if run is not None:
            text += _told(run)
        one, other = self._side(name), self._side(self.beside.value or NOW)
        if one is None or other is None or name == self.beside.value:
            return text
        return text + compared(one, other)

    def _side(self, name: str) -> Side | None:
        session = self.session
        if name in (NOW, BASE):
            result = session.settled_result if name == NOW else session.pinned
            return None if result is None else Side(name, result.choices, numbers_of(result))
        if name == LEFT and self.left is not None:
            return Side("earlier session", self.left.choices, {})
        run = self.runs.find(name)
        if run is not None:
            return Side(name, run.choices, {} if run.result is None else numbers_of(run.result))
        pin = self.board.find(name)
        return None if pin is None else Side(name, pin.choices, pin.numbers)

    def _choices(self, name: str | None) -> Choices | None:
        side = self._side(name) if name else None
        return None if side is None else side.choices

    def _pin(self) -> Pin | None:
        return self.board.find(self.entries.value) if self.entries.value else None

    def _run(self) -> LongRun | None:
        return self.runs.find(self.entries.value) if self.entries.value else None

    def _chosen(self, _: Any) -> None:
        if not self._quiet:
            self._show()

    def _go_back(self, _: Any) -> None:
        choices = self._choices(self.entries.value)
        if choices is not None:
            self._asks.go_back(choices, str(self.entries.value))

    def _measure(self, _: Any) -> None:
        pin = self._pin()
        if pin is not None:
            self._asks.measure_against(pin)

    def _off(self, _: Any) -> None:
        pin = self._pin()
        if pin is None:
            return
        if self.remove.description != _SURE:
            self.remove.description, self._doubted = _SURE, pin.name
            return
        self.board.remove(pin)
        self.refresh()

    def _labelled(self, change: Any) -> None:
        pin = self._pin()
        if not self._quiet and pin is not None and change["new"].strip():
            self.board.relabel(pin, change["new"].strip())
            self.refresh()

    def _stop(self, _: Any) -> None:
        run = self._run()
        if run is not None:
            self.runs.stop(run.name)
            self._news()

    def _resume(self, _: Any) -> None:
        run, wanted = self._run(), self.effective
        if run is None:
            return
        if wanted is None:
            words = f"Found {self.goal.value!r}; expected a number of draws such as 4000."
            self.details.value = f'<p class="lf-bad">{html.escape(words)}</p>'
            return
        self.runs.resume(run.name, wanted)
        self._news()

    def _news(self) -> None:
        self.refresh()
        self._asks.changed()


def _row(items: list[Any]) -> Any:
    made = widgets.HBox(
        items, layout=widgets.Layout(height="32px", flex="0 0 auto", align_items="center")
    )
    made.add_class("lf-bar-of-views")
    return made


def _headline(numbers: Numbers) -> str:
    """The number that most depends on all the others, where there is one."""
    for name, words in _HEADLINE:
        if name in numbers and numbers[name][1] > 0.0:
            return f"{words} {rounded(*numbers[name])}"
    return ""


def _run_line(run: LongRun) -> str:
    if run.progress is None:
        return f"{run.name}   {run.words or 'being read ...'}"
    ess = f"{run.progress.ess:,.0f} effective draws"
    if run.result is not None:
        ess += f"   {_headline(numbers_of(run.result))}"
    return f"{run.name}   {run.state}   {ess}"


def _told(run: LongRun) -> str:
    """How a run stands."""
    progress = run.progress
    if progress is None:
        return f"<p>{html.escape(run.words or 'Being read ...')}</p>"
    told = _WORST.sub(lambda found: found[0].replace("_", " "), str(progress))
    words = _SENTENCES.sub(lambda found: found[0].upper(), told)
    text = bar(progress.fraction, f"{100.0 * progress.fraction:.0f} % of the goal")
    bad = ' class="lf-bad"' if run.state == "failed" else ""
    text += f'<p role="status"{bad}>{html.escape(words)}</p>'
    if run.words:
        text += f"<p>{html.escape(run.words[:1].upper() + run.words[1:])}</p>"
    return text
