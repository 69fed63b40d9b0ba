"""All choices as one: made from a nested mapping, changed by dotted keys, compared."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Self

from ladderfit import schema
from ladderfit.choices.anchors import Anchors, Hosts
from ladderfit.choices.columns import column_faults
from ladderfit.choices.covariance import Covariance
from ladderfit.choices.outlier_checks import POSITIVE, fraction_faults, outlier_faults
from ladderfit.choices.parallaxes import Parallaxes
from ladderfit.choices.peak_relation import PeakRelation
from ladderfit.choices.photometry_checks import completeness_faults, reddening_faults
from ladderfit.choices.relation import Group, Relation
from ladderfit.choices.sampling import Sampling
from ladderfit.choices.stars import Cepheids
from ladderfit.choices.third_rung import Expansion, Supernovae
from ladderfit.errors import InputError, Problem, nearest, raise_if
from ladderfit.names import PARAMETERS, base_name, group_of, parameter, with_group
from ladderfit.priors import Fixed, Normal, Prior
from ladderfit.schema import choice


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
    peak_relation: PeakRelation = choice(
        "the peak-magnitude relation", default_factory=PeakRelation
    )
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
        raise_if(list(schema.undecided(mapping)))
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
        default = _default_of_file(self, name) or parameter(name).prior
        if default is None:
            raise KeyError(name)
        return default

    @property
    def peak_covariance(self) -> tuple[str, Covariance] | None:
        """The covariance of peak magnitudes in force, with its dotted key."""
        for key, section in (("supernovae", self.supernovae), ("expansion", self.expansion)):
            if section is not None and section.covariance is not None:
                return f"{key}.covariance", section.covariance
        return None

    @property
    def peak_scatters(self) -> tuple[str, str]:
        """Names of the supernovae's scatters: in hosts, and in the expansion."""
        if self.supernovae is None or self.supernovae.scatter == "common":
            return "peak_scatter", "peak_scatter"
        return with_group("peak_scatter", "hosts"), with_group("peak_scatter", "expansion")

    def states_prior(self, name: str) -> bool:
        """Whether the prior in force was chosen, that is, differs from the default."""
        return self.prior(name) != parameter(name).prior

    def _photometry_faults(self) -> Iterator[Problem]:
        yield from reddening_faults(self.relation, self.cepheids, self.anchors.parallaxes)
        covariances = {
            "the covariance of peaks": self.peak_covariance is not None,
            "anchors.covariance": self.anchors.covariance is not None,
        }
        yield from completeness_faults(self.relation, self.cepheids, covariances=covariances)

    def _outlier_faults(self) -> Iterator[Problem]:
        tied = self.supernovae is not None and self.supernovae.covariance is not None
        covariances = {
            "supernovae.covariance": tied,
            "anchors.covariance": self.anchors.covariance is not None,
        }
        stars = self.anchors.parallaxes
        yield from fraction_faults(self.priors)
        yield from outlier_faults(
            self.relation, self.cepheids, stars, self.groups, covariances=covariances
        )

    def check(self) -> Iterator[Problem]:
        """Sections that need one another."""
        yield from _prior_faults(self.priors)
        yield from _group_faults(self.relation, self.anchors.parallaxes, self.groups)
        yield from _peak_faults(self)
        yield from _magnitude_faults(self.cepheids, self.anchors.parallaxes)
        yield from self._photometry_faults()
        yield from self._outlier_faults()
        sections = {"cepheids": self.cepheids, "anchors.parallaxes": self.anchors.parallaxes}
        for key, section in sections.items():
            if section is None or self.relation.metallicity == "none":
                continue
            if "metallicity" not in section.columns:
                yield Problem(
                    found="no metallicity column, yet the relation has a metallicity term",
                    expected="columns.metallicity",
                    remedy='name the column, or set relation.metallicity = "none"',
                    key=key,
                )
        yield from _peak_column_faults(self)
        if not (any(sections.values()) or self.supernovae or self.expansion):
            yield Problem(
                found="no data",
                expected="at least one of [cepheids], [anchors.parallaxes], "
                "[supernovae] and [expansion]",
                remedy="add a section",
            )


RATIO_WIDTH = 0.5  # of the stated ratio: width of its default prior


def _default_of_file(choices: Choices, name: str) -> Prior | None:
    """Defaults that follow from another choice: a stated length, ratio or error."""
    stars, cepheids = choices.anchors.parallaxes, choices.cepheids
    if name == "distance_length" and stars is not None and stars.exponential is not None:
        return Fixed(stars.exponential)
    if base_name(name) == "shared_photometry" and cepheids is not None:
        term = cepheids.shared.get(str(group_of(name)))
        if term is not None and term.error is not None:
            return Fixed(term.error)
    if name == "reddening_ratio":
        sections = (cepheids, stars)
        for magnitude in (s.magnitude for s in sections if s is not None):
            if magnitude is not None and magnitude.wesenheit is not None:
                ratio = magnitude.wesenheit.ratio
                return Normal(ratio, RATIO_WIDTH * abs(ratio) or RATIO_WIDTH)
    return None


