"""What is free or shared in the photometry of Cepheids: the ratio, common terms, limits."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

from ladderfit.errors import Problem
from ladderfit.schema import choice


@dataclass(frozen=True)
class Reddening:
    """The ratio of total to selective absorption as a parameter, and how colours are met.

    ``intrinsic relation``: true colours follow a relation with the period, spread by
    an intrinsic scatter and by dust, and the two spreads act on the magnitude with
    slopes of their own; both are integrated out.  ``one population``: one spread,
    one slope; colours' errors no longer dilute it, but it is no reddening law.  ``in
    the variance``: the colour's error only widens the magnitude's, which dilutes the
    ratio; for comparing.
    """

    colours: Literal["intrinsic relation", "one population", "in the variance"] = choice(
        "how true colours and their errors are met", default="intrinsic relation"
    )

    @property
    def population(self) -> bool:
        """Whether colours have populations, so that they are data of their own."""
        return self.colours != "in the variance"

    @property
    def intrinsic(self) -> bool:
        """Whether intrinsic colours and dust are told apart."""
        return self.colours == "intrinsic relation"


@dataclass(frozen=True)
class SharedTerm:
    """A photometric error that the Cepheids of a host have in common, each by its loading.

    Every host has an amplitude of its own, normal about zero; its standard deviation
    is `error`, or where none is given the parameter ``shared_photometry[NAME]``.
    """

    loading: str = choice("column of each star's loading [mag per unit of the amplitude]")
    error: float | None = choice("standard deviation of a host's amplitude", default=None)
    hosts: tuple[str, ...] = choice("hosts that have it; all where none is named", default=())

    def check(self) -> Iterator[Problem]:
        """An error is above zero."""
        if self.error is not None and not self.error > 0.0:
            yield Problem(f"{self.error:g}", "an error above 0", "correct it", key="error")


@dataclass(frozen=True)
class Completeness:
    """Magnitude limits beyond which the Cepheids of a host were not found.

    The limit acts on the measured magnitude in `band`, conditional on each star's
    own colour; that is exact where `band` is the relation's own magnitude, and an
    approximation otherwise.  Stars beyond a sharp limit are left out.
    """

    band: str = choice("the band of the limits: a name from bands, or a column")
    limits: Mapping[str, float] = choice("the faintest magnitude, by host [mag]")
    softness: float = choice("width of the limits [mag]; 0 is sharp", default=0.0)

    def check(self) -> Iterator[Problem]:
        """At least one limit; a softness of zero or more."""
        if not self.limits:
            yield Problem("no limit", "hosts and limits", "write {HOST = 27.0}", key="limits")
        if not 0.0 <= self.softness < float("inf"):
            yield Problem(f"{self.softness:g}", "0 mag or more", "write 0.0, say", key="softness")
