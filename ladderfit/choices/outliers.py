"""How objects are met that do not follow the relation."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from ladderfit.errors import Problem
from ladderfit.schema import choice

Treatment = Literal["none", "mixture", "Student-t", "clipping as in older papers"]

CLIPPING: Treatment = "clipping as in older papers"
MIXTURE: Treatment = "mixture"
STUDENT: Treatment = "Student-t"


@dataclass(frozen=True)
class Outliers:
    """How outliers are met.

    ``mixture``: a star is an outlier with a probability that is fitted; its deviation is
    then normal with a second, larger width, fitted too, about an offset (zero unless a
    prior frees it).  ``Student-t``: deviations, measurement errors included, have the
    tails of a Student-t whose degrees of freedom are fitted, or held by a fixed prior.
    ``clipping as in older papers`` sets aside stars beyond `threshold` residual standard
    deviations of an unweighted fit, again and again; for comparing only.

    Attributes
    ----------
    groups : tuple of str
        Groups that have a fraction and a width, or degrees of freedom, of their own; a
        star has those of the first it belongs to.
    """

    treatment: Treatment = choice("how outliers are met", default="none")
    groups: tuple[str, ...] = choice(
        "groups with a fraction and a width, or degrees of freedom, of their own", default=()
    )
    threshold: float = choice("where clipping clips [residual sd]", default=3.0)

    @property
    def robust(self) -> bool:
        """Whether deviations are modelled as anything but normal."""
        return self.treatment in (MIXTURE, STUDENT)

    def check(self) -> Iterator[Problem]:
        """A threshold that can clip and leaves something."""
        if not 1.0 <= self.threshold < float("inf"):
            yield Problem(f"{self.threshold:g}", "1 or more", "write 3.0, say", key="threshold")
        if self.groups and not self.robust:
            yield Problem(
                found=f"groups, with treatment = {self.treatment!r}",
                expected=f"{MIXTURE!r} or {STUDENT!r}, which have something to give to each group",
                remedy="take the groups out, or change the treatment",
                key="groups",
            )