_POSITIVE = ("parallax_error_scale", "distance_length", *POSITIVE)


def _prior_faults(priors: Mapping[str, Prior]) -> Iterator[Problem]:
    known = [name for name, p in PARAMETERS.items() if p.prior is not None]
    for name in priors:
        if base_name(name) not in known:
            yield Problem(
                found="an unknown parameter",
                expected="one of " + ", ".join(known),
                remedy=nearest(name, known),
                key=schema.join("priors", name),
            )
        elif base_name(name) in _POSITIVE:
            prior = priors[name]
            lowest = prior.value if isinstance(prior, Fixed) else prior.bounds[0]
            if lowest < 0.0 or (isinstance(prior, Fixed) and lowest == 0.0):
                yield Problem(
                    found=str(prior),
                    expected="a prior on numbers above 0",
                    remedy="write {log_normal = [median, sd in mag]} or {uniform = [low, high]}",
                    key=schema.join("priors", name),
                )


def _peak_faults(choices: Choices) -> Iterator[Problem]:
    """One covariance of peaks at most; errors of the expansion's peaks from it or a column."""
    expansion = choices.expansion
    if expansion is None:
        return
    both = choices.supernovae is not None and choices.supernovae.covariance is not None
    if both and expansion.covariance is not None:
        yield Problem(
            found="a second covariance of peak magnitudes",
            expected="one: that of [supernovae] holds the expansion's supernovae too",
            remedy="take one of the two out",
            key="expansion.covariance",
        )
    in_force = choices.peak_covariance
    replaced = in_force is not None and not in_force[1].adds
    has_peaks = expansion.table is not None and not expansion.linear
    if has_peaks and "peak_error" not in expansion.columns and not replaced:
        wanted = (*expansion.columns, "peak_error")
        for fault in column_faults(expansion.columns, wanted, ()):
            yield dataclasses.replace(fault, key=f"expansion.{fault.key}")


def _peak_column_faults(choices: Choices) -> Iterator[Problem]:
    """Every table of supernovae has the columns that terms of the relation need."""
    expansion = choices.expansion
    flow = expansion is not None and expansion.table is not None and not expansion.linear
    tables = {"supernovae": choices.supernovae, "expansion": expansion if flow else None}
    for key, section in tables.items():
        for role in choices.peak_relation.roles:
            if section is not None and role not in section.columns:
                yield Problem(
                    found="no column of that role, yet the peak relation has a term in it",
                    expected=f"the name of the column that holds the {role.replace('_', ' ')}",
                    remedy=f'add {role} = "..." to columns, or take the term out of peak_relation',
                    key=f"{key}.columns.{role}",
                )


def _group_faults(
    relation: Relation, stars: Parallaxes | None, groups: Mapping[str, Group]
) -> Iterator[Problem]:
    """Groups that the relation or the offsets name and nobody defines."""
    named = {
        "relation.scatter": relation.scatter_groups,
        "relation.zero_points": relation.zero_points,
        "relation.slopes": relation.slopes,
        "anchors.parallaxes.offsets": () if stars is None else stars.offsets,
    }
    for key, listed in named.items():
        for group in listed:
            if group not in groups:
                yield Problem(
                    found=f"the group {group!r}, which [groups] does not define",
                    expected="names of groups",
                    remedy=nearest(group, groups),
                    key=key,
                )


def _magnitude_faults(cepheids: Cepheids | None, stars: Parallaxes | None) -> Iterator[Problem]:
    """Both samples of Cepheids have a magnitude, and it is the same."""
    if stars is None:
        return
    if stars.magnitude is None and cepheids is None:
        yield Problem(
            found="nothing",
            expected="the parallax stars' magnitude, as there are no other Cepheids",
            remedy="add [anchors.parallaxes.magnitude]",
            key="anchors.parallaxes.magnitude",
        )
    if stars.magnitude is not None and cepheids is not None:
        theirs, ours = stars.magnitude.identity, cepheids.magnitude.identity
        if theirs != ours:
            yield Problem(
                found=f"{theirs}, where the Cepheids have {ours}",
                expected="the same magnitude for both, as they share one zero point",
                remedy="give both sections the same band, or the same index and ratio",
                key="anchors.parallaxes.magnitude",
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
