"""Ladders resampled together: what several share is drawn once for all of them.

The units are objects: Cepheids within their host, parallax stars (or clusters of
them), supernovae in hosts, supernovae in the expansion, each drawn with
replacement from all that any of the ladders uses (Efron 1979, Annals of Statistics
7, 1).  An object that several ladders use comes as often in each.  Data that stand
alone, geometric moduli and a published intercept, are moved by their stated errors
instead, by as much in every ladder that uses them.  Supernovae with one covariance
that all the ladders share are drawn anew round their model.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Hashable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, cast

import numpy as np

from ladderfit.checks.residuals import at_mean, flow_residuals, peak_residuals
from ladderfit.ladder import Ladder
from ladderfit.result import Result
from ladderfit.sample_arrays import taken
from ladderfit.samples import FloatArray, StarSample, frozen

_TRIES = 200
FEW = 5  # objects in a host below which its own noise is understated
SAMPLES = {
    "cepheids": "Cepheids",
    "parallax_stars": "parallax stars",
    "peaks": "supernovae in hosts",
    "flow": "supernovae in the expansion",
    "velocities": "objects with velocities",
}
_SECTIONS = {
    "cepheids": "cepheids",
    "parallax_stars": "anchors.parallaxes",
    "peaks": "supernovae",
    "flow": "expansion",
    "velocities": "expansion",
}

Unit = Hashable


@dataclass(frozen=True, eq=False)
class Objects:
    """The objects of one sample of one ladder.

    Attributes
    ----------
    units : tuple, length n
        What each row is; rows of one unit stay together.
    strata : tuple, length n
        Within which units are drawn.
    """

    units: tuple[Unit, ...]
    strata: tuple[Hashable, ...]


def objects_of(ladder: Ladder, kind: str) -> Objects | None:
    """The objects of a sample, known again in other ladders by host and name.

    Stars without names of their own are known by the table and the row.
    """
    sample: Any = getattr(ladder, kind)
    if sample is None:
        return None
    size = len(sample)
    strata: tuple[Hashable, ...] = (kind,) * size
    names: list[Unit] = [str(name) for name in getattr(sample, "star", getattr(sample, "name", ()))]
    if isinstance(sample, StarSample):
        if not _named(ladder, kind):
            sha256 = ladder.sources[_SECTIONS[kind]].sha256
            names = [(sha256, int(row)) for row in sample.row]
        cluster = sample.extras.cluster
        if cluster is not None:
            labels = sample.extras.clusters
            names = [
                ("cluster", labels[c]) if c >= 0 else name
                for c, name in zip(cluster, names, strict=True)
            ]
        if kind == "cepheids":
            strata = tuple(ladder.hosts[host] for host in sample.host)
            names = list(zip(strata, names, strict=True))
    return Objects(tuple(names), strata)


def _named(ladder: Ladder, kind: str) -> bool:
    choices = ladder.choices
    section = choices.cepheids if kind == "cepheids" else choices.anchors.parallaxes
    return section is not None and "star" in section.columns


@dataclass(frozen=True, eq=False)
class Noise:
    """Model of correlated peaks [mag] and the lower factor of their covariance, scatter in it."""

    model: FloatArray
    factor: FloatArray


@dataclass(frozen=True, eq=False)
class Together:
    """Several ladders to be resampled as one; make with `resample_together`.

    Attributes
    ----------
    ladders : tuple of Ladder
    kinds : tuple of str
        Samples whose objects are drawn.
    noise : Noise or None
        Of supernovae with one covariance, drawn anew round their model.
    notes : tuple of str
        What a reader has to know about it.
    """

    ladders: tuple[Ladder, ...]
    kinds: tuple[str, ...]
    noise: Noise | None
    notes: tuple[str, ...]
    _objects: Mapping[str, tuple[Objects | None, ...]] = field(repr=False)

    def shared(self, kind: str) -> tuple[tuple[int, ...], int]:
        """How many objects each ladder has, and how many all of them have."""
        sets = [set(each.units) if each else set() for each in self._objects[kind]]
        return tuple(len(each) for each in sets), len(set.intersection(*sets))

    def resampled(self, rng: np.random.Generator) -> list[Ladder]:
        """Every ladder with the same objects drawn and the same errors thrown."""
        found = list(self.ladders)
        for kind in self.kinds:
            found = self._drawn(found, kind, rng)
        found = _moved_anchors(found, rng)
        found = _moved_intercepts(found, rng)
        return found if self.noise is None else _with_peaks(found, self.noise, rng)

    def _drawn(self, ladders: list[Ladder], kind: str, rng: np.random.Generator) -> list[Ladder]:
        objects = self._objects[kind]
        strata: dict[Hashable, dict[Unit, None]] = {}
        for each in objects:
            for unit, stratum in zip(*(each.units, each.strata), strict=True) if each else ():
                strata.setdefault(stratum, {})[unit] = None
        counts: dict[Unit, int] = {}
        for stratum, units in strata.items():
            inside = [
                {u for u, s in zip(each.units, each.strata, strict=True) if s == stratum}
                for each in objects
                if each is not None
            ]
            counts |= _counts(list(units), [each for each in inside if each], rng)
        return [
            ladder if each is None else _repeated(ladder, kind, each, counts)
            for ladder, each in zip(ladders, objects, strict=True)
        ]


def _counts(
    units: Sequence[Unit], needed: Sequence[set[Unit]], rng: np.random.Generator
) -> dict[Unit, int]:
    """How often each unit comes; drawn again until no ladder loses all of its own."""
    for _ in range(_TRIES):
        drawn = rng.multinomial(len(units), np.full(len(units), 1.0 / len(units)))
        counts = dict(zip(units, (int(count) for count in drawn), strict=True))
        if all(any(counts[unit] for unit in each) for each in needed):
            return counts
    return dict.fromkeys(units, 1)


def _repeated(ladder: Ladder, kind: str, objects: Objects, counts: Mapping[Unit, int]) -> Ladder:
    times = np.array([counts[unit] for unit in objects.units])
    rows = np.repeat(np.arange(len(times)), times)
    changes: dict[str, Any] = {kind: taken(getattr(ladder, kind), rows)}
    return dataclasses.replace(ladder, **changes)


def _moved_anchors(ladders: list[Ladder], rng: np.random.Generator) -> list[Ladder]:
    """Geometric moduli thrown by their errors, by as many errors wherever they are used."""
    names = sorted({anchor.name for ladder in ladders for anchor in ladder.geometric})
    shared = sorted({name for ladder in ladders for name in ladder.choices.anchors.shared_errors})
    own = dict(zip(names, rng.standard_normal(len(names)), strict=True))
    common = dict(zip(shared, rng.standard_normal(len(shared)), strict=True))
    return [_with_anchors(ladder, own, common) for ladder in ladders]


def _with_anchors(ladder: Ladder, own: Mapping[str, float], common: Mapping[str, float]) -> Ladder:
    thrown = np.array([own[anchor.name] for anchor in ladder.geometric])
    if ladder.anchor_covariance is not None:
        shift = np.linalg.cholesky(ladder.anchor_covariance) @ thrown
    else:
        shift = thrown * np.array([anchor.error for anchor in ladder.geometric])
    for name, error in ladder.choices.anchors.shared_errors.items():
        loads = np.array([error.loads.get(anchor.name, 0.0) for anchor in ladder.geometric])
        shift = shift + error.error * common[name] * loads
    geometric = tuple(
        dataclasses.replace(anchor, modulus=anchor.modulus + float(move))
        for anchor, move in zip(ladder.geometric, shift, strict=True)
    )
    return dataclasses.replace(ladder, geometric=geometric)


def _moved_intercepts(ladders: list[Ladder], rng: np.random.Generator) -> list[Ladder]:
    thrown = float(rng.standard_normal())
    found = []
    for ladder in ladders:
        expansion = ladder.choices.expansion
        if expansion is not None and expansion.intercept is not None:
            stated = expansion.intercept
            moved = dataclasses.replace(stated, value=stated.value + stated.error * thrown)
            expansion = dataclasses.replace(expansion, intercept=moved)
            choices = dataclasses.replace(ladder.choices, expansion=expansion)
            ladder = dataclasses.replace(ladder, choices=choices)
        found.append(ladder)
    return found


def _with_peaks(ladders: list[Ladder], noise: Noise, rng: np.random.Generator) -> list[Ladder]:
    """The same peaks, drawn anew, in every ladder."""
    peak = noise.model + noise.factor @ rng.standard_normal(len(noise.model))
    found = []
    for ladder in ladders:
        changes: dict[str, Any] = {}
        start = 0
        for kind in ("peaks", "flow"):
            sample = getattr(ladder, kind)
            if sample is not None:
                part = frozen(peak[start : start + len(sample)])
                changes[kind] = dataclasses.replace(sample, magnitude=part)
                start += len(sample)
        found.append(dataclasses.replace(ladder, **changes))
    return found


def _noise_of(result: Result) -> Noise:
    """Model and spread of correlated supernovae at the posterior mean."""
    parts = [peak_residuals(result), flow_residuals(result)]
    known = [(part, name) for part, name in zip(parts, result.choices.peak_scatters, strict=True)]
    scatter = [np.full(len(part), at_mean(result, name)) for part, name in known if part]
    matrix = cast("FloatArray", result.ladder.peak_covariance)
    whole = matrix + np.diag(np.concatenate(scatter) ** 2)
    factor = np.asarray(np.linalg.cholesky(whole), dtype=np.float64)
    return Noise(np.concatenate([part.model for part in parts if part is not None]), factor)


def resample_together(results: Sequence[Result]) -> Together | str:
    """Results ready to be resampled as one; or, in words, why that cannot be done.

    Parameters
    ----------
    results : sequence of Result
        Two or more, with their ladders.
    """
    ladders = tuple(result.ladder for result in results)
    correlated = any(ladder.peak_covariance is not None for ladder in ladders)
    if correlated and not _same_supernovae(ladders):
        return (
            "supernovae with a covariance, of which each result uses others: to draw single "
            "objects would lose what they share"
        )
    covariant = any(ladder.anchor_covariance is not None for ladder in ladders)
    if covariant and not _same_anchors(ladders):
        return "geometric anchors with a covariance, of which each result uses others"
    kinds = tuple(
        kind
        for kind in SAMPLES
        if not (correlated and kind in ("peaks", "flow"))
        and any(getattr(ladder, kind) is not None for ladder in ladders)
    )
    objects = {kind: tuple(objects_of(ladder, kind) for ladder in ladders) for kind in SAMPLES}
    notes = (*_small(ladders), *_two_values(ladders))
    noise = _noise_of(results[0]) if correlated else None
    return Together(ladders, kinds, noise, notes, objects)


def _same_supernovae(ladders: Sequence[Ladder]) -> bool:
    first = ladders[0]
    for ladder in ladders:
        if first.peak_covariance is None or ladder.peak_covariance is None:
            return False
        if not np.array_equal(first.peak_covariance, ladder.peak_covariance):
            return False
        for kind in ("peaks", "flow"):
            mine, theirs = getattr(ladder, kind), getattr(first, kind)
            if (mine is None) != (theirs is None):
                return False
            if mine is not None and not np.array_equal(mine.name, theirs.name):
                return False
    return True


def _same_anchors(ladders: Sequence[Ladder]) -> bool:
    first = ladders[0]
    names = [anchor.name for anchor in first.geometric]
    for ladder in ladders:
        matrix, other = ladder.anchor_covariance, first.anchor_covariance
        if matrix is None or other is None or not np.array_equal(matrix, other):
            return False
        if [anchor.name for anchor in ladder.geometric] != names:
            return False
    return True


def _small(ladders: Sequence[Ladder]) -> list[str]:
    """Hosts with too few Cepheids to be resampled well."""
    small: dict[str, None] = {}
    for ladder in ladders:
        if ladder.cepheids is not None:
            count = np.bincount(ladder.cepheids.host, minlength=len(ladder.hosts))
            small |= {h: None for h, n in zip(ladder.hosts, count, strict=True) if 0 < n < FEW}
    if not small:
        return []
    return [f"Fewer than {FEW} Cepheids, whose own noise is understated: {', '.join(small)}."]


def _two_values(ladders: Sequence[Ladder]) -> list[str]:
    """Anchors that the ladders give different moduli or errors."""
    values: dict[str, set[tuple[float, float]]] = {}
    for ladder in ladders:
        for anchor in ladder.geometric:
            values.setdefault(anchor.name, set()).add((anchor.modulus, anchor.error))
    return [
        f"{name}: two geometric moduli, taken as one measurement that errs alike in both."
        for name, found in values.items()
        if len(found) > 1
    ]
