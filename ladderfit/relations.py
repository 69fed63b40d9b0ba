"""The terms of the period-luminosity relation, each a column of the design matrix.

A term gives its coefficients' names, if the choices ask for it, and one column per
name.  To add one, write a function that yields its columns and put it into
`TERMS`; priors, names in results and the split into linear and non-linear
parameters follow from the names.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import numpy as np

from ladderfit.choices import Choices, Group
from ladderfit.names import with_group
from ladderfit.samples import BoolArray, FloatArray, IntArray, StarSample

NamedColumn = tuple[str, FloatArray]


@dataclass(frozen=True)
class StarInputs:
    """What a column may depend on: the stars as numbers, and who belongs to which group.

    Attributes
    ----------
    x : array, shape (n,)
        log10 of period over pivot.
    metallicity : array, shape (n,)
        Less its reference [dex]; zero where there is no such term.
    overtone : array of bool, shape (n,)
    groups : mapping of str to array of bool, shape (n,)
        Membership of every named group.
    """

    x: FloatArray
    metallicity: FloatArray
    overtone: BoolArray
    groups: dict[str, BoolArray]


def star_inputs(choices: Choices, stars: StarSample, hosts: tuple[str, ...]) -> StarInputs:
    """Bring a sample to the form that columns are made of; `hosts` are the ladder's."""
    relation = choices.relation
    n = len(stars)
    metallicity = np.zeros(n)
    if relation.metallicity != "none":
        metallicity = stars.metallicity - relation.metallicity.reference
    overtone = np.zeros(n, bool) if stars.overtone is None else stars.overtone
    groups = {name: members(group, stars, hosts) for name, group in choices.groups.items()}
    x = stars.log_period - float(np.log10(relation.pivot))
    return StarInputs(x, metallicity, overtone, groups)


def members(group: Group, stars: StarSample, hosts: tuple[str, ...]) -> BoolArray:
    """Which stars meet every criterion of a group, shape (n,)."""
    inside = np.ones(len(stars), bool)
    if group.hosts or group.parallax_stars:
        places = [place for place, host in enumerate(hosts) if host in group.hosts]
        if group.parallax_stars:
            places.append(-1)
        inside &= np.isin(stars.host, places)
    if group.mode is not None:
        overtone = np.zeros(len(stars), bool) if stars.overtone is None else stars.overtone
        inside &= overtone == (group.mode == "overtone")
    if group.system is not None:
        inside &= False if stars.system is None else stars.system == group.system
    return inside


def break_position(choices: Choices) -> float | None:
    """log10 of the break period over the pivot, or None."""
    relation = choices.relation
    if isinstance(relation.break_, str):
        return None
    return float(np.log10(relation.break_ / relation.pivot))


def _zero_point(_: Choices, stars: StarInputs) -> Iterator[NamedColumn]:
    yield "zero_point", np.ones(len(stars.x))


def _slope(choices: Choices, stars: StarInputs) -> Iterator[NamedColumn]:
    """One slope, or two that meet at the break; both columns vanish at the pivot."""
    place = break_position(choices)
    if place is None:
        yield "slope", stars.x
    else:
        yield "slope", np.minimum(stars.x, place) - min(0.0, place)
        yield "slope_beyond", np.maximum(stars.x, place) - max(0.0, place)


def _metallicity(choices: Choices, stars: StarInputs) -> Iterator[NamedColumn]:
    if choices.relation.metallicity != "none":
        yield "metallicity", stars.metallicity


def _curvature(choices: Choices, stars: StarInputs) -> Iterator[NamedColumn]:
    if choices.relation.curvature:
        yield "curvature", stars.x**2


def _slope_metallicity(choices: Choices, stars: StarInputs) -> Iterator[NamedColumn]:
    if choices.relation.slope_metallicity:
        yield "slope_metallicity", stars.x * stars.metallicity


