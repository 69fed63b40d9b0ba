"""Every choice of a calibration, frozen, with its default and its dotted key.

The dataclasses below are the ladder file: section by section, key by key.  A
field's words appear in messages.  `Choices` is the whole; it is made from a
nested mapping, given back as one, changed by dotted keys and compared.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Literal, Self

from ladderfit import schema
from ladderfit.errors import InputError, Problem, nearest, raise_if
from ladderfit.names import PARAMETERS, base_name, parameter
from ladderfit.priors import Prior
from ladderfit.schema import choice

LARGEST_MODULUS = 50.0  # mag; "flat in modulus" and "uniform in volume" hold from 0 to here

Columns = Mapping[str, str]
Range = tuple[float, float]
PeriodRatio = Literal["Feast & Catchpole 1997", "Alcock et al. 1995"]
DistancePrior = Literal["flat in modulus", "uniform in volume"]

_STAR_ROLES = (
    "period",
    "log_period",
    "period_error",
    "metallicity",
    "metallicity_error",
    "mode",
    "system",
)


def _range_faults(key: str, low_high: Range, unit: str, *, above_zero: bool) -> Iterator[Problem]:
    low, high = low_high
    if not low < high or (above_zero and low < 0.0):
        yield Problem(
            found=f"[{low:g}, {high:g}]",
            expected=f"a lower and a higher bound{unit}",
            remedy="swap or correct the bounds",
            key=key,
        )


def _column_faults(
    columns: Columns, required: tuple[str, ...], optional: tuple[str, ...]
) -> Iterator[Problem]:
    known = (*required, *optional)
    for role in columns:
        if role not in known:
            yield Problem(
                found="an unknown role",
                expected="one of " + ", ".join(known),
                remedy=nearest(role, known),
                key=schema.join("columns", role),
            )
    for role in required:
        if role not in columns:
            yield Problem(
                found="nothing",
                expected=f"the name of the column that holds the {role.replace('_', ' ')}",
                remedy=f'add {role} = "..." to columns',
                key=schema.join("columns", role),
            )


def _period_faults(columns: Columns) -> Iterator[Problem]:
    given = [role for role in ("period", "log_period") if role in columns]
    if len(given) != 1:
        yield Problem(
            found="both period and log_period" if given else "neither period nor log_period",
            expected="one of period (d) and log_period (log10 of the period in d)",
            remedy="name exactly one of the two columns",
            key="columns",
        )


@dataclass(frozen=True)
class SetAside:
    """One object left out by hand, with the reason."""

    reason: str = choice("why it is set aside")
    star: str | None = choice("the star's name", default=None)
    host: str | None = choice("the star's host, where the name alone is ambiguous", default=None)
    name: str | None = choice("the supernova's name", default=None)

    def check(self) -> Iterator[Problem]:
        """Exactly one object is named."""
        if (self.star is None) == (self.name is None):
            yield Problem(
                found="no name" if self.star is None else "two names",
                expected="star = NAME for a Cepheid or name = NAME for a supernova",
                remedy="name one object",
            )


@dataclass(frozen=True)
class Wesenheit:
    """W = band - ratio x colour, the colour from two bands or from one colour column."""

    band: str = choice("the band the index is built on, a name from bands")
    colour: tuple[str, ...] | str = choice(
        "two bands, blue first, or the name of one colour column"
    )
    ratio: float = choice("the ratio of total to selective absorption")

    def check(self) -> Iterator[Problem]:
        """A colour needs two bands."""
        if isinstance(self.colour, tuple) and len(self.colour) != 2:
            yield Problem(
                found=f"{len(self.colour)} bands",
                expected="two bands, blue first, or one colour column's name",
                remedy='write colour = ["V", "I"] or colour = "V-I"',
                key="colour",
            )

    @property
    def colour_bands(self) -> tuple[str, ...]:
        """The names whose columns make up the colour (one or two)."""
        return (self.colour,) if isinstance(self.colour, str) else self.colour

    @property
    def bands(self) -> tuple[str, ...]:
        """Every name whose column is needed, each once."""
        return tuple(dict.fromkeys((self.band, *self.colour_bands)))


@dataclass(frozen=True)
class Magnitude:
    """What stands on the left of the relation: one band, or a Wesenheit index.

    `errors` names an error column per band; or ``total`` names one column that
    holds the error of the finished magnitude or index, instead.
    """

    bands: Columns = choice("column of each magnitude or colour [mag]")
    errors: Columns = choice("column of each error [mag], or total = the error of the whole")
    band: str | None = choice("the one band to use", default=None)
    wesenheit: Wesenheit | None = choice("the index to build", default=None)

    @property
    def used(self) -> tuple[str, ...]:
        """Names in `bands` that the choice needs."""
        if self.wesenheit is not None:
            return self.wesenheit.bands
        return (self.band,) if self.band is not None else ()

    @property
    def identity(self) -> str:
        """What the magnitude is, whichever columns it is made of."""
        if self.wesenheit is None:
            return f"the band {self.band}"
        return f"an index on {self.wesenheit.band} with the ratio {self.wesenheit.ratio:g}"

    @property
    def label(self) -> str:
        """For axes and summaries."""
        if self.wesenheit is None:
            return str(self.band)
        colour = self.wesenheit.colour
        text = colour if isinstance(colour, str) else "-".join(colour)
        return f"W = {self.wesenheit.band} - {self.wesenheit.ratio:g} ({text})"

    def check(self) -> Iterator[Problem]:
        """One of band and wesenheit, and a column and an error for all it uses."""
        if (self.band is None) == (self.wesenheit is None):
            yield Problem(
                found="both band and wesenheit" if self.band else "neither band nor wesenheit",
                expected="one of them",
                remedy="remove one" if self.band else 'add band = "H" or wesenheit = {...}',
            )
            return
        key = "band" if self.wesenheit is None else "wesenheit"
        for name in self.used:
            if name not in self.bands:
                yield Problem(
                    found=f"{name!r}, which is not among the bands",
                    expected="names that bands gives a column",
                    remedy=nearest(name, self.bands),
                    key=key,
                )
            if name not in self.errors and "total" not in self.errors:
                yield Problem(
                    found=f"no error column for {name!r}",
                    expected="an error column for each band in use, or total",
                    remedy=f'add {name} = "..." to errors',
                    key="errors",
                )


@dataclass(frozen=True)
class Cepheids:
    """Cepheids in galaxies."""

    table: str = choice("the table of Cepheids, a path relative to this file")
    columns: Columns = choice(
        "column of each role: star (rows are numbered without), host, period, metallicity, mode"
    )
    magnitude: Magnitude = choice("which magnitude the relation is for")
    periods: Range = choice("shortest and longest period [d]", default=(0.0, float("inf")))
    overtones: Literal["drop", "offset", "convert"] = choice(
        "drop overtone pulsators, give them an offset, or convert their periods", default="drop"
    )
    conversion: PeriodRatio = choice(
        "the published period ratio that converts overtone periods",
        default="Feast & Catchpole 1997",
    )
    set_aside: tuple[SetAside, ...] = choice("stars left out by hand", default=())

    def check(self) -> Iterator[Problem]:
        """Roles and ranges."""
        yield from _column_faults(
            self.columns, ("host",), ("star", "period", "log_period", "metallicity", "mode")
        )
        yield from _period_faults(self.columns)
        yield from _range_faults("periods", self.periods, " in days", above_zero=True)


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
        "column of each role: star, period, metallicity, mode, parallax, parallax_error"
    )
    magnitude: Magnitude | None = choice("its own bands and columns", default=None)
    corrected: bool = choice("whether the zero-point recipe is already applied", default=True)
    distance_prior: DistancePrior = choice("prior of a star's distance", default="flat in modulus")
    periods: Range = choice("shortest and longest period [d]", default=(0.0, float("inf")))
    overtones: Literal["drop", "offset", "convert"] = choice(
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
        yield from _column_faults(
            self.columns,
            ("parallax", "parallax_error"),
            ("star", "period", "log_period", "metallicity", "mode"),
        )
        yield from _period_faults(self.columns)
        yield from _range_faults("periods", self.periods, " in days", above_zero=True)
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


@dataclass(frozen=True)
class Supernovae:
    """Standardised peak magnitudes of supernovae in hosts of the ladder."""

    table: str = choice("the table of supernovae, a path relative to this file")
    columns: Columns = choice("column of each role: name, host, peak, peak_error")
    set_aside: tuple[SetAside, ...] = choice("supernovae left out by hand", default=())

    def check(self) -> Iterator[Problem]:
        """Roles."""
        yield from _column_faults(self.columns, ("name", "host", "peak", "peak_error"), ())


@dataclass(frozen=True)
class Intercept:
    """A published intercept of the expansion: a = log10(c z f) - 0.2 m."""

    value: float = choice("the intercept a")
    error: float = choice("its standard error")

    def check(self) -> Iterator[Problem]:
        """A positive error."""
        if not 0.0 < self.error < float("inf"):
            yield Problem(
                f"{self.error:g}", "an error above 0", "give the standard error", key="error"
            )


@dataclass(frozen=True)
class Expansion:
    """The expansion: a table of peaks and redshifts, or of distances and velocities, or a number.

    With redshift and peak columns, supernovae follow the expansion with their
    standard peak magnitude.  With distance [Mpc] and velocity [km/s] columns the
    job is the linear law velocity = H0 x distance (+ a constant).
    """

    table: str | None = choice("the table, a path relative to this file", default=None)
    columns: Columns = choice(
        "column of each role: name, redshift, redshift_heliocentric, peak, peak_error; "
        "or name, distance, velocity",
        default_factory=dict,
    )
    intercept: Intercept | None = choice("a published intercept instead", default=None)
    redshifts: Range = choice("lowest and highest redshift", default=(0.023, 0.15))
    q0: float = choice("deceleration parameter", default=-0.55)
    j0: float = choice("jerk parameter", default=1.0)
    peculiar_velocity: float = choice("dispersion of peculiar velocities [km/s]", default=250.0)
    velocity_constant: bool = choice(
        "whether the linear law has a constant velocity", default=False
    )
    set_aside: tuple[SetAside, ...] = choice("objects left out by hand", default=())

    @property
    def linear(self) -> bool:
        """Whether the job is velocities against distances."""
        return "velocity" in self.columns

    def check(self) -> Iterator[Problem]:
        """A table or an intercept; the columns of one of the two laws."""
        if (self.table is None) == (self.intercept is None):
            yield Problem(
                found="neither a table nor an intercept"
                if self.table is None
                else "both a table and an intercept",
                expected="one of them",
                remedy="add table and columns, or intercept = {value = ..., error = ...}"
                if self.table is None
                else "remove one of the two",
                key="table",
            )
        if self.table is not None and self.linear:
            yield from _column_faults(self.columns, ("name", "distance", "velocity"), ())
        elif self.table is not None:
            yield from _column_faults(
                self.columns,
                ("name", "redshift", "peak", "peak_error"),
                ("redshift_heliocentric",),
            )
        yield from _range_faults("redshifts", self.redshifts, "", above_zero=True)
        if not 0.0 <= self.peculiar_velocity < float("inf"):
            yield Problem(
                f"{self.peculiar_velocity:g}",
                "a velocity of 0 km/s or more",
                "write 250.0, say",
                key="peculiar_velocity",
            )


@dataclass(frozen=True)
class Sampling:
    """How the posterior is drawn."""

    sampler: Literal["direct"] = choice("which sampler", default="direct")
    draws: int = choice("number of draws", default=4000)
    seed: int = choice("seed of the random generator", default=1)

    def check(self) -> Iterator[Problem]:
        """Counts."""
        if not 100 <= self.draws <= 10_000_000:
            yield Problem(
                str(self.draws), "100 to 10,000,000 draws", "write 4000, say", key="draws"
            )
        if self.seed < 0:
            yield Problem(str(self.seed), "a seed of 0 or more", "write 1, say", key="seed")


@dataclass(frozen=True)
class Choices:
    """All choices of one calibration.

    Attributes follow the sections of a ladder file.  `priors` holds what the
    file states; `prior` gives the prior in force.
    """

    title: str = choice("a title", default="")
    cepheids: Cepheids | None = choice("Cepheids in galaxies", default=None)
    relation: Relation = choice("the relation", default_factory=Relation)
    groups: Mapping[str, Group] = choice("named groups of stars", default_factory=dict)
    anchors: Anchors = choice("what fixes the scale", default_factory=Anchors)
    hosts: Hosts = choice("the galaxies", default_factory=Hosts)
    supernovae: Supernovae | None = choice("supernovae in hosts", default=None)
    expansion: Expansion | None = choice("the expansion", default=None)
    priors: Mapping[str, Prior] = choice("priors by parameter", default_factory=dict)
    sampling: Sampling = choice("the sampler", default_factory=Sampling)
    alternatives: Mapping[str, tuple[Any, ...]] = dataclasses.field(default_factory=dict)

    @classmethod
    def from_mapping(cls, mapping: Mapping[str, Any]) -> Self:
        """Check a nested mapping (as read from a ladder file) and freeze it.

        Raises
        ------
        InputError
            One problem per key that does not fit.
        """
        problems: list[Problem] = []
        plain = dict(mapping)
        alternatives = plain.pop("alternatives", {})
        result = schema.read(cls, plain, problems)
        if result is not None and alternatives:
            problems.extend(_alternative_faults(plain, alternatives))
        raise_if(problems)
        if result is None:  # not reached: a missing result comes with problems
            raise AssertionError
        frozen = {key: tuple(values) for key, values in alternatives.items()}
        return dataclasses.replace(result, alternatives=frozen)

    def to_mapping(self) -> dict[str, Any]:
        """The nested mapping with every default filled in; the inverse of `from_mapping`."""
        mapping: dict[str, Any] = schema.written(self)
        return {key: value for key, value in mapping.items() if value != {}}

    def change(self, changes: Mapping[str, Any]) -> Self:
        """A copy with dotted keys set to new values; None removes a key.

        Raises
        ------
        InputError
            If a key is unknown or a value does not fit.
        """
        mapping = self.to_mapping()
        for key, value in changes.items():
            mapping = schema.with_value(mapping, key, schema.written(value))
        try:
            return type(self).from_mapping(mapping)
        except InputError as error:
            known = schema.flat(self.to_mapping())
            faults = (_with_nearest_key(p, changes, known) for p in error.problems)
            raise InputError(dict.fromkeys(faults)) from None

    def value(self, key: str) -> Any:
        """The value under a dotted key, as a ladder file writes it.

        Raises
        ------
        KeyError
            If there is no such key.
        """
        found: Any = self.to_mapping()
        for part in schema.split(key):
            if not isinstance(found, Mapping) or part not in found:
                raise KeyError(key)
            found = found[part]
        return found

    def difference(self, other: Choices) -> dict[str, tuple[Any, Any]]:
        """Dotted keys whose values differ: {key: (in other, in self)}; None where absent."""
        mine, theirs = schema.flat(self.to_mapping()), schema.flat(other.to_mapping())
        keys = [*mine, *(key for key in theirs if key not in mine)]
        return {
            key: (theirs.get(key), mine.get(key))
            for key in keys
            if mine.get(key) != theirs.get(key)
        }

    def prior(self, name: str) -> Prior:
        """The prior in force for a parameter: stated for its group, for its name, or the default.

        Raises
        ------
        KeyError
            If the parameter has no prior of its own.
        """
        for stated in (name, base_name(name)):
            if stated in self.priors:
                return self.priors[stated]
        default = parameter(name).prior
        if default is None:
            raise KeyError(name)
        return default

    def states_prior(self, name: str) -> bool:
        """Whether the prior in force was chosen, that is, differs from the default."""
        return self.prior(name) != parameter(name).prior

    def check(self) -> Iterator[Problem]:
        """Sections that need one another."""
        known = [name for name, p in PARAMETERS.items() if p.prior is not None]
        for name in self.priors:
            if base_name(name) not in known:
                yield Problem(
                    found="an unknown parameter",
                    expected="one of " + ", ".join(known),
                    remedy=nearest(name, known),
                    key=schema.join("priors", name),
                )
        for key in ("scatter_groups", "zero_points", "slopes"):
            for group in getattr(self.relation, key):
                if group not in self.groups:
                    yield Problem(
                        found=f"the group {group!r}, which [groups] does not define",
                        expected="names of groups",
                        remedy=nearest(group, self.groups),
                        key=f"relation.{key.removesuffix('_groups')}",
                    )
        stars = self.anchors.parallaxes
        if stars is not None and stars.magnitude is None and self.cepheids is None:
            yield Problem(
                found="nothing",
                expected="the parallax stars' magnitude, as there are no other Cepheids",
                remedy="add [anchors.parallaxes.magnitude]",
                key="anchors.parallaxes.magnitude",
            )
        if stars is not None and stars.magnitude is not None and self.cepheids is not None:
            theirs, ours = stars.magnitude.identity, self.cepheids.magnitude.identity
            if theirs != ours:
                yield Problem(
                    found=f"{theirs}, where the Cepheids have {ours}",
                    expected="the same magnitude for both, as they share one zero point",
                    remedy="give both sections the same band, or the same index and ratio",
                    key="anchors.parallaxes.magnitude",
                )
        if self.relation.metallicity != "none":
            for section, key in ((self.cepheids, "cepheids"), (stars, "anchors.parallaxes")):
                if section is not None and "metallicity" not in section.columns:
                    yield Problem(
                        found="no metallicity column, yet the relation has a metallicity term",
                        expected="columns.metallicity",
                        remedy='name the column, or set relation.metallicity = "none"',
                        key=key,
                    )
        if not (self.cepheids or stars or self.supernovae or self.expansion):
            yield Problem(
                found="no data",
                expected="at least one of [cepheids], [anchors.parallaxes], "
                "[supernovae] and [expansion]",
                remedy="add a section",
            )


def _with_nearest_key(
    problem: Problem, changes: Mapping[str, Any], known: Mapping[str, Any]
) -> Problem:
    """Where a change reached into a section that is not there, offer the nearest known key."""
    if problem.found != "nothing" or problem.key is None:
        return problem
    section = schema.split(problem.key)[:-1]
    for key in changes:
        if key not in known and schema.split(key)[:-1] == section:
            return Problem(
                found="a key of something that is not there",
                expected="a known key, or all keys of a new entry",
                remedy=nearest(key, known),
                key=key,
            )
    return problem


def _alternative_faults(plain: Mapping[str, Any], alternatives: Any) -> Iterator[Problem]:
    if not isinstance(alternatives, Mapping):
        yield Problem(
            repr(alternatives), "a table of dotted keys", "correct it", key="alternatives"
        )
        return
    for key, values in alternatives.items():
        place = schema.join("alternatives", key)
        if not isinstance(values, list | tuple) or not values:
            yield Problem(repr(values), "a list of values to try", "write [value, ...]", key=place)
            continue
        for value in values:
            faults: list[Problem] = []
            schema.read(Choices, schema.with_value(plain, key, value), faults)
            yield from (dataclasses.replace(fault, key=place) for fault in faults)
