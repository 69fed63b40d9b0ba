"""New objects put into a ladder that was fitted without them."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
from scipy.linalg import block_diag

from ladderfit.errors import Problem
from ladderfit.ladder import Ladder
from ladderfit.sample_arrays import joined, taken
from ladderfit.samples import FloatArray, StarSample


def together(ladder: Ladder, new: Ladder) -> Ladder:
    """A ladder with new objects in it, in hosts of their own or in hosts it has.

    Raises
    ------
    LadderfitError
        If the samples know different things of their objects.
    """
    hosts = (*ladder.hosts, *(host for host in new.hosts if host not in ladder.hosts))
    place = np.array([hosts.index(host) for host in new.hosts], dtype=np.int64)
    cepheids, peaks = ladder.cepheids, ladder.peaks
    if new.cepheids is not None:
        cepheids = _added(cepheids, replace(new.cepheids, host=place[new.cepheids.host]))
        cepheids = taken(cepheids, np.argsort(cepheids.host, kind="stable"))
    covariance = ladder.peak_covariance
    if new.peaks is not None:
        added = replace(new.peaks, host=place[new.peaks.host])
        covariance = _wider(covariance, 0 if peaks is None else len(peaks), added.variance)
        peaks = _added(peaks, added)
    return replace(ladder, hosts=hosts, cepheids=cepheids, peaks=peaks, peak_covariance=covariance)


def _added(old: Any, new: Any) -> Any:
    return new if old is None else joined(old, new)


def _wider(matrix: FloatArray | None, peaks: int, variance: FloatArray) -> FloatArray | None:
    """The covariance of peaks, then flow, with new independent peaks after the old ones."""
    if matrix is None:
        return None
    whole = block_diag(matrix, np.diag(variance))
    old, added = np.arange(len(matrix)), np.arange(len(matrix), len(whole))
    order = np.concatenate([old[:peaks], added, old[peaks:]])
    return np.asarray(whole[np.ix_(order, order)])


def repeated(old: Ladder, new: Ladder) -> list[Problem]:
    """Objects that are in the calibration already, and would count twice."""
    problems = []
    if old.cepheids is not None and new.cepheids is not None:
        before = set(_star_keys(old.cepheids, old.hosts))
        twice = [key for key in _star_keys(new.cepheids, new.hosts) if key in before]
        if twice and old.choices.cepheids is not None and "star" in old.choices.cepheids.columns:
            host, star = twice[0]
            problems.append(_twice(f"the star {star!r} of {host!r}", len(twice)))
    if new.peaks is not None:
        samples = [sample for sample in (old.peaks, old.flow) if sample is not None]
        before_names = {str(name) for sample in samples for name in sample.name}
        names = [str(name) for name in new.peaks.name if str(name) in before_names]
        if names:
            problems.append(_twice(f"the supernova {names[0]!r}", len(names)))
    return problems


def _star_keys(stars: StarSample, hosts: tuple[str, ...]) -> list[tuple[str, str]]:
    return [(hosts[h], str(star)) for h, star in zip(stars.host, stars.star, strict=True)]


def _twice(what: str, count: int) -> Problem:
    more = f" and {count - 1} more" if count > 1 else ""
    return Problem(
        found=f"{what}{more}, in the calibration already",
        expected="new objects, as each counts once",
        remedy="take them out of the new table, or calibrate without them",
    )
