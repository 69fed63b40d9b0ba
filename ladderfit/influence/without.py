"""The same ladder without some of its objects, for exact refits.

The samples are cut directly, whatever the tables call their rows; the choices do
not say so.  Such a ladder is for drawing, not for keeping.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, fields, is_dataclass, replace
from typing import Any, TypeVar

import numpy as np

from ladderfit.ladder import Ladder
from ladderfit.samples import BoolArray, IntArray

S = TypeVar("S")


def _nobody() -> IntArray:
    return np.empty(0, dtype=np.int64)


@dataclass(frozen=True, eq=False)
class Left:
    """What is left out, as places in the samples; `host` is a whole host, or -1.

    With a host go its Cepheids, its supernovae and its anchor.
    """

    cepheids: IntArray = field(default_factory=_nobody)
    parallax_stars: IntArray = field(default_factory=_nobody)
    peaks: IntArray = field(default_factory=_nobody)
    flow: IntArray = field(default_factory=_nobody)
    velocities: IntArray = field(default_factory=_nobody)
    host: int = -1


def without(ladder: Ladder, left: Left) -> Ladder:
    """A ladder with these objects left out; hosts that lose all their objects go too.

    Parameters
    ----------
    ladder : Ladder
    left : Left
    """
    sizes: Mapping[str, Any] = {
        "cepheids": ladder.cepheids,
        "parallax_stars": ladder.parallax_stars,
        "peaks": ladder.peaks,
        "flow": ladder.flow,
        "velocities": ladder.velocities,
    }
    stays: dict[str, BoolArray] = {}
    for name, sample in sizes.items():
        stay = np.ones(0 if sample is None else len(sample), dtype=bool)
        stay[getattr(left, name)] = False
        if left.host >= 0 and name in ("cepheids", "peaks") and sample is not None:
            stay &= sample.host != left.host
        stays[name] = stay
    covariance, single = ladder.peak_covariance, ladder.peak_single
    together = np.concatenate([stays["peaks"], stays["flow"]])
    if covariance is not None:
        covariance = covariance[np.ix_(together, together)]
    if single is not None:
        single = single[together]
    samples: dict[str, Any] = {
        name: None if sample is None or not stays[name].any() else taken(sample, stays[name])
        for name, sample in sizes.items()
    }
    cut = replace(ladder, peak_covariance=covariance, peak_single=single, **samples)
    return _renumbered(cut, left.host)


def taken(sample: S, stay: BoolArray) -> S:
    """The rows of a sample under a mask; every array of one entry per row is cut."""
    cut: dict[str, Any] = {}
    for entry in fields(sample):  # type: ignore[arg-type]
        value = getattr(sample, entry.name)
        if isinstance(value, Mapping):
            cut[entry.name] = {key: _part(each, stay) for key, each in value.items()}
        elif is_dataclass(value) and not isinstance(value, type):
            cut[entry.name] = taken(value, stay)
        else:
            cut[entry.name] = _part(value, stay)
    return replace(sample, **cut)  # type: ignore[type-var]


def _part(value: Any, stay: BoolArray) -> Any:
    per_row = isinstance(value, np.ndarray) and value.ndim and len(value) == len(stay)
    return value[stay] if per_row else value


def _renumbered(ladder: Ladder, gone: int) -> Ladder:
    """Only the hosts that still have a Cepheid, a supernova or an anchor, and not `gone`."""
    inhabited = np.zeros(len(ladder.hosts), dtype=bool)
    inhabited[[anchor.host for anchor in ladder.geometric if anchor.host != gone]] = True
    for sample in (ladder.cepheids, ladder.peaks):
        if sample is not None:
            inhabited[sample.host] = True
    number = np.cumsum(inhabited) - 1
    changes: dict[str, Any] = {
        name: replace(sample, host=number[sample.host])
        for name, sample in (("cepheids", ladder.cepheids), ("peaks", ladder.peaks))
        if sample is not None
    }
    used = np.array([bool(inhabited[anchor.host]) for anchor in ladder.geometric], dtype=bool)
    anchors = tuple(
        replace(anchor, host=int(number[anchor.host]))
        for anchor in ladder.geometric
        if inhabited[anchor.host]
    )
    covariance = ladder.anchor_covariance
    if covariance is not None:
        covariance = covariance[np.ix_(used, used)] if anchors else None
    hosts = tuple(np.array(ladder.hosts, dtype=object)[inhabited].tolist())
    return replace(ladder, hosts=hosts, geometric=anchors, anchor_covariance=covariance, **changes)
