"""Stars with parallaxes: priors of their distances, offsets, selection, clusters."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

from ladderfit.choices.columns import Columns, Range, SetAside, range_faults
from ladderfit.choices.outliers import Outliers
from ladderfit.choices.stars import Magnitude, Overtones, PeriodRatio, star_faults
from ladderfit.errors import Problem
from ladderfit.schema import choice

DistancePrior = Literal["flat in modulus", "uniform in volume"]

PARALLAX_ROLES = (
    "parallax",
    "parallax_error",
    "g_magnitude",
    "nu_eff",
    "pseudocolour",
    "astrometric_params_solved",
    "ecliptic_latitude",
    "ra",
    "dec",
    "l",
    "b",
    "extinction",
    "cluster",
)


_OTHERWISE = {  # ways out, by key, other than naming the columns
    "corrected": ", or set corrected = true if the recipe is already applied",
    "correlation": ", or those of l and b",
    "distance_prior": ", or those of l and b",
}


def positive(key: str, value: float, unit: str) -> Iterator[Problem]:
    """The problem with a number that has to be above zero."""
    if not 0.0 < value < float("inf"):
        yield Problem(f"{value:g}", f"a number above 0 {unit}", "correct it", key=key)


@dataclass(frozen=True)
class Disc:
    """An exponential disc: density falls as exp(-R / length) sech^2(z / (2 height))."""

    length: float = choice("scale length [kpc]")
    height: float = choice("scale height [kpc]")
    solar_radius: float = choice("distance of the Sun from the Galaxy's axis [kpc]", default=8.2)
    solar_height: float = choice("height of the Sun above the plane [kpc]", default=0.02)

    def check(self) -> Iterator[Problem]:
        """Lengths above zero."""
        for key in ("length", "height", "solar_radius"):
            yield from positive(key, getattr(self, key), "kpc")


@dataclass(frozen=True)
class Density:
    """A density of stars that falls off: with distance, or as a disc does."""

    exponential: float | None = choice("scale length of the density [kpc]", default=None)
    disc: Disc | None = choice("an exponential disc", default=None)

    def check(self) -> Iterator[Problem]:
        """Exactly one of the two."""
        if (self.exponential is None) == (self.disc is None):
            yield Problem(
                found="no density" if self.disc is None else "two densities",
                expected="{exponential = LENGTH in kpc} or {disc = {length = ..., height = ...}}",
                remedy="give one of them",
            )
        elif self.exponential is not None:
            yield from positive("exponential", self.exponential, "kpc")


@dataclass(frozen=True)
class Correlation:
    """Errors that stars close together on the sky share.

    Their covariance is amplitude^2 exp(-separation / length), beside each star's
    own error.
    """

    amplitude: float = choice("standard deviation of the shared part [mas]")
    length: float = choice("angular separation at which it has fallen by e [deg]")

    def check(self) -> Iterator[Problem]:
        """Both above zero."""
        yield from positive("amplitude", self.amplitude, "mas")
        yield from positive("length", self.length, "deg")


@dataclass(frozen=True)
class Selection:
    """Limits that decide which stars are in the sample, and that the fit accounts for.

    Stars outside a sharp limit are left out.  The limit in magnitude acts on the
    band named, conditional on each star's own colour and extinction; that is an
    approximation, since extinction grows with distance.
    """

    band: str | None = choice("the band of the limit: a name from bands, or a column", default=None)
    limit: float | None = choice("the faintest magnitude in that band", default=None)
    softness: float = choice("width of the limit [mag]; 0 is sharp", default=0.0)
    parallax_min: float | None = choice("the least measured parallax [mas]", default=None)

    def check(self) -> Iterator[Problem]:
        """A band with its limit; some limit; a softness of zero or more."""
        if (self.band is None) != (self.limit is None):
            yield Problem(
                found="a limit without a band" if self.band is None else "a band without a limit",
                expected="both or neither",
                remedy='write {band = "V", limit = 15.0}',
            )
        elif self.limit is None and self.parallax_min is None:
            yield Problem(
                found="no limit",
                expected="band and limit, parallax_min, or all three",
                remedy="give a limit, or remove the selection",
            )
        if not 0.0 <= self.softness < float("inf"):
            yield Problem(f"{self.softness:g}", "0 mag or more", "write 0.0, say", key="softness")


@dataclass(frozen=True)
class Cluster:
    """What is known of a cluster from its other members."""

    parallax: float = choice("parallax of the cluster [mas]")
    error: float = choice("its standard error [mas]")
    offset: bool = choice("whether the common residual offset applies to it too", default=False)

    def check(self) -> Iterator[Problem]:
        """A positive error."""
        yield from positive("error", self.error, "mas")


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
    distance_prior: DistancePrior | Density = choice(
        "prior of a star's distance", default="flat in modulus"
    )
    modulus_bounds: Range | None = choice(
        "least and greatest modulus of a prior flat in modulus [mag]", default=None
    )
    offsets: tuple[str, ...] = choice(
        "groups with a residual offset of their own in place of the common one", default=()
    )
    offset_slope: bool = choice("whether the residual offset is linear in G", default=False)
    correlation: Correlation | None = choice("errors shared on the sky", default=None)
    selection: Selection | None = choice("limits that the fit accounts for", default=None)
    clusters: Mapping[str, Cluster] = choice(
        "parallaxes of clusters, by the name in the column cluster", default_factory=dict
    )
    periods: Range = choice("shortest and longest period [d]", default=(0.0, float("inf")))
    extinction_max: float | None = choice("greatest extinction", default=None)
    min_signal: float | None = choice(
        "least parallax over its error; a cut that the fit does not account for", default=None
    )
    overtones: Overtones = choice(
        "drop overtone pulsators, give them an offset, or convert their periods", default="drop"
    )
    conversion: PeriodRatio = choice(
        "the published period ratio that converts overtone periods",
        default="Feast & Catchpole 1997",
    )
    set_aside: tuple[SetAside, ...] = choice("stars left out by hand", default=())
    outliers: Outliers = choice("how stars off the relation are met", default_factory=Outliers)
    use: bool = choice("whether the parallaxes take part", default=True)

    @property
    def disc(self) -> Disc | None:
        """The disc of the distance prior, if it has one."""
        return self.distance_prior.disc if isinstance(self.distance_prior, Density) else None

    @property
    def exponential(self) -> float | None:
        """The scale length [kpc] of an exponentially decreasing density, if that is the prior."""
        return self.distance_prior.exponential if isinstance(self.distance_prior, Density) else None

    @property
    def prior_words(self) -> str:
        """The prior of a star's distance, for sentences."""
        if self.exponential is not None:
            return "exponentially decreasing density"
        if self.disc is not None:
            return f"exponential disc ({self.disc.length:g} and {self.disc.height:g} kpc)"
        words = str(self.distance_prior)
        if self.modulus_bounds is not None:
            words += " from {:g} to {:g} mag".format(*self.modulus_bounds)
        return words

    @property
    def needs_sky(self) -> bool:
        """Whether positions on the sky matter."""
        return self.disc is not None or self.correlation is not None

    def check(self) -> Iterator[Problem]:
        """Roles and ranges, and choices that need one another."""
        required = ("parallax", "parallax_error")
        others = tuple(role for role in PARALLAX_ROLES if role not in required)
        yield from star_faults(self.columns, required, self.periods, self.overtones, others)
        yield from self._column_faults()
        if self.modulus_bounds is not None:
            yield from range_faults(
                "modulus_bounds", self.modulus_bounds, " in mag", above_zero=False
            )
        yield from self._selection_faults()

    def _column_faults(self) -> Iterator[Problem]:
        """Columns that a choice needs and `columns` does not name."""
        given = self.columns
        if not self.corrected:
            yield from self._lacking("corrected", "the zero-point recipe", _recipe_roles(given))
        if self.offset_slope and "g_magnitude" not in given:
            yield from self._lacking("offset_slope", "an offset linear in G", ("g_magnitude",))
        if self.needs_sky and not (_pair(given, "ra", "dec") or _pair(given, "l", "b")):
            key = "correlation" if self.correlation is not None else "distance_prior"
            yield from self._lacking(key, "positions on the sky", ("ra", "dec"))
        if self.extinction_max is not None and "extinction" not in given:
            yield from self._lacking("extinction_max", "a cut in extinction", ("extinction",))
        if self.clusters and "cluster" not in given:
            yield from self._lacking("clusters", "clusters", ("cluster",))

    def _lacking(self, key: str, words: str, roles: tuple[str, ...]) -> Iterator[Problem]:
        absent = [role for role in roles if role not in self.columns]
        if absent:
            yield Problem(
                found=f"{words}, without columns for it",
                expected=", ".join(f"columns.{role}" for role in absent),
                remedy="name the columns" + _OTHERWISE.get(key, ""),
                key=key,
            )

    def _selection_faults(self) -> Iterator[Problem]:
        """Selections under which the chance of detection is not finite."""
        flat = self.distance_prior == "flat in modulus"
        if self.modulus_bounds is not None and not flat:
            yield Problem(
                found="bounds of the modulus under another distance prior",
                expected='distance_prior = "flat in modulus"',
                remedy="remove the bounds, or change the prior",
                key="modulus_bounds",
            )
        if self.selection is None:
            return
        if flat and self.modulus_bounds is None:
            yield Problem(
                found="a selection under a prior flat in modulus without bounds, "
                "under which nearly every star is infinitely near",
                expected="modulus_bounds, or another distance prior",
                remedy='write modulus_bounds = [6.0, 16.0], say, or "uniform in volume"',
                key="selection",
            )
        if self.distance_prior == "uniform in volume" and self.selection.limit is None:
            yield Problem(
                found="a limit in parallax alone under a prior uniform in volume, "
                "under which infinitely many stars lie beyond it and some are scattered in",
                expected="a magnitude limit too, or a density that falls off",
                remedy="add band and limit, or write distance_prior = {exponential = 2.0}, say",
                key="selection",
            )


def _pair(given: Columns, first: str, second: str) -> bool:
    return first in given and second in given


def _recipe_roles(given: Columns) -> tuple[str, ...]:
    """Columns that the zero-point recipe needs, given those that there are."""
    roles: tuple[str, ...] = ("g_magnitude", "nu_eff")
    if "pseudocolour" in given or "astrometric_params_solved" in given:
        roles = (*roles, "pseudocolour", "astrometric_params_solved")
    return roles if _pair(given, "ra", "dec") else (*roles, "ecliptic_latitude")
