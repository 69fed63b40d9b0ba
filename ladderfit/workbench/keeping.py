"""What a session leaves behind, so that a kernel that is killed loses nothing; no widgets.

With every change the choices in force, the baseline and what is on show go to
``session-NOTEBOOK.json`` on the pin board.  A kernel that was restarted takes them
up; a new session offers them and begins with the ladder file.
"""

from __future__ import annotations

import json
import os
from collections.abc import Mapping
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from ladderfit.choices import Choices
from ladderfit.errors import InputError

_FORMAT = 1


@dataclass(frozen=True)
class Left:
    """What a session left.

    Attributes
    ----------
    choices : Choices
        In force at its end.
    baseline : str
        The pin that changes were counted from; "" for the ladder file's own numbers.
    published : mapping of str to float
    rung, view : str
        What was open.
    claims : str
        The claims file picked; "" for none.
    restarted : bool
        Whether its kernel is gone while its page's server still runs.
    """

    choices: Choices
    baseline: str = ""
    published: Mapping[str, float] = field(default_factory=dict)
    rung: str = ""
    view: str = ""
    claims: str = ""
    restarted: bool = False


class Keeper:
    """Writes down where a session is, beside the page.

    Parameters
    ----------
    folder : Path
        The pin board's; made when there is something to write.
    start : Choices
        What the session began with.
    """

    def __init__(self, folder: Path, start: Choices) -> None:
        notebook = Path(os.environ.get("JPY_SESSION_NAME", "")).stem
        self.path = folder / f"session{'-' if notebook else ''}{notebook}.json"
        self._start = start.to_mapping()
        self._pool = ThreadPoolExecutor(1, thread_name_prefix="ladderfit-keeper")

    def left(self) -> Left | None:
        """What an earlier session of this notebook and ladder file left; None where nothing."""
        try:
            content = json.loads(self.path.read_text(encoding="utf-8"))
            if content["format"] != _FORMAT or content["start"] != _plain(self._start):
                return None
            published = {str(k): float(v) for k, v in content["published"].items()}
            texts = (str(content[key]) for key in ("baseline", "rung", "view"))
            choices = Choices.from_mapping(content["now"])
            baseline, rung, view = texts
            claims = str(content.get("claims", ""))
            gone = content["server"] == _server() and not _lives(int(content["kernel"]))
        except (OSError, ValueError, KeyError, TypeError, AttributeError, InputError):
            return None
        return Left(choices, baseline, published, rung, view, claims, bool(_server()) and gone)

    def keep(self, left: Left) -> None:
        """Write down where the session is; the page does not wait for it."""
        self._pool.submit(self._keep, left)

    def flush(self) -> None:
        """Wait until everything is written."""
        self._pool.submit(lambda: None).result()

    def _keep(self, left: Left) -> None:
        now = left.choices.to_mapping()
        content = {
            "format": _FORMAT,
            "server": _server(),
            "kernel": os.getpid(),
            "start": self._start,
            "now": now,
            "baseline": left.baseline,
            "published": dict(left.published),
            "rung": left.rung,
            "view": left.view,
            "claims": left.claims,
        }
        untouched = now == self._start and not (left.baseline or left.published or left.claims)
        if untouched and not self.path.exists():
            return
        with suppress(OSError):  # a folder that may not be written keeps no session
            self.path.parent.mkdir(exist_ok=True)
            temporary = self.path.with_name(f".{self.path.name}.{os.getpid()}.tmp")
            temporary.write_text(json.dumps(content), encoding="utf-8")
            temporary.replace(self.path)


def _plain(mapping: Any) -> Any:
    """As JSON gives it back."""
    return json.loads(json.dumps(mapping))


def _server() -> str:
    """What started the kernel, where it says so."""
    return os.environ.get("JPY_PARENT_PID", "")


def _lives(process: int) -> bool:
    if process == os.getpid():
        return True
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except OSError:
        return True
    return True
