"""The workbench: the ladder on top, its choices left, its numbers and one view right."""

from __future__ import annotations

import threading
from collections.abc import Callable, Mapping
from functools import wraps
from typing import Any, Concatenate, ParamSpec

import ipywidgets as widgets

from ladderfit.choices import Choices
from ladderfit.errors import LadderfitError
from ladderfit.kernels.compiling import WORDS_WHEN_COLD, is_cold
from ladderfit.ladder import Ladder
from ladderfit.workbench.axis import LadderAxis
from ladderfit.workbench.canvas import Picture
from ladderfit.workbench.choices_panel import ChoicesPanel
from ladderfit.workbench.controls import Changes, Control
from ladderfit.workbench.foot import Does, Foot, free, line, text
from ladderfit.workbench.frame import Frame
from ladderfit.workbench.pins import changes_to
from ladderfit.workbench.points import Points
from ladderfit.workbench.published import Published
from ladderfit.workbench.pulse import Pulse, in_kernel
from ladderfit.workbench.rungs import everything, rungs
from ladderfit.workbench.shelf import Shelf
from ladderfit.workbench.star_line import StarLine
from ladderfit.workbench.state import Drawer, Session, in_words, save_ladder
from ladderfit.workbench.tables import strip
from ladderfit.workbench.view_bar import ViewBar
from ladderfit.workbench.why import prior_driven, trust, why

P = ParamSpec("P")
_OFTEN = 200  # ms between two questions of the page whether slow work is done
_SELDOM = 1000  # ms, where only a long run is under way
_LEFT = 338  # px, of the choices and the gap beside them


def _guarded(
    method: Callable[Concatenate[Workbench, P], None],
) -> Callable[Concatenate[Any, P], None]:
    """One callback at a time; an error is shown at the foot instead of vanishing."""

    @wraps(method)
    def guarded(self: Any, /, *args: P.args, **kwargs: P.kwargs) -> None:
        with self._lock:
            try:
                method(self, *args, **kwargs)
            except LadderfitError as error:
                self._say(in_words(error), good=False)
            except OSError as error:
                self._say(
                    f"Not written: {error.strerror or error}; choose another place.", good=False
                )
            except Exception as error:  # would be lost in a widget's callback
                self._say(f"This went wrong inside ladderfit: {error!r}", good=False)
            finally:
                self._set_pulse()
                self.shelf.keep(self.bar.rung, self.bar.view, self.bar.claims.value or "")

    return guarded


