"""The session behind the workbench: choices, posterior, pin, undo; no widgets.

A trial (while a control is dragged) draws few and leaves no trace; a settled
change draws in full and can be undone.  A change that cannot be made, or leaves
something undetermined, keeps the last posterior and says why in words.
"""

from __future__ import annotations

import os
import shutil
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, Protocol

from ladderfit.assembly import PATHS
from ladderfit.errors import InputError, LadderfitError, Problem
from ladderfit.ladder import Ladder
from ladderfit.ladder_copy import copy_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.result import Result
from ladderfit.sampling.run import draw
from ladderfit.sampling.warm import WarmDrawer

TRIAL_DRAWS = 500
_REMEMBERED = 8  # posteriors kept for undo and redo; older ones are drawn again


class Drawer(Protocol):
    """What a session draws with."""

    def draw(self, ladder: Ladder, *, draws: int | None = None, seed: int | None = None) -> Result:
        """The posterior of a ladder."""


@dataclass(frozen=True)
class Trouble:
    """Why the posterior on show is not that of the choices asked for.

    Attributes
    ----------
    keys : tuple of str
        What was to be changed.
    words : str
    made : bool
        Whether the change stands; one that could not be made at all does not.
    """

    keys: tuple[str, ...]
    words: str
    made: bool


@dataclass(frozen=True)
class _Step:
    """Settled choices, and their posterior while it is remembered."""

    ladder: Ladder
    result: Result | None


class Session:
    """One user's way through the choices of a ladder.

    Attributes
    ----------
    ladder : Ladder
        The choices in force, trials included.
    result : Result or None
        The last posterior that could be drawn.
    before : Result or None
        The posterior of the settled choices before the last change.
    pinned : Result or None
        What changes are measured against.
    pinned_name : str
        Its pin; "" for the posterior that the session began with.
    trouble : Trouble or None
        Set while `result` is not the posterior of the choices asked for.
    """

    def __init__(self, ladder: Ladder, drawer: Drawer | None = None) -> None:
        self.ladder = ladder
        self.result: Result | None = None
        self.before: Result | None = None
        self.pinned: Result | None = None
        self.pinned_name = ""
        self.trouble: Trouble | None = None
        self._drawer = WarmDrawer() if drawer is None else drawer
        self._settled = ladder
        self._settled_result: Result | None = None
        self._undo: list[_Step] = []
        self._redo: list[_Step] = []

    def start(self) -> None:
        """Draw the first posterior, and pin it."""
        self._draw((), settled=True)
        self.pinned = self.result

    @property
    def settled(self) -> Ladder:
        """The choices without a trial."""
        return self._settled

    @property
    def settled_result(self) -> Result | None:
        """The posterior of the settled choices; None where they have none."""
        return None if self.trouble is not None else self._settled_result

    @property
    def can_undo(self) -> bool:
        """Whether there is a change to take back."""
        return bool(self._undo) or (self.trouble is not None and not self.trouble.made)

    @property
    def can_redo(self) -> bool:
        """Whether there is a change to make again."""
        return bool(self._redo)

    def attempt(self, changes: Mapping[str, Any]) -> bool:
        """Draw a few of the settled choices with `changes`; nothing is recorded.

        Returns
        -------
        bool
            Whether there is a new posterior.
        """
        return self._try(changes, settled=False)

    def settle(self, changes: Mapping[str, Any]) -> bool:
        """Make `changes`, draw in full, and let undo take them back.

        Returns
        -------
        bool
            Whether there is a new posterior.
        """
        return self._try(changes, settled=True)

    def undo(self) -> bool:
        """Take the last settled change back, or what was asked for and not made."""
        if self.trouble is not None and not self.trouble.made:
            self.ladder = self._settled
            known = self._settled_result
            if known is None or known.source is not self._settled:
                return self._draw((), settled=True)
            self.result, self.before, self.trouble = known, known, None
            return True
        return self._step(self._undo, self._redo)

    def redo(self) -> bool:
        """Make the last change that was taken back again."""
        return self._step(self._redo, self._undo)

    def pin(self, name: str = "") -> Result:
        """Measure changes against the posterior on show from now on.

        Parameters
        ----------
        name : str
            Of the pin.

        Returns
        -------
        Result
            What is pinned.

        Raises
        ------
        LadderfitError
            If the posterior on show is not that of the choices.
        """
        found = self.settled_result
        if found is None:
            raise LadderfitError("nothing to pin: these choices have no posterior")
        self.pinned, self.pinned_name = found, name
        return found

    def measure_against(self, changes: Mapping[str, Any], name: str) -> None:
        """Measure changes against the posterior of other choices from now on.

        Raises
        ------
        LadderfitError
            If these have no posterior.
        """
        self.pinned, self.pinned_name = draw(self._settled.change(changes)), name

    def confirm(self) -> bool:
        """Draw the settled choices as the command line does, from nothing, to the same digits.

        Returns
        -------
        bool
            Whether there is such a posterior.
        """
        if self.trouble is not None:
            return False
        self.result = self._settled_result = draw(self._settled)
        return True

    def _try(self, changes: Mapping[str, Any], *, settled: bool) -> bool:
        keys = tuple(changes)
        try:
            self.ladder = self._settled.change(changes)
        except InputError as error:
            self.trouble = Trouble(keys, in_words(error), made=False)
            return False
        if settled and self.ladder.choices != self._settled.choices:
            self._push(self._undo)
            self._redo.clear()
        return self._draw(keys, settled=settled)

    def _draw(self, keys: tuple[str, ...], *, settled: bool) -> bool:
        if settled:
            self._settled = self.ladder
            self.before = self._settled_result
        try:
            result = self._drawer.draw(self.ladder, draws=None if settled else TRIAL_DRAWS)
        except LadderfitError as error:
            self.trouble = Trouble(keys, in_words(error), made=settled)
            return False
        self.result, self.trouble = result, None
        if settled:
            self._settled_result = result
        else:
            self.before = self._settled_result
        return True

    def _push(self, steps: list[_Step]) -> None:
        """Remember the settled choices, and their posterior for a while."""
        found = self._settled_result
        known = found is not None and found.source is self._settled
        steps.append(_Step(self._settled, found if known else None))
        if len(steps) > _REMEMBERED:
            place = len(steps) - _REMEMBERED - 1
            steps[place] = replace(steps[place], result=None)

    def _step(self, back: list[_Step], forth: list[_Step]) -> bool:
        if not back:
            return False
        self._push(forth)
        former = self._settled
        step = back.pop()
        self.ladder = step.ladder
        if step.result is not None:
            self.before = self._settled_result
            self._settled = step.ladder
            self.result = self._settled_result = step.result
            self.trouble = None
            return True
        return self._draw(tuple(self.ladder.choices.difference(former.choices)), settled=True)


