"""What fixes the scale, geometric anchors and parallaxes, and what is assumed of hosts."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

from ladderfit.choices.columns import Columns, Range, SetAside
from ladderfit.choices.stars import Magnitude, Overtones, PeriodRatio, star_faults
from ladderfit.errors import Problem, nearest
from ladderfit.schema import choice

LARGEST_MODULUS = 50.0  # mag; "flat in modulus" and "uniform in volume" hold from 0 to here

DistancePrior = Literal["flat in modulus", "uniform in volume"]


@dataclass(frozen=True)
class GeometricAnchor:
    """A host whose distance is known by geometry."""

    modulus: float = choice("distance modulus [mag]")
    error: float = choice("standard error of the modulus [mag]")
    use: bool = choice("whether the anchor takes part", default=True)

    def check(self) -> Iterator[Problem]:
        """A positive error."""
        if not 0.0 < self.error < float("inf"):
            yield Problem(
                f"{self.error:g}", "an error above 0 mag", "give the standard error", key="error"
            )


@dataclass(frozen=True)
class Parallaxes:
    """Cepheids of the Milky Way with trigonometric parallaxes.

    Without a `magnitude` of its own the sample uses that of the Cepheids.
    """

    table: str = choice("the table of parallax stars, a path relative to this file")
    columns: Columns = choice(
        "column of each role: parallax, parallax_error, and those of other Cepheids but host"
    )
    magnitude: Magnitude | None = choice("its own bands and columns", default=None)
    corrected: bool = choice("whether the zero-point recipe is already applied", default=True)
    distance_prior: DistancePrior = choice("prior of a star's distance", default="flat in modulus")
    periods: Range = choice("shortest and longest period [d]", default=(0.0, float("inf")))
    overtones: Overtones = choice(
        "drop overtone pulsators, give them an offset, or convert their periods", default="drop"
    )
    conversion: PeriodRatio = choice(
        "the published period ratio that converts overtone periods",
        default="Feast & Catchpole 1997",
    )
    set_aside: tuple[SetAside, ...] = choice("stars left out by hand", default=())
    use: bool = choice("whether the parallaxes take part", default=True)

    def check(self) -> Iterator[Problem]:
        """Roles and ranges."""
        required = ("parallax", "parallax_error")
        yield from star_faults(self.columns, required, self.periods, self.overtones)
        if not self.corrected:
            yield Problem(
                found="false",
                expected="parallaxes with a zero-point recipe applied",
                remedy="apply a published recipe to the table and set corrected = true",
                key="corrected",
            )


@dataclass(frozen=True)
class SharedError:
    """One error that several geometric anchors have in common.

    An anchor's modulus contains the same unknown shift times its loading; `error`
    is the shift's standard deviation, beyond the anchors' own errors.
    """

    error: float = choice("standard deviation of the common shift [mag]")
    loads: Mapping[str, float] = choice("anchors that share it, with their loadings")

    def check(self) -> Iterator[Problem]:
        """A positive error and at least one anchor."""
        if not 0.0 < self.error < float("inf"):
            yield Problem(
                f"{self.error:g}", "an error above 0 mag", "give the standard error", key="error"
            )
        if not self.loads:
            yield Problem("no anchor", "anchors and loadings", "write {NAME = 1.0}", key="loads")


@dataclass(frozen=True)
class Anchors:
    """What fixes the scale."""

    geometric: Mapping[str, GeometricAnchor] = choice(
        "hosts with geometric distances", default_factory=dict
    )
    shared_errors: Mapping[str, SharedError] = choice(
        "errors that geometric anchors share", default_factory=dict
    )
    parallaxes: Parallaxes | None = choice("stars with parallaxes", default=None)

    def check(self) -> Iterator[Problem]:
        """Shared errors load on anchors that exist."""
        for name, shared in self.shared_errors.items():
            for anchor in shared.loads:
                if anchor not in self.geometric:
                    yield Problem(
                        found=f"the anchor {anchor!r}, which is not among the geometric ones",
                        expected="names of geometric anchors",
                        remedy=nearest(anchor, self.geometric),
                        key=f"shared_errors.{name}.loads",
                    )


@dataclass(frozen=True)
class Hosts:
    """What is assumed of the galaxies' distances."""

    distance_prior: DistancePrior = choice("prior of a host's distance", default="flat in modulus")
