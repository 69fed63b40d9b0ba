"""The rungs of a ladder on one axis of distance: segments, marks, overlaps; no widgets."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np

from ladderfit.checks.residuals import at_mean
from ladderfit.errors import InputError
from ladderfit.ladder import Ladder
from ladderfit.names import with_group
from ladderfit.result import Result
from ladderfit.samples import FloatArray

WORDS = {
    "anchors": "Anchors",
    "cepheids": "Cepheids in galaxies",
    "supernovae": "Supernovae in hosts",
    "expansion": "Expansion",
}
_PARSECS = 1.0  # log10 distance in pc = 0.2 mu + 1


@dataclass(frozen=True)
class Mark:
    """One object: log10 distance [pc], what it is, and whether it takes part."""

    place: float
    name: str
    kind: str
    used: bool


@dataclass(frozen=True)
class Rung:
    """A rung that is present, with its objects."""

    key: str
    words: str
    marks: tuple[Mark, ...]

    @property
    def ends(self) -> tuple[float, float]:
        """Nearest and farthest mark."""
        places = [mark.place for mark in self.marks]
        return min(places), max(places)


def rungs_present(ladder: Ladder) -> tuple[str, ...]:
    """Keys of the rungs that the choices have, near to far."""
    choices = ladder.choices
    present = {
        "anchors": bool(choices.anchors.geometric) or choices.anchors.parallaxes is not None,
        "cepheids": choices.cepheids is not None or choices.anchors.parallaxes is not None,
        "supernovae": choices.supernovae is not None,
        "expansion": choices.expansion is not None,
    }
    return tuple(key for key in WORDS if present[key])


def everything(ladder: Ladder) -> Ladder:
    """The ladder with every anchor in use, nothing set aside and no cut in period or redshift."""
    choices = ladder.choices
    changes: dict[str, Any] = {
        f'anchors.geometric."{name}".use': True for name in choices.anchors.geometric
    }
    if choices.cepheids is not None:
        changes["cepheids.set_aside"] = []
        changes["cepheids.periods"] = None
    if choices.anchors.parallaxes is not None:
        changes["anchors.parallaxes.use"] = True
        changes["anchors.parallaxes.set_aside"] = []
        changes["anchors.parallaxes.periods"] = None
    if choices.supernovae is not None:
        changes["supernovae.set_aside"] = []
    if choices.expansion is not None and choices.expansion.table is not None:
        changes["expansion.set_aside"] = []
        changes["expansion.redshifts"] = [0.0, 10.0]
    try:
        return ladder.change(changes)
    except InputError:
        return ladder


def rungs(ladder: Ladder, every: Ladder, result: Result) -> list[Rung]:
    """The rungs that have objects, with every object placed by the posterior mean.

    Parameters
    ----------
    ladder : Ladder
        The choices in force.
    every : Ladder
        From `everything`: what is in it and not in `ladder` is off.
    result : Result
        Places objects; one that it does not know gets no mark.
    """
    found = [
        Rung(
            "anchors",
            WORDS["anchors"],
            (*_parallaxes(ladder, every, result), *_anchors(ladder, result)),
        ),
        Rung("cepheids", WORDS["cepheids"], _hosts(ladder, every, result)),
        Rung("supernovae", WORDS["supernovae"], _peaks(ladder, every, result)),
        Rung("expansion", WORDS["expansion"], _flow(ladder, every, result)),
    ]
    return [rung for rung in found if rung.marks]


def _log_distance(modulus: FloatArray) -> FloatArray:
    return np.asarray(0.2 * modulus + _PARSECS)


def _modulus(result: Result, host: str) -> float | None:
    name = with_group("modulus", host)
    return at_mean(result, name) if name in result.draws else None


def _parallaxes(ladder: Ladder, every: Ladder, result: Result) -> tuple[Mark, ...]:
    stars = every.parallax_stars
    if stars is None or stars.parallax is None:
        return ()
    pivot = np.log10(every.choices.relation.pivot)
    bright = at_mean(result, "zero_point") + at_mean(result, "slope") * (stars.log_period - pivot)
    place = _log_distance(stars.magnitude - bright)
    own = ladder.parallax_stars
    used = np.zeros(len(stars), bool) if own is None else np.isin(stars.row, own.row)
    return tuple(
        Mark(float(p), str(name), "star", bool(u))
        for p, name, u in zip(place, stars.star, used, strict=True)
    )


def _anchors(ladder: Ladder, result: Result) -> tuple[Mark, ...]:
    in_use = {anchor.name for anchor in ladder.geometric}
    return tuple(
        Mark(0.2 * anchor.modulus + _PARSECS, name, "anchor", name in in_use)
        for name, anchor in ladder.choices.anchors.geometric.items()
    )


def _hosts(ladder: Ladder, every: Ladder, result: Result) -> tuple[Mark, ...]:
    stars = every.cepheids
    if stars is None:
        return ()
    marks = []
    for host in (every.hosts[index] for index in np.unique(stars.host)):
        modulus = _modulus(result, host)
        if modulus is not None:
            marks.append(Mark(0.2 * modulus + _PARSECS, host, "host", host in ladder.hosts))
    return tuple(marks)


def _peaks(ladder: Ladder, every: Ladder, result: Result) -> tuple[Mark, ...]:
    peaks = every.peaks
    if peaks is None:
        return ()
    own = set() if ladder.peaks is None else set(ladder.peaks.row.tolist())
    marks = []
    for name, index, row in zip(peaks.name, peaks.host, peaks.row, strict=True):
        modulus = _modulus(result, every.hosts[index])
        if modulus is not None:
            marks.append(Mark(0.2 * modulus + _PARSECS, str(name), "supernova", int(row) in own))
    return tuple(marks)


def _flow(ladder: Ladder, every: Ladder, result: Result) -> tuple[Mark, ...]:
    if every.velocities is not None:
        sample, own_sample = every.velocities, ladder.velocities
        place = np.log10(np.maximum(sample.distance, 1e-6)) + 6.0
        names, rows = sample.name, sample.row
        own = set() if own_sample is None else set(own_sample.row.tolist())
    elif every.flow is not None:
        peak = at_mean(result, "peak_magnitude")
        place = _log_distance(every.flow.magnitude - peak)
        names, rows = every.flow.name, every.flow.row
        own = set() if ladder.flow is None else set(ladder.flow.row.tolist())
    else:
        return ()
    return tuple(
        Mark(float(p), str(name), "supernova", int(row) in own)
        for p, name, row in zip(place, names, rows, strict=True)
    )


def overlaps(found: list[Rung]) -> list[tuple[float, float]]:
    """Stretches of log10 distance [pc] that two neighbouring rungs share."""
    shared = []
    for near, far in pairwise(found):
        low, high = max(near.ends[0], far.ends[0]), min(near.ends[1], far.ends[1])
        if low < high:
            shared.append((low, high))
    return shared
