"""Your own tables: what a draft left open, settled in the page, then the live ladder."""

from __future__ import annotations

import html
import threading
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import anywidget
import ipywidgets as widgets

from ladderfit.draft.asking import role_words
from ladderfit.draft.jobs import WORDS
from ladderfit.draft.make import Draft
from ladderfit.draft.questions import Option
from ladderfit.draft.settle import Settling
from ladderfit.errors import InputError, LadderfitError, Problem
from ladderfit.ladder import Ladder
from ladderfit.schema import split
from ladderfit.workbench.axis import ASSETS
from ladderfit.workbench.foot import button
from ladderfit.workbench.question_box import Does, QuestionBox
from ladderfit.workbench.screen import Workbench
from ladderfit.workbench.state import in_words


class _Style(anywidget.AnyWidget):
    """Nothing to see; brings the page's style and the grouping of its answers along."""

    _esm = ASSETS / "draft.js"
    _css = ASSETS / "draft.css"


class Refused:
    """Stands in for the page where there is nothing to ask: a line for each problem.

    Attributes
    ----------
    ladder : None
    widget : Widget
        What is shown.
    """

    ladder: Ladder | None = None

    def __init__(self, error: LadderfitError | OSError) -> None:
        lines = (
            str(error).splitlines() if isinstance(error, LadderfitError) else [_unwritten(error)]
        )
        self.widget = widgets.VBox([_Style(), widgets.HTML(_lines(lines, "alert"))])
        self.widget.add_class("lf-draft")

    def _repr_mimebundle_(self, **kwargs: Any) -> Any:
        return self.widget._repr_mimebundle_(**kwargs)


class DraftPage:
    """The questions that a draft left open, shown by evaluating it.

    Every answer is written into the ladder file at once, a reason as the comment behind
    it: the page may be closed, and the file edited by hand, without losing anything.

    Parameters
    ----------
    settling : Settling

    Attributes
    ----------
    settling : Settling
        Questions and answers, for use in Python.
    bench : Workbench or None
        The live ladder, once it is opened.
    widget : Widget
        What is shown.
    """

    def __init__(self, settling: Settling) -> None:
        self._lock = threading.RLock()
        self.settling = settling
        self.bench: Workbench | None = None
        self.boxes: list[QuestionBox] = []
        self.head = widgets.HTML(layout=widgets.Layout(margin="0"))
        self.title = widgets.Text(
            description="Title",
            continuous_update=False,
            style={"description_width": "48px"},
            layout=widgets.Layout(width="600px", max_width="100%"),
        )
        self.title.observe(self._titled, "value")
        self.listed = widgets.VBox([], layout=widgets.Layout(width="100%"))
        self.go = button("Open the workbench", "On this ladder file", self._go, "172px")
        self.again = button("Read the file again", "If it was edited by hand", self._again, "152px")
        self.said = widgets.HTML(layout=widgets.Layout(margin="0", flex="1 1 0", min_width="0"))
        foot = widgets.HBox(
            [self.go, self.again, self.said],
            layout=widgets.Layout(width="100%", align_items="center", grid_gap="4px"),
        )
        foot.add_class("lf-ready")
        self.slot = widgets.VBox([], layout=widgets.Layout(width="100%"))
        page = widgets.VBox(
            [_Style(), self.head, self.title, _guessed(settling.draft), self.listed, foot],
            layout=widgets.Layout(width="100%", max_width="1000px"),
        )
        page.add_class("lf-draft")
        self.widget = widgets.VBox([page, self.slot], layout=widgets.Layout(width="100%"))
        self._show()

    @property
    def ladder(self) -> Ladder | None:
        """The ladder of the file; None while something is undecided.

        Raises
        ------
        InputError
            If nothing is undecided, but something in the file or its tables is wrong.
        """
        self.settling.pages.read()
        return None if self.settling.open else self.settling.ladder()

    def open(self) -> None:
        """Open the workbench below the questions, as the button does."""
        self._go()

    def _repr_mimebundle_(self, **kwargs: Any) -> Any:
        return self.widget._repr_mimebundle_(**kwargs)

    # What the user does

    def _choose(self, box: QuestionBox, option: Option) -> None:
        self._do(box, lambda: self.settling.choose(box.question, option))

    def _type(self, box: QuestionBox, words: str) -> None:
        self._do(box, lambda: self.settling.type(box.question, words))

    def _note(self, box: QuestionBox, words: str) -> None:
        self._do(box, lambda: self.settling.note(box.question, words))

    def _titled(self, change: Any) -> None:
        if change["new"].strip() and change["new"] != self._title():
            changes = [(("title",), change["new"].strip())]
            self._do(None, lambda: self.settling.pages.set(changes))

    def _title(self) -> str:
        found = self.settling.pages.value(("title",))
        return found if isinstance(found, str) else ""

    def _again(self, _: Any = None) -> None:
        self._do(None, self.settling.pages.read)

    def _do(self, box: QuestionBox | None, action: Callable[[], None]) -> None:
        """One change; what is wrong is said beside it instead of vanishing."""
        with self._lock:
            try:
                action()
            except (LadderfitError, OSError) as error:
                self._complain(box, error)
            except Exception as error:  # would be lost in a widget's callback
                self._say([f"This went wrong inside ladderfit: {error!r}"])
            else:
                self._show()

    def _complain(self, box: QuestionBox | None, error: LadderfitError | OSError) -> None:
        words = _unwritten(error) if isinstance(error, OSError) else in_words(error)
        if box is None:
            self._say([words])
        else:
            box.say(words)

    def _go(self, _: Any = None) -> None:
        with self._lock:
            self._show()
            if self.settling.open:
                return
            self._say(["Reading the tables and drawing the posterior ..."], good=True)
            self.go.disabled = True
            try:
                ladder = self.settling.ladder()
                self.bench = Workbench(ladder)
                self.slot.children = (self.bench.widget,)
                self._say(["The workbench is below. " + self._next()], good=True)
            except InputError as error:
                self._place(error.problems)
            except (LadderfitError, OSError) as error:
                self._complain(None, error)
            except Exception as error:  # would be lost in a widget's callback
                self._say([f"This went wrong inside ladderfit: {error!r}"])
            finally:
                self.go.disabled = False

    def _place(self, problems: Sequence[Problem]) -> None:
        """Each problem beside the question it belongs to, the others at the foot."""
        rest = []
        for problem in problems:
            box = next((box for box in self.boxes if _concerns(problem, box)), None)
            if box is None:
                rest.append(str(problem))
            else:
                box.say(str(problem))
        self._say(rest or ["Something does not fit; see above."])

    # What is shown

    def _show(self) -> None:
        """Bring the page up to date with the file."""
        questions = self.settling.questions
        if questions != [box.question for box in self.boxes]:
            does = Does(self._choose, self._type, self._note)
            known = {box.question.place: box for box in self.boxes}
            self.boxes = [
                box
                if (box := known.get(question.place)) is not None and box.question == question
                else QuestionBox(question, does)
                for question in questions
            ]
            self.listed.children = tuple(box.widget for box in self.boxes)
        for box in self.boxes:
            box.show(self.settling)
            box.say("")
        self.title.value = self._title()
        left = sum(self.settling.is_open(question) for question in questions)
        self.head.value = _head(self.settling.file, len(questions), left)
        self.go.disabled = left > 0
        if left:
            self._say([f"{_count(left)} to settle before the workbench opens."], good=True)
        elif self.bench is not None:
            self._say(["The workbench below has the earlier answers; open it anew."], good=True)
        else:
            self._say(["Nothing is undecided. " + self._next()], good=True)

    def _next(self) -> str:
        return f"For the report: ladderfit calibrate {self.settling.file} --out first"

    def _say(self, lines: Sequence[str], *, good: bool = False) -> None:
        self.said.value = _lines(lines, "status" if good else "alert")


