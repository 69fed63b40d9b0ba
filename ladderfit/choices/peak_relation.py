"""Which terms the peak-magnitude relation has, and how errors of its inputs are met."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from ladderfit.errors import Problem
from ladderfit.schema import choice

INPUTS = ("width", "decline_rate", "colour")  # inputs with errors of their own
_NUMBER = float("inf")


@dataclass(frozen=True)
class PeakInput:
    """A term in the light curve's width or in the colour, linear (Tripp 1998).

    The peak magnitude is stated where the input equals its reference.
    """

    reference: float = choice("the value at which the peak magnitude is stated", default=0.0)


@dataclass(frozen=True)
class DeclineRate:
    """A term in the decline rate, linear or with a square (Phillips 1993)."""

    reference: float = choice(
        "the decline rate at which the peak magnitude is stated [mag]", default=1.1
    )
    quadratic: bool = choice("whether there is a term in its square", default=False)


@dataclass(frozen=True)
class HostMass:
    """A step of the absolute peak magnitude with the stellar mass of the galaxy.

    The term is -1/2 far under the step and +1/2 far above it, so that the peak
    magnitude is stated half-way.  Between them it jumps, or rises as a logistic
    function 1 / (1 + exp(-x / smoothing)) of the distance x from the step.
    """

    step: float = choice("log10 of the stellar mass [Msun] where the step is", default=10.0)
    smoothing: float = choice("width of the step [dex]; 0 for a sharp one", default=0.0)

    def check(self) -> Iterator[Problem]:
        """A width is a width."""
        if not 0.0 <= self.smoothing < _NUMBER:
            yield Problem(
                f"{self.smoothing:g}",
                "a width of 0 dex or more",
                "write 0.0 for a sharp step, or 0.2, say",
                key="smoothing",
            )


@dataclass(frozen=True)
class PeakRelation:
    """The terms of the peak-magnitude relation, one for all supernovae.

    ``errors`` says how errors of width, decline rate and colour are met:
    ``population`` integrates each supernova's true values over Gaussian
    populations, one of the supernovae in hosts and one of those in the expansion;
    ``in the variance`` only widens the magnitude's error, and ``ignored`` leaves
    them out.  The latter two dilute the coefficients and are for comparing only.
    """

    width: PeakInput | Literal["none"] = choice("the term in the width", default="none")
    decline_rate: DeclineRate | Literal["none"] = choice(
        "the term in the decline rate, in place of the width", default="none"
    )
    colour: PeakInput | Literal["none"] = choice("the term in the colour", default="none")
    host_mass: HostMass | Literal["none"] = choice(
        "the step with the stellar mass of the galaxy", default="none"
    )
    surveys: tuple[str, ...] = choice("surveys with an offset of their own", default=())
    errors: Literal["population", "in the variance", "ignored"] = choice(
        "how errors of width, decline rate and colour are met", default="population"
    )

    @property
    def inputs(self) -> tuple[str, ...]:
        """Which of width, decline rate and colour have a term."""
        return tuple(name for name in INPUTS if getattr(self, name) != "none")

    def reference(self, name: str) -> float:
        """The reference of an input."""
        return float(getattr(self, name).reference)

    @property
    def roles(self) -> tuple[str, ...]:
        """Columns that a table of supernovae needs for the terms."""
        mass = ("host_mass",) if self.host_mass != "none" else ()
        return (*self.inputs, *mass, *(("survey",) if self.surveys else ()))

    def check(self) -> Iterator[Problem]:
        """One measure of the light curve's shape; each survey once."""
        if self.width != "none" and self.decline_rate != "none":
            yield Problem(
                found="a term in the width and one in the decline rate",
                expected="one of the two: both measure the shape of the light curve",
                remedy='set one of them to "none"',
                key="decline_rate",
            )
        for name in dict.fromkeys(self.surveys):
            if self.surveys.count(name) > 1:
                yield Problem(
                    found=f"the survey {name!r} twice",
                    expected="each once",
                    remedy="take one out",
                    key="surveys",
                )


def optional_roles() -> tuple[str, ...]:
    """Roles that columns of supernovae may have for terms of the relation."""
    errors = tuple(f"{name}_error" for name in INPUTS)
    peak = tuple(f"peak_{name}_covariance" for name in INPUTS)
    shape = tuple(f"{name}_colour_covariance" for name in ("width", "decline_rate"))
    return (*INPUTS, *errors, *peak, *shape, "host_mass", "survey")