def _group_zero_points(choices: Choices, stars: StarInputs) -> Iterator[NamedColumn]:
    for group in choices.relation.zero_points:
        yield with_group("zero_point_offset", group), stars.groups[group].astype(float)


def _group_slopes(choices: Choices, stars: StarInputs) -> Iterator[NamedColumn]:
    for group in choices.relation.slopes:
        yield with_group("slope_offset", group), stars.groups[group] * stars.x


def _overtones(choices: Choices, stars: StarInputs) -> Iterator[NamedColumn]:
    cepheids, parallaxes = choices.cepheids, choices.anchors.parallaxes
    in_use = (cepheids, parallaxes if parallaxes is not None and parallaxes.use else None)
    if any(section is not None and section.overtones == "offset" for section in in_use):
        yield "overtone_offset", stars.overtone.astype(float)


Term = Callable[[Choices, StarInputs], Iterator[NamedColumn]]

TERMS: tuple[Term, ...] = (
    _zero_point,
    _slope,
    _metallicity,
    _curvature,
    _slope_metallicity,
    _overtones,
    _group_zero_points,
    _group_slopes,
)


def design(choices: Choices, stars: StarSample, hosts: tuple[str, ...]) -> dict[str, FloatArray]:
    """All columns the choices ask for, by the name of the coefficient, each of shape (n,)."""
    return _columns(choices, star_inputs(choices, stars, hosts))


def coefficient_names(choices: Choices) -> tuple[str, ...]:
    """Names of the coefficients that the choices ask for, in the order of `design`."""
    return tuple(design(choices, _NOBODY, ()))


def period_sensitivity(choices: Choices, stars: StarSample, hosts: tuple[str, ...]) -> FloatArray:
    """Derivative of every column with respect to log10 period, shape (n, k)."""
    return _sensitivity(choices, star_inputs(choices, stars, hosts), "x")


def metallicity_sensitivity(
    choices: Choices, stars: StarSample, hosts: tuple[str, ...]
) -> FloatArray:
    """Derivative of every column with respect to metallicity, shape (n, k)."""
    return _sensitivity(choices, star_inputs(choices, stars, hosts), "metallicity")


def scatters(
    choices: Choices, stars: StarSample, hosts: tuple[str, ...]
) -> tuple[tuple[str, ...], IntArray]:
    """Names of the intrinsic scatters that occur, and which of them each star has, shape (n,)."""
    names = ["scatter", *(with_group("scatter", g) for g in choices.relation.scatter_groups)]
    groups = star_inputs(choices, stars, hosts).groups
    index = np.zeros(len(stars), dtype=np.int64)
    for place, group in reversed(list(enumerate(choices.relation.scatter_groups, start=1))):
        index[groups[group]] = place
    used, compact = np.unique(index, return_inverse=True)
    return tuple(names[place] for place in used), compact.astype(np.int64)


def _columns(choices: Choices, inputs: StarInputs) -> dict[str, FloatArray]:
    columns: dict[str, FloatArray] = {}
    for term in TERMS:
        columns.update(term(choices, inputs))
    return columns


def _sensitivity(choices: Choices, inputs: StarInputs, of: str) -> FloatArray:
    """Central differences: exact for columns linear or quadratic in their input."""
    ahead, behind = (
        _columns(choices, replace(inputs, **{of: getattr(inputs, of) + step}))
        for step in (_STEP, -_STEP)
    )
    return np.stack([(ahead[name] - behind[name]) / (2.0 * _STEP) for name in ahead], axis=1)


_STEP = 1e-5  # dex
_EMPTY = np.empty(0)
_NOBODY = StarSample(
    star=np.empty(0, dtype=np.str_),
    host=np.empty(0, dtype=np.int64),
    log_period=_EMPTY,
    magnitude=_EMPTY,
    variance=_EMPTY,
    metallicity=_EMPTY,
    row=np.empty(0, dtype=np.int64),
)
