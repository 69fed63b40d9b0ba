"""Which terms the period-luminosity relation has, and for which groups of stars."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from ladderfit.choices.photometry import Reddening
from ladderfit.errors import Problem
from ladderfit.schema import choice


@dataclass(frozen=True)
class Metallicity:
    """The metallicity term: on which scale, relative to which value, and its errors.

    Where the table has metallicity errors, ``errors`` says how they are met:
    ``population`` integrates every star's true metallicity over a Gaussian
    population per host; ``in the variance`` only widens the magnitude's error,
    which dilutes the term and is meant for comparing; ``ignored`` leaves them out.
    """

    reference: float = choice("the metallicity at which the zero point is stated [dex]")
    scale: str = choice('the scale, such as "12+log(O/H)" or "[Fe/H]"')
    errors: Literal["population", "in the variance", "ignored"] = choice(
        "how errors of the metallicity are met", default="population"
    )


@dataclass(frozen=True)
class Group:
    """A named group of stars: those that meet every criterion given.

    Attributes
    ----------
    hosts : tuple of str
        Stars in these hosts; with `parallax_stars`, also the parallax stars.
    mode : str or None
        Stars of this pulsation mode.
    system : str or None
        Stars of this photometric system, as the tables name it.
    """

    hosts: tuple[str, ...] = choice("hosts whose stars belong to it", default=())
    parallax_stars: bool = choice("whether the parallax stars belong to it", default=False)
    mode: Literal["fundamental", "overtone"] | None = choice("a pulsation mode", default=None)
    system: str | None = choice("a photometric system", default=None)

    def check(self) -> Iterator[Problem]:
        """At least one criterion."""
        if not (self.hosts or self.parallax_stars or self.mode or self.system):
            yield Problem(
                found="no criterion",
                expected="hosts, parallax_stars, mode or system",
                remedy="say which stars belong to the group",
            )


@dataclass(frozen=True)
class Relation:
    """Which terms the period-luminosity relation has.

    `scatter`, `zero_points` and `slopes` list the groups (of ``[groups]``) that
    have a scatter of their own, or an offset of their own in zero point or slope.
    """

    pivot: float = choice("the period at which the zero point is stated [d]", default=10.0)
    metallicity: Metallicity | Literal["none"] = choice("the metallicity term", default="none")
    break_: float | Literal["none"] = choice(
        "the period beyond which the slope is another [d]", default="none"
    )
    curvature: bool = choice("whether there is a quadratic term", default=False)
    slope_metallicity: bool = choice("whether the slope varies with metallicity", default=False)
    scatter: Literal["common"] | tuple[str, ...] = choice(
        'groups with a scatter of their own, or "common"', default="common"
    )
    zero_points: tuple[str, ...] = choice("groups with a zero-point offset", default=())
    slopes: tuple[str, ...] = choice("groups with a slope offset", default=())
    reddening: Reddening | Literal["fixed"] = choice(
        "whether the ratio of the Wesenheit index is a parameter", default="fixed"
    )

    @property
    def scatter_groups(self) -> tuple[str, ...]:
        """Groups with a scatter of their own; a star gets that of the first it belongs to."""
        return () if self.scatter == "common" else self.scatter

    def check(self) -> Iterator[Problem]:
        """Periods are periods; a term needs those it builds on."""
        for key, period in (("pivot", self.pivot), ("break", self.break_)):
            if not isinstance(period, str) and not 0.0 < period < float("inf"):
                yield Problem(f"{period:g}", "a period in days", "write 10.0, say", key=key)
        if self.slope_metallicity and self.metallicity == "none":
            yield Problem(
                found="a slope that varies with metallicity, but no metallicity term",
                expected="both or none",
                remedy="add relation.metallicity",
                key="slope_metallicity",
            )
