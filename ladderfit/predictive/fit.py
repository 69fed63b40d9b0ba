"""How well a fit predicts each object from all the others, to compare relations.

The expected log predictive density is the sum over objects of the log density of
each one's data given all other data (Vehtari, Gelman & Gabry 2017, Stat. Comput. 27,
1413).  Everything Gaussian is integrated in closed form; phi is reweighted with
Pareto-smoothed weights (Vehtari et al. 2024, JMLR 25, 72), and the fit is drawn anew
where these are too heavy.  It needs no proper prior, unlike the evidence, but the same
data: models of different data predict different things.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from ladderfit.errors import LadderfitError
from ladderfit.influence import KINDS, leave_one_out
from ladderfit.influence.reweighting import NOT_TRUSTED
from ladderfit.influence.sets import CEPHEID, FLOW, HOST, PEAK, STAR, VELOCITY
from ladderfit.influence.table import Progress
from ladderfit.influence.without import Left, without
from ladderfit.ladder import Ladder
from ladderfit.posterior.errors_in_inputs import uses_population
from ladderfit.result import Result
from ladderfit.samples import FloatArray, StarSample

CLOSE = 4.0  # Sivula, Magnusson & Vehtari 2020 (arXiv:2008.10296): less is hardly a difference
_SAME = 1e-9


class DifferentDataError(LadderfitError):
    """Two fits cannot be compared by prediction; the message says where their data differ."""


@dataclass(frozen=True, eq=False, repr=False)
class PredictiveFit:
    """The leave-one-out predictive fit of one result.

    Attributes
    ----------
    result : Result
    objects : DataFrame
        One row per object: ``kind``, ``name``, ``host``, ``elpd`` and ``k``.
    """

    result: Result
    objects: pd.DataFrame

    def __repr__(self) -> str:
        """The sum with its standard error."""
        return f"<PredictiveFit: elpd {self.elpd:.1f} +- {self.error:.1f}, {len(self.objects):,}>"

    @property
    def elpd(self) -> float:
        """Sum over all objects; larger is better."""
        return float(self.objects["elpd"].sum())

    @property
    def error(self) -> float:
        """Standard error of the sum, from the spread of its terms."""
        return _error(self.objects["elpd"].to_numpy())

    @property
    def trusted(self) -> bool:
        """Whether every term is to be trusted."""
        return not bool((self.objects["how"] == NOT_TRUSTED).any())


@dataclass(frozen=True)
class PredictiveDifference:
    """The difference of two predictive fits to the same data.

    Attributes
    ----------
    difference, error : float
        First minus second, and the standard error of that from paired terms.
    objects : int
    trusted : bool
        Whether all terms of both are to be trusted.
    """

    difference: float
    error: float
    objects: int
    trusted: bool

    def __str__(self) -> str:
        """The verdict in a sentence."""
        size, better = abs(self.difference), "first" if self.difference > 0.0 else "second"
        number = f"{size:.1f} +- {self.error:.1f} over {self.objects:,} objects"
        if size < CLOSE:
            text = f"The two predict alike: log predictive densities differ by {number}."
        elif size < 2.0 * self.error:
            text = f"The {better} predicts better by {number}, which chance may well make."
        else:
            text = f"The {better} predicts better by {number} ({size / self.error:.1f} of them)."
        if not self.trusted:
            text += " Some weights are too heavy to trust."
        return text


def predictive_fit(result: Result, *, progress: Progress | None = None) -> PredictiveFit:
    """Predict every Cepheid, parallax star and supernova from all the others.

    Parameters
    ----------
    result : Result
        With its ladder.
    progress : callable, optional
        Told the kind at work and the fraction done.

    Raises
    ------
    NotCoveredError
        If the ladder has terms that leaving one out does not cover.
    LadderfitError
        If the result's tables are missing.
    """
    kinds = [kind for kind in KINDS if kind != HOST]
    found = leave_one_out(result, kinds=kinds, targets=(), progress=progress)
    return PredictiveFit(result, found.table[["kind", "name", "host", "how", "k", "elpd"]])


def compare_fits(first: PredictiveFit, second: PredictiveFit) -> PredictiveDifference:
    """The difference of two fits to the same data, with its standard error.

    Parameters
    ----------
    first, second : PredictiveFit

    Raises
    ------
    DifferentDataError
        If the two predict different data: other objects, other magnitudes or
        parallaxes of them, or metallicities as data in one alone.
    """
    reason = next(differing(first.result.ladder, second.result.ladder), None)
    if reason is not None:
        raise DifferentDataError(f"these fits are of different data, and not compared: {reason}")
    terms = (first.objects["elpd"] - second.objects["elpd"]).to_numpy()
    trusted = first.trusted and second.trusted
    return PredictiveDifference(float(terms.sum()), _error(terms), len(terms), trusted)


def on_same_objects(first: Ladder, second: Ladder) -> tuple[Ladder, Ladder]:
    """Both ladders cut down to the objects that take part in both, to be compared.

    A choice may let other objects in (stars without a metallicity, say, where the
    relation has no such term).  The cut ladders are for drawing: their choices do not
    say what was left out.

    Parameters
    ----------
    first, second : Ladder

    Returns
    -------
    two Ladders
    """
    cuts: list[dict[str, Any]] = [{}, {}]
    for name in ("cepheids", "parallax_stars", "peaks", "flow", "velocities"):
        one, other = getattr(first, name), getattr(second, name)
        if one is None or other is None:
            continue
        labels = [_names(one), _names(other)]
        for cut, own, others in zip(cuts, labels, reversed(labels), strict=True):
            known = set(others)
            strange = [place for place, label in enumerate(own) if label not in known]
            cut[name] = np.array(strange, dtype=np.int64)
    return without(first, Left(**cuts[0])), without(second, Left(**cuts[1]))


def differing(first: Ladder, second: Ladder) -> Iterator[str]:
    """Where the data of two ladders differ, in words, one after another."""
    kinds: dict[str, tuple[str, tuple[str, ...]]] = {
        CEPHEID: ("cepheids", ("host", "magnitude")),
        STAR: ("parallax_stars", ("magnitude", "parallax")),
        PEAK: ("peaks", ("host", "magnitude")),
        FLOW: ("flow", ("magnitude", "redshift")),
        VELOCITY: ("velocities", ("velocity", "distance")),
    }
    if first.hosts != second.hosts:
        yield "their hosts differ"
    for kind, (name, measured) in kinds.items():
        one, other = getattr(first, name), getattr(second, name)
        if (one is None) != (other is None):
            yield f"objects of kind {kind!r} take part in one of them only"
        elif one is not None:
            yield from _differing_samples(kind, one, other, measured)
    for kind, name in ((CEPHEID, "cepheids"), (STAR, "parallax_stars")):
        stars: tuple[StarSample | None, ...] = getattr(first, name), getattr(second, name)
        if uses_population(first, stars[0]) != uses_population(second, stars[1]):
            yield f"metallicities of objects of kind {kind!r} are data in one of them only"
    yield from _differing_anchors(first, second)


def _differing_samples(
    kind: str, one: object, other: object, measured: tuple[str, ...]
) -> Iterator[str]:
    names = [_names(sample) for sample in (one, other)]
    if names[0] != names[1]:
        left, right = (set(each) for each in names)
        count = len(left ^ right)
        example = min(left ^ right, default=("", 0))[0]
        yield (
            f"{count:,} objects of kind {kind!r} ({example!r}, say) take part in one of them "
            "only; on_same_objects leaves these out"
            if count
            else f"objects of kind {kind!r} are in another order"
        )
        return
    for quantity in measured:
        a, b = (np.asarray(getattr(sample, quantity)) for sample in (one, other))
        if not np.allclose(a, b, rtol=_SAME, atol=_SAME):
            moved = int(np.sum(~np.isclose(a, b, rtol=_SAME, atol=_SAME)))
            yield f"the {quantity} of {moved:,} objects of kind {kind!r} is another"


def _names(sample: object) -> list[tuple[str, int]]:
    names = getattr(sample, "star", None)
    names = getattr(sample, "name", None) if names is None else names
    return list(zip(np.asarray(names).tolist(), _rows(sample), strict=True))


def _rows(sample: object) -> list[int]:
    rows: list[int] = np.asarray(getattr(sample, "row", ())).tolist()
    return rows


def _differing_anchors(first: Ladder, second: Ladder) -> Iterator[str]:
    """Anchors are data too: what is predicted is given them."""
    mine, theirs = (
        {anchor.name: (anchor.modulus, anchor.error) for anchor in ladder.geometric}
        for ladder in (first, second)
    )
    for name in dict.fromkeys([*mine, *theirs]):
        if mine.get(name) != theirs.get(name):
            yield f"the anchor {name} is not the same in both"
            return


def _error(terms: FloatArray) -> float:
    return float(np.sqrt(len(terms) * np.var(terms, ddof=1))) if len(terms) > 1 else float("nan")