def settle_in_page(file: str | Path, tables: Sequence[str | Path] = ()) -> DraftPage | Refused:
    """A page of what is undecided in a ladder file.

    Parameters
    ----------
    file : str or Path
        The ladder file; drafted from `tables` if absent.
    tables : sequence of path
        One table of each kind; without them those that the file names.

    Returns
    -------
    DraftPage or Refused
        The latter says why the tables, or the file, cannot be used.
    """
    try:
        return DraftPage(Settling(file, tables))
    except (LadderfitError, OSError) as error:
        return Refused(error)


def _concerns(problem: Problem, box: QuestionBox) -> bool:
    """Whether a problem stands at a key of a question, or at a section around it."""
    around = tuple(split(problem.key)) if problem.key else ()
    return bool(around) and any(at[: len(around)] == around for at in box.question.places)


def _lines(lines: Sequence[str], role: str) -> str:
    return "".join(f'<div role="{role}">{html.escape(one)}</div>' for one in lines)


def _unwritten(error: OSError) -> str:
    return f"Not written: {error.strerror or error}; choose another place."


def _count(questions: int) -> str:
    return "1 question" if questions == 1 else f"{questions} questions"


def _head(file: Path, asked: int, left: int) -> str:
    name = html.escape(str(file))
    if not asked:
        return f"<h3>{name}</h3><p>Nothing was left undecided.</p>"
    words = (
        f"{_count(asked)}, {asked - left} settled. Every answer is written into the file at once."
    )
    return f'<h3>{name}</h3><p role="status">{words}</p>'


def _guessed(draft: Draft | None) -> Any:
    """What the draft took for granted, folded away: to be looked through once."""
    if draft is None:
        return widgets.HTML()
    tables, count = "", 0
    for job, (path, found) in draft.sources.items():
        light = found.photometry.told if found.photometry else {}
        rows = ""
        for role, choice in {**found.columns, **light}.items():
            if choice.undecided:
                continue
            count += 1
            words = role if role in light else role_words(role)
            cells = (words, str(choice.value), choice.why)
            rows += "<tr>" + "".join(f"<td>{html.escape(cell)}</td>" for cell in cells) + "</tr>"
        caption = f"<b>{html.escape(path.name)}</b>: {WORDS[job]}, as {html.escape(found.why)}"
        head = "<tr><th>what</th><th>column</th><th>why</th></tr>"
        tables += f"<table><caption>{caption}</caption>{head}{rows}</table>"
    words = f"What the draft took for granted, {count} entries: look them through once"
    return widgets.HTML(f"<details><summary>{words}</summary>{tables}</details>")
