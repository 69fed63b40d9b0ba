"""What a view shows: a posterior, and what else bears on it; no widgets."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any

from ladderfit.checks.residuals import HostResiduals
from ladderfit.result import Result
from ladderfit.workbench.claims import Beside

Tell = Callable[[float], None]


@dataclass(frozen=True, eq=False)
class Shown:
    """What a view is drawn from.

    Attributes
    ----------
    result : Result
        The posterior on show.
    rung, column : str
        The open rung, and the column that residuals are shown against.
    aside : HostResiduals or None
        Stars set aside by hand.
    worked : object or None
        What the view's own work gave, where it has some.
    full : Result or None
        A finished ensemble run of the same choices.
    published : mapping of str to float
        Published values, by parameter.
    claims : Beside
        The claims of a claims file; empty where none is picked.
    """

    result: Result
    rung: str = ""
    column: str = ""
    aside: HostResiduals | None = None
    worked: Any = None
    full: Result | None = None
    published: Mapping[str, float] = field(default_factory=dict)
    claims: Beside = field(default_factory=Beside)