def in_words(error: LadderfitError) -> str:
    """What is wrong, without the place in a file: the reader has the control at hand."""
    if not isinstance(error, InputError):
        return _sentence(str(error))
    return " ".join(
        _sentence(str(replace(problem, file=None, key=None))) for problem in error.problems
    )


def _sentence(text: str) -> str:
    text = " ".join(text.split())
    return f"{text[:1].upper()}{text[1:]}{'' if text.endswith(('.', '?')) else '.'}"


def save_ladder(ladder: Ladder, path: Path) -> Path:
    """Write the choices as a new ladder file whose table paths hold from its folder.

    Comments of the file that the ladder was read from come along.  Where tables
    lie in memory, a folder of that name is made, with the tables beside the file.

    Parameters
    ----------
    ladder : Ladder
    path : Path
        A file that does not exist; its folder does.

    Returns
    -------
    Path
        The ladder file.

    Raises
    ------
    InputError
        If the path exists, or its folder does not.
    LadderfitError, OSError
        If it cannot be written.
    """
    _check_free(path)
    if ladder.in_memory:
        folder = path.with_suffix("")
        _check_free(folder)
        folder.mkdir()
        copy_ladder(ladder, folder)
        return folder / "ladder.toml"
    changes = {}
    for key in PATHS:
        try:
            written = ladder.choices.value(key)
        except KeyError:
            continue
        place = os.path.relpath((ladder.base / written).resolve(), path.parent.resolve())
        changes[key] = Path(place).as_posix()
    moved = ladder.choices.change(changes)
    if ladder.path is not None and ladder.path.is_file():
        shutil.copyfile(ladder.path, path)
    try:
        write_choices(moved, path)
    except BaseException:
        path.unlink(missing_ok=True)
        raise
    return path


def _check_free(path: Path) -> None:
    if path.exists() or path.is_symlink():
        found, remedy = "a file or folder of that name", "choose another name"
    elif not path.parent.is_dir():
        found, remedy = f"no folder {path.parent}", "make the folder, or choose another"
    else:
        return
    raise InputError(Problem(found, "a name that is free", remedy, file=path.name))
