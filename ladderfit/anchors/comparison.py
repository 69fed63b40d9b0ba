"""Anchors against each other: each alone, each left out, all free of one another."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd

from ladderfit.anchors.tension import (
    PARALLAXES,
    NoTensionError,
    Tension,
    free_name,
    switched,
    tension,
    with_own_zero_points,
)
from ladderfit.anchors.weights import anchor_weights
from ladderfit.errors import InputError, LadderfitError, UndeterminedError
from ladderfit.ladder import Ladder
from ladderfit.names import parameter, with_group
from ladderfit.result import Result
from ladderfit.sampling.run import draw

SPREAD = 0.1  # mag: prior of a zero point free per anchor
FOLLOWED = ("zero_point", "slope", "peak_magnitude", "hubble_constant")
DISAGREES = 3.0  # standard deviations worth a word of warning
Progress = Callable[[str, float], None]


@dataclass(frozen=True, eq=False)
class AnchorCase:
    """What one anchor does.

    Attributes
    ----------
    anchor : str
    in_use : bool
        In the ladder compared.
    alone, without : Result or None
        The ladder with this anchor alone, and without it.
    tension : Tension or None
    weight : float
        Its share of the zero point; NaN where it has none.
    own_offset : tuple of float or None
        Mean and standard deviation of its own zero point less the common one, where
        each anchor has one [mag].
    notes : tuple of str
        Why something is missing.
    """

    anchor: str
    in_use: bool
    alone: Result | None
    without: Result | None
    tension: Tension | None
    weight: float
    own_offset: tuple[float, float] | None
    notes: tuple[str, ...]


@dataclass(frozen=True, eq=False, repr=False)
class AnchorComparison:
    """All anchors of a ladder against each other.

    Attributes
    ----------
    base : Result
        With the anchors as they are.
    cases : tuple of AnchorCase
    free : Result or None
        With a zero point free for each anchor; None where there is nothing to free.
    spread : float
        Prior standard deviation of each free zero point about the common one [mag].
    notes : tuple of str
        Why there is no `free`.
    """

    base: Result
    cases: tuple[AnchorCase, ...]
    free: Result | None
    spread: float
    notes: tuple[str, ...] = ()

    def __repr__(self) -> str:
        """The anchors; `table` has the numbers."""
        return f"<AnchorComparison of {', '.join(case.anchor for case in self.cases)}>"

    @property
    def followed(self) -> tuple[str, ...]:
        """Parameters in the table."""
        draws = self.base.draws
        return tuple(name for name in FOLLOWED if name in draws and self.base.sd(name) > 0.0)

    def table(self) -> pd.DataFrame:
        """One row per anchor; NaN where there is no such number.

        Returns
        -------
        DataFrame
            ``in_use``, ``weight``; ``tension`` (standard deviations), ``probability``,
            ``difference`` and ``difference_sd`` [mag]; ``own_offset`` and
            ``own_offset_sd`` [mag]; and for every followed parameter ``NAME_alone``,
            ``NAME_alone_sd``, ``NAME_without``, ``NAME_without_sd`` and
            ``NAME_without_in_errors`` (the change in units of the base's error).
        """
        return pd.DataFrame.from_dict(
            {case.anchor: dict(self._cells(case)) for case in self.cases}, orient="index"
        )

    def _cells(self, case: AnchorCase) -> Iterator[tuple[str, object]]:
        nan, tense = float("nan"), case.tension
        yield "in_use", case.in_use
        yield "weight", case.weight
        yield "tension", nan if tense is None else tense.deviations
        yield "probability", nan if tense is None else tense.probability
        yield "difference", nan if tense is None else tense.difference
        yield "difference_sd", nan if tense is None else tense.error
        yield "own_offset", nan if case.own_offset is None else case.own_offset[0]
        yield "own_offset_sd", nan if case.own_offset is None else case.own_offset[1]
        for name in self.followed:
            for words, result in (("alone", case.alone), ("without", case.without)):
                known = result is not None and name in result.draws
                yield f"{name}_{words}", result.mean(name) if known and result else nan
                yield f"{name}_{words}_sd", result.sd(name) if known and result else nan
            moved = nan
            if case.without is not None and name in case.without.draws:
                moved = (case.without.mean(name) - self.base.mean(name)) / self.base.sd(name)
            yield f"{name}_without_in_errors", moved

    def sentences(self) -> list[str]:
        """What the anchors say of each other, in words."""
        found = [str(case.tension) for case in self.cases if case.tension is not None]
        worst = max(
            (case.tension for case in self.cases if case.tension is not None),
            key=lambda each: each.deviations,
            default=None,
        )
        if worst is not None and worst.deviations >= DISAGREES:
            found.append(
                f"{worst.anchor[:1].upper()}{worst.anchor[1:]} and the other anchors disagree: "
                "a joint fit averages over an error that no term of the model describes."
            )
        found += [note for case in self.cases for note in case.notes]
        found += self.notes
        if self.free is not None and "hubble_constant" in self.followed:
            words, unit = parameter("hubble_constant").words, parameter("hubble_constant").unit
            found.append(
                f"With a zero point free for each anchor (prior {self.spread:g} mag) the {words} "
                f"is {self.free.mean('hubble_constant'):.2f} +- "
                f"{self.free.sd('hubble_constant'):.2f} {unit}, against "
                f"{self.base.mean('hubble_constant'):.2f} +- "
                f"{self.base.sd('hubble_constant'):.2f}."
            )
        return found


def anchor_names(ladder: Ladder) -> tuple[str, ...]:
    """Every anchor of a ladder whose host or table takes part, in use or not."""
    anchors = ladder.choices.anchors
    names = [name for name in anchors.geometric if name in ladder.hosts]
    return (*names, *((PARALLAXES,) if anchors.parallaxes is not None else ()))


def only_anchor(ladder: Ladder, anchor: str) -> Ladder:
    """The ladder with one anchor in use and no other."""
    for name in anchor_names(ladder):
        ladder = switched(ladder, name, use=True) if name == anchor else ladder
    for name in anchor_names(ladder):
        ladder = switched(ladder, name, use=False) if name != anchor else ladder
    return ladder


def free_zero_points(ladder: Ladder, spread: float = SPREAD) -> tuple[Ladder, dict[str, str]]:
    """The ladder with a zero point free for each anchor in use.

    The stars that an anchor fixes have a zero point of their own, with a normal prior
    about that of all other stars.  A large `spread` would leave the hosts of
    supernovae without a scale; a small one is the common zero point again.

    Parameters
    ----------
    ladder : Ladder
    spread : float
        Standard deviation of the prior [mag].

    Returns
    -------
    Ladder
    dict of str to str
        Group of every anchor that has stars of its own.
    """
    groups: dict[str, dict[str, object]] = {}
    named: dict[str, str] = {}
    populated = set() if ladder.cepheids is None else set(ladder.cepheids.host.tolist())
    for anchor in ladder.geometric:
        if anchor.host in populated:
            named[anchor.name] = free_name(ladder, f"anchor {anchor.name}")
            groups[named[anchor.name]] = {"hosts": [anchor.name]}
    if ladder.parallax_stars is not None:
        named[PARALLAXES] = free_name(ladder, "anchor parallaxes")
        groups[named[PARALLAXES]] = {"parallax_stars": True}
    return (with_own_zero_points(ladder, groups, spread) if groups else ladder), named


def compare_anchors(
    ladder: Ladder,
    *,
    base: Result | None = None,
    spread: float = SPREAD,
    seed: int | None = None,
    draws: int | None = None,
    progress: Progress | None = None,
) -> AnchorComparison:
    """Draw the ladder with each anchor alone, without each, and with all zero points free.

    Parameters
    ----------
    ladder : Ladder
    base : Result, optional
        Of this ladder, if it has been drawn.
    spread : float
        Prior standard deviation of the free zero points [mag].
    seed, draws : int, optional
        In place of the ladder's own.
    progress : callable, optional
        Told the anchor at work and the fraction done.

    Raises
    ------
    InputError
        If the ladder has no anchor in use.
    """
    names = anchor_names(ladder)
    base = draw(ladder, seed=seed, draws=draws) if base is None else base
    notes: list[str] = []
    free, offsets = _free(ladder, spread, seed, draws, notes)
    shared = anchor_weights(base)
    weights = {} if shared is None else shared.by_name()
    cases = []
    for place, name in enumerate(names):
        if progress is not None:
            progress(name, place / len(names))
        cases.append(_case(base, name, weights, offsets.get(name), seed, draws))
    if progress is not None:
        progress("anchors", 1.0)
    return AnchorComparison(base, tuple(cases), free, spread, tuple(notes))


def _case(
    base: Result,
    name: str,
    weights: dict[str, float],
    offset: tuple[float, float] | None,
    seed: int | None,
    draws: int | None,
) -> AnchorCase:
    ladder = base.ladder
    notes: list[str] = []
    used = switched(ladder, name, use=False) is not ladder
    without: Result | None = base
    if used:
        without = _drawn(switched(ladder, name, use=False), f"without {name}", seed, draws, notes)
    alone: Result | None = base
    lonely = only_anchor(ladder, name)
    if lonely is not ladder:
        alone = _drawn(lonely, f"with {name} alone", seed, draws, notes)
    tense = None
    if without is not None:
        try:
            tense = tension(ladder, name, without=without, seed=seed, draws=draws)
        except NoTensionError as error:
            notes.append(f"No tension of {name}: {error}.")
    weight = weights.get(name, float("nan"))
    return AnchorCase(name, used, alone, without, tense, weight, offset, tuple(notes))


def _drawn(
    ladder: Ladder, words: str, seed: int | None, draws: int | None, notes: list[str]
) -> Result | None:
    try:
        return draw(ladder, seed=seed, draws=draws)
    except UndeterminedError:
        notes.append(f"The distance scale is undetermined {words}.")
    except InputError as error:
        notes.append(f"Not drawn {words}: {error.problems[0]}")
    except LadderfitError as error:
        notes.append(f"Not drawn {words}: {error}")
    return None


def _free(
    ladder: Ladder, spread: float, seed: int | None, draws: int | None, notes: list[str]
) -> tuple[Result | None, dict[str, tuple[float, float]]]:
    freed, named = free_zero_points(ladder, spread)
    if not named:
        notes.append("No anchor has Cepheids of its own whose zero point could be free.")
        return None, {}
    result = _drawn(freed, "with a zero point free for each anchor", seed, draws, notes)
    if result is None:
        return None, {}
    offsets = {}
    for anchor, group in named.items():
        values = result.draws[with_group("zero_point_offset", group)]
        offsets[anchor] = (float(np.mean(values)), float(np.std(values, ddof=1)))
    return result, offsets
