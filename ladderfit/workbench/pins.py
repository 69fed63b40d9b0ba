"""The pin board: ladder files in ``NAME.pins/``, each with its numbers; no widgets.

``pin-01.toml`` is an ordinary ladder file (``pin-01/ladder.toml``, with the tables,
where these lie in memory), and ``pin-01.json`` holds what ``summary.json`` of a
result folder holds, and the pin's label.
"""

from __future__ import annotations

import json
import os
import re
import shutil
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from ladderfit.assembly import PATHS
from ladderfit.choices import Choices
from ladderfit.errors import InputError
from ladderfit.files import write_text_atomically
from ladderfit.ladder import Ladder
from ladderfit.ladder_copy import LADDER
from ladderfit.ladder_file import as_written, read_choices
from ladderfit.result import Result
from ladderfit.store import provenance_of, summary_of
from ladderfit.workbench.state import in_words, save_ladder

_LONGEST = 48  # letters of a label made of changes
Numbers = Mapping[str, tuple[float, float]]


@dataclass(frozen=True)
class Pin:
    """One pin.

    Attributes
    ----------
    name : str
        ``pin-01``, say.
    label : str
    path : Path
        Its ladder file.
    choices : Choices or None
        As the session's own would be, paths included; None where the file cannot be read.
    numbers : mapping of str to (mean, sd)
    words : str
        What is wrong with it, or with its tables.
    """

    name: str
    label: str
    path: Path
    choices: Choices | None
    numbers: Numbers
    words: str = ""


def board_folder(ladder: Ladder) -> Path:
    """Where a ladder's pins and runs lie: ``NAME.pins`` in the current folder."""
    stem = "ladder" if ladder.path is None else ladder.path.stem
    return Path(f"{stem}.pins").resolve()


class PinBoard:
    """The pins of one ladder.

    Parameters
    ----------
    ladder : Ladder
        Whose pins they are.
    """

    def __init__(self, ladder: Ladder) -> None:
        self.ladder = ladder
        self.folder = board_folder(ladder)
        self._read: dict[Path, tuple[tuple[float, float], Pin]] = {}

    def pins(self) -> list[Pin]:
        """Every pin, by name; ladder files that were put there by hand count too."""
        if not self.folder.is_dir():
            return []
        paths = [*self.folder.glob("*.toml"), *self.folder.glob(f"*/{LADDER}")]
        paths = [path for path in paths if not (path.parent / "run.json").exists()]
        return [self._pin(path) for path in sorted(paths, key=_name)]

    def find(self, name: str) -> Pin | None:
        """A pin by its name; None where there is none."""
        return next((pin for pin in self.pins() if pin.name == name), None)

    def add(self, result: Result, label: str) -> Pin:
        """Pin a posterior and its choices.

        Raises
        ------
        LadderfitError, OSError
            If it cannot be written.
        """
        self.folder.mkdir(exist_ok=True)
        name = free_name(self.folder, "pin")
        path = save_ladder(result.ladder, self.folder / f"{name}.toml")
        content = {**summary_of(result), "provenance": provenance_of(result), "label": label}
        _write(self.folder / f"{name}.json", content)
        return self._pin(path)

    def relabel(self, pin: Pin, label: str) -> None:
        """Give a pin another label."""
        path = self.folder / f"{pin.name}.json"
        _write(path, {**_content(path), "label": label})

    def remove(self, pin: Pin) -> None:
        """Take a pin off the board, and its files away."""
        (self.folder / f"{pin.name}.json").unlink(missing_ok=True)
        if pin.path.parent == self.folder:
            pin.path.unlink(missing_ok=True)
        else:
            shutil.rmtree(pin.path.parent)

    def _pin(self, path: Path) -> Pin:
        name = _name(path)
        summary = self.folder / f"{name}.json"
        stamp = (_changed(path), _changed(summary))
        known = self._read.get(path)
        if known is not None and known[0] == stamp:
            return known[1]
        pin = self._read_pin(name, path, _content(summary))
        self._read[path] = (stamp, pin)
        return pin

    def _read_pin(self, name: str, path: Path, content: Mapping[str, Any]) -> Pin:
        label = str(content.get("label", name))
        numbers = numbers_in(content)
        try:
            choices = moved(read_choices(path), path.parent, self.ladder)
        except InputError as error:
            return Pin(name, label, path, None, numbers, in_words(error))
        return Pin(name, label, path, choices, numbers, self._changed_tables(content))

    def _changed_tables(self, content: Mapping[str, Any]) -> str:
        """Which of the session's tables differ from those that the pin was drawn from."""
        inputs = content.get("provenance", {}).get("inputs", {})
        differing = [
            str(known.get("table", key))
            for key, known in inputs.items()
            if key in self.ladder.sources and self.ladder.sources[key].sha256 != known.get("sha256")
        ]
        if not differing:
            return ""
        return f"Drawn from other contents of {', '.join(differing)}."