class Workbench:
    """A live ladder in JupyterLab, shown by evaluating it.

    Parameters
    ----------
    ladder : Ladder
        Where to start.
    drawer : Drawer, optional
        What draws posteriors; `WarmDrawer` by default.

    Attributes
    ----------
    session : Session
        Choices, posterior and pin, for use in Python.
    widget : Widget
        What is shown.
    """

    def __init__(self, ladder: Ladder, drawer: Drawer | None = None) -> None:
        self._lock = threading.RLock()
        self.session = Session(ladder, drawer)
        self.published: dict[str, float] = {}
        self._every = everything(ladder)
        self.axis = LadderAxis()
        self.pulse = Pulse()
        self.panel = ChoicesPanel(ladder, self._every, self._asked)
        self.picture = Picture(self._pointed)
        self.bar = ViewBar(ladder, self._view, self._save_view)
        self.stars = StarLine(self._change)
        self.numbers = widgets.HTML(layout=widgets.Layout(height="74px", margin="0", width="100%"))
        self.numbers.add_class("lf-strip-box")
        self.why = line("lf-why")
        self.entry = Published(self.publish)
        self.shelf = Shelf(
            self.session,
            self.published,
            background=in_kernel(),
            asked=self._board_asks,
            go_back=self._go_back,
        )
        self.frame = Frame(
            self.session,
            self.bar,
            self.picture,
            self.stars,
            self.entry,
            self.published,
            self.shelf,
        )
        self.foot = Foot(ladder, Does(self._pin, self._undo, self._redo, self._save, self._sample))
        self.widget = self._put_together()
        if is_cold():
            print(f"{WORDS_WHEN_COLD[0].upper()}{WORDS_WHEN_COLD[1:]} ...")
        self.session.start()
        taken_up = self.shelf.take_up()
        left = self.shelf.restored
        usual = "cepheids" if "cepheids" in self.panel.rungs else self.panel.rungs[0]
        self._open(left.rung if left is not None and left.rung in self.panel.rungs else usual)
        if left is not None:
            self.bar.prefer(left.view)
            self.bar.offer_claims([left.claims] if left.claims else [], left.claims)
        self.axis.observe(self._opened, "rung")
        self.axis.observe(self._recoloured, ["dark", "rgb"])
        self.axis.observe(self._resized, "width")
        self.axis.observe(self._stands, "ready")
        self.pulse.observe(self._beat, "beat")
        self._after(None, settled=True, said=False)
        self._set_pulse()
        if taken_up:
            self._say(taken_up, good=True)

    @property
    def ladder(self) -> Ladder:
        """The choices in force."""
        return self.session.settled

    @property
    def result(self) -> Any:
        """The posterior on show."""
        return self.session.result

    def change(self, changes: Mapping[str, Any]) -> None:
        """Make changes by dotted key, as a control does."""
        self._change(changes)

    def open(self, rung: str) -> None:
        """Open a rung: ``anchors``, ``cepheids``, ``supernovae`` or ``expansion``.

        Raises
        ------
        ValueError
            If the ladder has no such rung.
        """
        if rung not in self.panel.rungs:
            raise ValueError(f"no rung {rung!r}; there are {', '.join(self.panel.rungs)}")
        self.axis.rung = rung

    def _repr_mimebundle_(self, **kwargs: Any) -> Any:
        return self.widget._repr_mimebundle_(**kwargs)

    def _put_together(self) -> Any:
        reason = widgets.HBox(
            [self.why, self.bar.columns, self.bar.claims, self.bar.board, self.bar.numbers],
            layout=widgets.Layout(height="32px", flex="0 0 auto", align_items="center"),
        )
        reason.add_class("lf-bar-of-views")
        right = widgets.VBox(
            [self.numbers, reason, self.bar.widget, self.frame.widget, self.stars.widget],
            layout=widgets.Layout(flex="1 1 0", min_width="0", height="504px", overflow="hidden"),
        )
        middle = widgets.HBox(
            [self.panel.widget, right], layout=widgets.Layout(width="100%", height="504px")
        )
        root = widgets.VBox(
            [self.axis, middle, self.foot.widget, self.pulse],
            layout=widgets.Layout(
                width="100%",
                max_width="1000px",
                min_width="820px",
                height="640px",
                overflow="hidden",
            ),
        )
        root.add_class("lf-workbench")
        return root

    # What the user does

    @_guarded
    def _asked(self, control: Control, changes: Changes, settled: bool) -> None:
        session = self.session
        self.frame.pause()
        ok = session.settle(changes) if settled else session.attempt(changes)
        self._after(control, settled=settled, ok=ok)

    @_guarded
    def _change(self, changes: Changes) -> None:
        self.frame.pause()
        self._after(None, settled=True, ok=self.session.settle(changes))

    @_guarded
    def _undo(self, _: Any = None) -> None:
        self._after(None, settled=True, ok=self.session.undo())

    @_guarded
    def _redo(self, _: Any = None) -> None:
        self._after(None, settled=True, ok=self.session.redo())

    @_guarded
    def _pin(self, _: Any = None) -> None:
        words = self.shelf.pin()
        self._show_numbers()
        self._say(words, good=True)

    @_guarded
    def _sample(self, _: Any = None) -> None:
        words = self.shelf.sample()
        self.bar.show_board()
        self._say(words, good=True)

    @_guarded
    def _board_asks(self, action: Callable[[], str]) -> None:
        words = action()
        self._show_numbers()
        if words:
            self._say(words, good=True)

    @_guarded
    def _go_back(self, choices: Choices, name: str) -> None:
        self.frame.pause()
        ok = self.session.settle(changes_to(choices))
        self._after(None, settled=True, ok=ok)
        if ok:
            self._say(f"The choices of {name} are in force; Undo takes them back.", good=True)

    @_guarded
    def _save(self, _: Any = None) -> None:
        path = save_ladder(self.session.settled, self.foot.path())
        words = f"Saved {path.name}"
        if self.session.confirm():
            self._show_numbers()
            self.frame.show()
            words += f"; its numbers, as shown, are those of: ladderfit calibrate {path.name}"
        self._say(f"{words}.", good=True)
        self.foot.suggest(self.session.settled)

    @_guarded
    def _save_view(self) -> None:
        written = self.frame.save(free(self.bar.view, (".png", ".pdf")))
        self._say(f"Saved {' and '.join(path.name for path in written)}.", good=True)

    @_guarded
    def _opened(self, change: Any) -> None:
        self._open(change["new"])
        self.frame.show()

    @_guarded
    def _recoloured(self, _: Any) -> None:
        self.picture.take_colours(self.axis.dark, self.axis.rgb)
        self.frame.recolour()

    @_guarded
    def _resized(self, change: Any) -> None:
        self.picture.resize(change["new"] - _LEFT)
        self.frame.recolour()

    @_guarded
    def _stands(self, _: Any) -> None:
        self.picture.anew()
        self.frame.recolour()

    @_guarded
    def _view(self) -> None:
        self.frame.show()
        if self.session.trouble is None and self.session.result is not None:
            good, words = trust(self.session.result)
            self._say(self.frame.trouble or words, good=good and not self.frame.trouble)

    @_guarded
    def _beat(self, _: Any) -> None:
        self.frame.progress()
        if self.shelf.runs.waits and self.shelf.runs.look():
            self._show_numbers()
            words = self.shelf.ended()
            if words:
                self._say(words, good=True)
                self.frame.show()

    @_guarded
    def _pointed(self, points: Points | None, index: int, clicked: bool) -> None:
        if points is None:
            self.stars.leave()
            return
        self.stars.point(points, index, self.session.settled)
        if clicked:
            self.stars.toggle()

    # What is shown

    def _open(self, rung: str) -> None:
        self.axis.rung = rung
        self.panel.open(rung)
        self.bar.open(rung, self.session.settled)

    def _after(
        self, control: Control | None, *, settled: bool, ok: bool = True, said: bool = True
    ) -> None:
        """Bring the screen up to date after a change, or an attempt at one."""
        session = self.session
        trouble = session.trouble
        self.foot.can(session)
        if trouble is not None:
            self._troubled(control)
            return
        if not ok or session.result is None:
            return
        self.widget.remove_class("lf-stale")
        self.panel.quiet()
        self._show_numbers()
        if said and session.before is not None:
            self.why.value = text(why(session.before, session.result))
        if not settled:
            self.panel.count(session.ladder)
            return
        self.panel.show(session.settled)
        leaning = prior_driven(session.result)
        if control is not None and leaning:
            control.say(leaning)
        self.frame.show()
        self.axis.show(rungs(session.settled, self._every, session.result))
        good, words = trust(session.result)
        self._say(words, good=good)

    def _troubled(self, control: Control | None) -> None:
        session, trouble = self.session, self.session.trouble
        if trouble is None:
            return
        self.widget.add_class("lf-stale")
        if trouble.made:
            self.panel.show(session.settled)
            if session.result is not None:
                self.axis.show(rungs(session.settled, self._every, session.result))
        if control is not None:
            control.say(trouble.words)
        self.why.value = text("No posterior for these choices; the last one is greyed.")
        self._say(trouble.words, good=False)

    def _show_numbers(self) -> None:
        result = self.session.result
        if result is not None:
            full = self.shelf.full()
            self.numbers.value = strip(result, self.session.pinned, self.published, full)
            self.frame.numbers()

    def publish(self, name: str, value: float | None) -> None:
        """Show a published value of a parameter as a tick; None takes it away."""
        if value is None:
            self.published.pop(name, None)
        else:
            self.published[name] = value
        self._show_numbers()
        if self.bar.view == "published":
            self.frame.show()

    def _set_pulse(self) -> None:
        """Have the page ask for news while something is under way."""
        every = _OFTEN if self.frame.waits else _SELDOM if self.shelf.runs.waits else 0
        if self.pulse.every != every:
            self.pulse.every = every

    def _say(self, words: str, *, good: bool) -> None:
        self.foot.trust.value = text(words, "" if good else "lf-bad")
