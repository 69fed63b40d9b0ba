"""Which stars of a table take part in a refit, and which terms its relation has."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from ladderfit.choices.columns import Range
from ladderfit.review.claims import period_words

EVERY_PERIOD: Range = (0.0, float("inf"))


@dataclass(frozen=True)
class Selection:
    """Which stars take part, and which terms the relation has.

    Attributes
    ----------
    periods : (float, float)
        In d, ends included.
    mode : str
        ``fundamental``, ``overtone`` or ``both``.
    hosts : tuple of str
        Those that take part; empty is all.
    parallax_stars : bool
        Whether stars with parallaxes take part.
    without : str or None
        A host left out.
    set_aside : tuple of str
        Names of stars.
    break_ : float or None
        Period beyond which the slope is another [d].
    metallicity : bool
    fixed : tuple of (str, float)
        Coefficients held.
    """

    periods: Range = EVERY_PERIOD
    mode: str = "both"
    hosts: tuple[str, ...] = ()
    parallax_stars: bool = True
    without: str | None = None
    set_aside: tuple[str, ...] = ()
    break_: float | None = None
    metallicity: bool = False
    fixed: tuple[tuple[str, float], ...] = ()

    @property
    def words(self) -> str:
        """The selection in one phrase."""
        said = [period_words(self.periods)]
        if self.mode != "both":
            said.append(f"{self.mode} mode")
        if self.hosts:
            said.append("hosts " + ", ".join(self.hosts))
        if self.without:
            said.append(f"without {self.without}")
        if self.break_:
            said.append(f"break at {self.break_:g} d")
        return ", ".join(said)


def terms(chosen: Selection) -> dict[str, Any]:
    """Changes that give a ladder the terms of a selection, by dotted key."""
    changes: dict[str, Any] = {"relation.break": chosen.break_ or "none"}
    if not chosen.metallicity:
        changes["relation.metallicity"] = "none"
        changes["relation.slope_metallicity"] = False
    return changes
