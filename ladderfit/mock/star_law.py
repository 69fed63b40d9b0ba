"""The relation that simulated Cepheids follow, star by star, from its definition.

Breaks, curvature, a slope that varies with metallicity, overtones, groups; and true
periods and metallicities where the measured ones have errors.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from ladderfit.choices import Group
from ladderfit.ladder import Ladder
from ladderfit.names import with_group
from ladderfit.samples import BoolArray, FloatArray, StarSample

Rng = np.random.Generator


@dataclass(frozen=True)
class Stars:
    """Stars given their true inputs: mean absolute magnitudes, and metallicities as measured."""

    mean: FloatArray
    metallicity: FloatArray


def belongs(ladder: Ladder, stars: StarSample, group: Group) -> BoolArray:
    """Which stars a group has, shape (n,): those that meet all it asks for."""
    found = []
    overtone = stars.overtone if stars.overtone is not None else np.zeros(len(stars), bool)
    for place in range(len(stars)):
        host, inside = int(stars.host[place]), True
        if group.hosts or group.parallax_stars:
            inside = group.parallax_stars if host < 0 else ladder.hosts[host] in group.hosts
        if group.mode is not None:
            inside = inside and bool(overtone[place]) == (group.mode == "overtone")
        if group.system is not None:
            inside = inside and stars.system is not None and stars.system[place] == group.system
        found.append(inside)
    return np.array(found, dtype=bool)


def law_needs(ladder: Ladder) -> Iterator[str]:
    """Names of parameters of the relation that need a true value."""
    relation = ladder.choices.relation
    samples = [s for s in (ladder.cepheids, ladder.parallax_stars) if s is not None]
    if not samples:
        return
    yield from ("slope", "zero_point")
    yield from ["slope_beyond"] if relation.break_ != "none" else []
    yield from ["metallicity"] if relation.metallicity != "none" else []
    yield from ["curvature"] if relation.curvature else []
    yield from ["slope_metallicity"] if relation.slope_metallicity else []
    yield from ["overtone_offset"] if any(s.overtone is not None for s in samples) else []
    yield from (with_group("zero_point_offset", group) for group in relation.zero_points)
    yield from (with_group("slope_offset", group) for group in relation.slopes)
    names = [_scatter_names(ladder, stars) for stars in samples]
    yield from dict.fromkeys(name for each in names for name in each)
    if any(has_populations(ladder, stars) for stars in samples):
        yield "metallicity_spread"
    if ladder.parallax_stars is not None and has_populations(ladder, ladder.parallax_stars):
        yield "parallax_metallicity"


def absolute(
    ladder: Ladder,
    stars: StarSample,
    truth: Mapping[str, float],
    log_period: FloatArray | None = None,
    metallicity: FloatArray | None = None,
) -> FloatArray:
    """Mean absolute magnitude of each star [mag], shape (n,), by the true relation.

    Periods and metallicities are the measured ones unless others are given.
    """
    relation = ladder.choices.relation
    log_period = stars.log_period if log_period is None else log_period
    x = log_period - np.log10(relation.pivot)
    mean = truth["zero_point"] + _along(ladder, x, truth)
    if relation.curvature:
        mean = mean + truth["curvature"] * x**2
    if relation.metallicity != "none":
        given = stars.metallicity if metallicity is None else metallicity
        excess = given - relation.metallicity.reference
        mean = mean + truth["metallicity"] * excess
        if relation.slope_metallicity:
            mean = mean + truth["slope_metallicity"] * excess * x
    if stars.overtone is not None:
        mean = mean + np.where(stars.overtone, truth["overtone_offset"], 0.0)
    for name in relation.zero_points:
        inside = belongs(ladder, stars, ladder.choices.groups[name])
        mean = mean + np.where(inside, truth[with_group("zero_point_offset", name)], 0.0)
    for name in relation.slopes:
        inside = belongs(ladder, stars, ladder.choices.groups[name])
        mean = mean + np.where(inside, truth[with_group("slope_offset", name)] * x, 0.0)
    return np.asarray(mean)


def scatter_of(ladder: Ladder, stars: StarSample, truth: Mapping[str, float]) -> FloatArray:
    """Intrinsic scatter of each star [mag], shape (n,)."""
    return np.array([truth[name] for name in _star_scatters(ladder, stars)])


def has_populations(ladder: Ladder, stars: StarSample) -> bool:
    """Whether true metallicities come from a population in each host."""
    metallicity = ladder.choices.relation.metallicity
    met = metallicity != "none" and metallicity.errors == "population"
    return met and stars.metallicity_error is not None


def has_input_errors(ladder: Ladder, stars: StarSample) -> bool:
    """Whether true periods or metallicities differ from the measured ones."""
    metallicity = ladder.choices.relation.metallicity
    met = metallicity != "none" and metallicity.errors != "ignored"
    return stars.log_period_error is not None or (met and stars.metallicity_error is not None)


def stars_again(ladder: Ladder, stars: StarSample, truth: Mapping[str, float], rng: Rng) -> Stars:
    """True inputs drawn, and what they give.

    A true period scatters about the measured one, which stays.  Where metallicities have
    populations, the true one is drawn from its host's, about the mean of what was measured
    there, and measured again; where their errors are put into the variance, the true one
    scatters about the measured one.
    """
    period, measured = stars.log_period, stars.metallicity
    if stars.log_period_error is not None:
        period = period + stars.log_period_error * rng.normal(size=len(stars))
    true = measured
    relation = ladder.choices.relation
    if has_populations(ladder, stars) and stars.metallicity_error is not None:
        mean = _population_means(ladder, stars, truth)
        true = mean + truth["metallicity_spread"] * rng.normal(size=len(stars))
        measured = true + stars.metallicity_error * rng.normal(size=len(stars))
    elif (
        stars.metallicity_error is not None
        and relation.metallicity != "none"
        and relation.metallicity.errors == "in the variance"
    ):
        true = measured + stars.metallicity_error * rng.normal(size=len(stars))
    return Stars(absolute(ladder, stars, truth, period, true), measured)


def _along(ladder: Ladder, x: FloatArray, truth: Mapping[str, float]) -> FloatArray:
    """What the period alone adds: a line through the pivot, with another slope past the break."""
    period = ladder.choices.relation.break_
    if isinstance(period, str):
        return np.asarray(truth["slope"] * x)
    place = float(np.log10(period / ladder.choices.relation.pivot))
    below, beyond = truth["slope"], truth["slope_beyond"]
    at_break = (below if place > 0.0 else beyond) * place
    return np.asarray(at_break + np.where(x < place, below, beyond) * (x - place))


def _star_scatters(ladder: Ladder, stars: StarSample) -> list[str]:
    """Name of the scatter that each star has: of the first group it is in, or the common one."""
    names = ["scatter"] * len(stars)
    for group in reversed(ladder.choices.relation.scatter_groups):
        for place in np.flatnonzero(belongs(ladder, stars, ladder.choices.groups[group])):
            names[place] = with_group("scatter", group)
    return names


def _scatter_names(ladder: Ladder, stars: StarSample) -> dict[str, None]:
    return dict.fromkeys(sorted(_star_scatters(ladder, stars)))


def _population_means(ladder: Ladder, stars: StarSample, truth: Mapping[str, float]) -> FloatArray:
    relation = ladder.choices.relation
    if stars.parallax is not None and relation.metallicity != "none":
        reference = relation.metallicity.reference
        return np.full(len(stars), reference + truth["parallax_metallicity"])
    return np.array([stars.metallicity[stars.host == host].mean() for host in stars.host])
