"""What outlives the page and the kernel: pins, long runs, and where the session stands."""

from __future__ import annotations

from collections.abc import Callable

from ladderfit.choices import Choices
from ladderfit.errors import LadderfitError
from ladderfit.ladder import Ladder
from ladderfit.result import Result
from ladderfit.workbench.board_panel import Asks, BoardPanel
from ladderfit.workbench.keeping import Keeper, Left
from ladderfit.workbench.long_runs import LongRuns
from ladderfit.workbench.pins import Pin, PinBoard, changes_to, label_of
from ladderfit.workbench.state import Session


class Shelf:
    """Pins, runs and the session's own file, in one folder.

    Parameters
    ----------
    session : Session
        Not started yet.
    published : dict
        Published values, by parameter.
    background : bool
        Whether a page asks for news of runs.
    asked : callable
        Called with what to do when the board's buttons are clicked: it does it as
        every callback is done.
    go_back : callable
        Makes choices, given with the name of the entry.

    Attributes
    ----------
    panel : BoardPanel
    restored : Left or None
        What was taken up because the kernel had been restarted.
    """

    def __init__(
        self,
        session: Session,
        published: dict[str, float],
        *,
        background: bool,
        asked: Callable[[Callable[[], str]], None],
        go_back: Callable[[Choices, str], None],
    ) -> None:
        self.session, self.published = session, published
        self._start = session.ladder.choices
        self._kept: tuple[Ladder, str, dict[str, float], str, str, str] | None = None
        self.board = PinBoard(session.ladder)
        self.runs = LongRuns(session.ladder, self.board.folder, background=background)
        self.keeper = Keeper(self.board.folder, self._start)
        left = self.keeper.left()
        self.restored = left if left is not None and left.restarted else None
        new = self.restored is None and left is not None and left.choices != self._start
        offered = left if new else None
        asks = Asks(
            go_back=go_back,
            measure_against=lambda pin: asked(lambda: self._measure(pin)),
            changed=lambda: asked(lambda: ""),
        )
        self.panel = BoardPanel(session, self.board, self.runs, offered, asks)
        self._going: set[str] = set()
        self.runs.refresh()

    def take_up(self) -> str:
        """Go on where a killed kernel was; returns what to say about it."""
        left = self.restored
        if left is None:
            return ""
        self.published.update(left.published)
        pin = self.board.find(left.baseline) if left.baseline else None
        words = []
        if pin is not None and pin.choices is not None:
            self.session.measure_against(changes_to(pin.choices), pin.name)
            words.append(f"changes are counted from {pin.name}")
        if left.choices != self._start:
            self.session.settle(changes_to(left.choices))
            words.insert(0, "its choices are in force, and Undo gives those of the ladder file")
        return f"Took up the session before the kernel was restarted: {'; '.join(words)}."

    def keep(self, rung: str, view: str, claims: str) -> None:
        """Write down where the session stands."""
        session = self.session
        now = (session.settled, session.pinned_name, dict(self.published), rung, view, claims)
        if now != self._kept:
            self._kept = now
            self.keeper.keep(Left(now[0].choices, *now[1:]))

    def pin(self) -> str:
        """Pin the posterior on show; returns what to say."""
        found = self.session.pin()
        pin = self.board.add(found, label_of(found.choices, self._start))
        self.session.pin(pin.name)
        self.panel.choose(pin.name)
        return f"Pinned as {pin.name}: changes are counted from these numbers."

    def sample(self) -> str:
        """Start a long run of the choices in force; returns what to say.

        Raises
        ------
        LadderfitError
            If they have no posterior, or are being sampled already.
        """
        session = self.session
        if session.settled_result is None:
            raise LadderfitError("nothing to sample: these choices have no posterior")
        known = self.runs.of(session.settled.choices)
        if known is not None and known.state != "failed":
            self.panel.choose(known.name)
            return f"These choices are those of {known.name}, which is {known.state}."
        effective = self.panel.effective
        if effective is None:
            raise LadderfitError("the number of effective draws on the board is no number")
        name = self.runs.start(session.settled, effective)
        self.panel.choose(name)
        return f"{name} has started; it goes on without this page, in {self.board.folder.name}."

    def full(self) -> Result | None:
        """The finished run of the choices and tables in force; None where there is none."""
        run = self.runs.of(self.session.settled.choices)
        stale = run is None or run.result is None or run.result.source is None
        return None if stale or run is None else run.result

    def ended(self) -> str:
        """What to say of runs that have ended since this was asked last."""
        going = {run.name for run in self.runs.runs if run.going}
        over = [run for run in self.runs.runs if run.name in self._going - going]
        self._going = going
        words = []
        for run in over:
            told = f"{run.name} is {run.state}"
            if run.progress is not None:
                told += f", {run.progress.ess:,.0f} effective draws"
            words.append(told)
        if self.full() is not None and words:
            words.append('its numbers stand beside the live ones, "in full"')
        return f"{'; '.join(words)}." if words else ""

    def _measure(self, pin: Pin) -> str:
        if pin.choices is None:
            raise LadderfitError(f"{pin.name} cannot be read")
        self.session.measure_against(changes_to(pin.choices), pin.name)
        self.panel.refresh()
        return f"Changes are counted from {pin.name}."
