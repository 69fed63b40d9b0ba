"""What fixes the scale, geometric anchors and parallaxes, and what is assumed of hosts."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from ladderfit.choices.covariance import Covariance
from ladderfit.choices.parallaxes import DistancePrior, Parallaxes
from ladderfit.errors import Problem, nearest
from ladderfit.schema import choice

LARGEST_MODULUS = 50.0  # mag; "flat in modulus" and "uniform in volume" hold from 0 to here


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
    covariance: Covariance | None = choice(
        "the covariance of all geometric moduli, in use or not [mag^2]", default=None
    )
    parallaxes: Parallaxes | None = choice("stars with parallaxes", default=None)

    def check(self) -> Iterator[Problem]:
        """Shared errors load on anchors that exist."""
        if self.covariance is not None and not self.geometric:
            yield Problem(
                found="a covariance without geometric anchors",
                expected="the covariance of the moduli in [anchors.geometric]",
                remedy="take it out, or add the anchors",
                key="covariance",
            )
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