def moved(choices: Choices, folder: Path, ladder: Ladder) -> Choices:
    """Choices read in a folder, with paths as a ladder's own choices have them."""
    changes: dict[str, Any] = {}
    for key in PATHS:
        written, own = _value(choices, key), _value(ladder.choices, key)
        if written is None:
            continue
        there = (folder / written).resolve()
        if own is not None and (ladder.in_memory or (ladder.base / own).resolve() == there):
            changes[key] = own
        else:
            changes[key] = Path(os.path.relpath(there, ladder.base.resolve())).as_posix()
    return choices.change(changes)


def changes_to(choices: Choices) -> dict[str, Any]:
    """Changes by dotted key, section by section, that turn any choices into these."""
    mapping = choices.to_mapping()
    sections: dict[str, Any] = dict.fromkeys(Choices.__dataclass_fields__)
    return {**sections, **mapping}


def same_fit(one: Choices, other: Choices) -> bool:
    """Whether two sets of choices have one posterior, as far as choices go."""
    return not fit_difference(one, other)


def fit_difference(one: Choices, other: Choices) -> dict[str, tuple[Any, Any]]:
    """What differs between the fits of two sets of choices: {key: (in other, in one)}."""
    apart = ("title", "sampling", "alternatives")
    return {
        key: pair
        for key, pair in one.difference(other).items()
        if key.partition(".")[0] not in apart
    }


def label_of(choices: Choices, start: Choices) -> str:
    """A label from what was changed since the start."""
    changed = fit_difference(choices, start)
    if not changed:
        return "as in the ladder file"
    parts = [f"{_short(key)} {as_written(new)}" for key, (_, new) in changed.items()]
    text = ", ".join(parts)
    return text if len(text) <= _LONGEST else f"{text[: _LONGEST - 1]}…"


def numbers_in(content: Mapping[str, Any]) -> dict[str, tuple[float, float]]:
    """Mean and standard deviation by parameter, from a summary; what is no number is left out."""
    found: dict[str, tuple[float, float]] = {}
    for group, form in (("parameters", "{}"), ("moduli", "modulus[{}]")):
        entries: Any = content.get(group)
        for name in entries if isinstance(entries, Mapping) else ():
            entry = entries[name]
            try:
                found[form.format(name)] = float(entry["mean"]), float(entry["sd"])
            except (KeyError, TypeError, ValueError):
                continue
    return found


def numbers_of(result: Result) -> dict[str, tuple[float, float]]:
    """Mean and standard deviation by parameter."""
    return {name: (result.mean(name), result.sd(name)) for name in result.draws}


def free_name(folder: Path, stem: str) -> str:
    """The first of STEM-01, STEM-02, ... that nothing in a folder is called by."""
    taken = {path.name.split(".")[0] for path in folder.iterdir()} if folder.is_dir() else set()
    number = 1
    while f"{stem}-{number:02d}" in taken:
        number += 1
    return f"{stem}-{number:02d}"


def _short(key: str) -> str:
    """The last two parts of a dotted key."""
    return ".".join(re.split(r"\.(?=(?:[^\"]*\"[^\"]*\")*[^\"]*$)", key)[-2:])


def _name(path: Path) -> str:
    return path.parent.name if path.name == LADDER else path.stem


def _value(choices: Choices, key: str) -> Any:
    try:
        return choices.value(key)
    except KeyError:
        return None


def _changed(path: Path) -> float:
    try:
        return path.stat().st_mtime_ns
    except OSError:
        return 0.0


def _content(path: Path) -> dict[str, Any]:
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return {}
    return content if isinstance(content, dict) else {}


def _write(path: Path, content: Mapping[str, Any]) -> None:
    text = json.dumps(content, indent=2, ensure_ascii=False, allow_nan=False)
    write_text_atomically(path, text + "\n")
