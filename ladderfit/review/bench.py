"""One table on the bench: selections of its stars, refits of each, every fit made once."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np

from ladderfit.errors import LadderfitError
from ladderfit.ladder import Ladder
from ladderfit.result import Result
from ladderfit.review.claims import OF_THE_RELATION, Claim, Method
from ladderfit.review.fits import Fit, Treatment, fit
from ladderfit.review.joint import (
    NO_THIRD_RUNG,
    joint_changes,
    number_claimed,
    posterior_values,
)
from ladderfit.review.resampling import Estimate, Resampling, Wanted
from ladderfit.review.selection import EVERY_PERIOD, Selection, terms
from ladderfit.review.system import STARS, System, linear_system, objects
from ladderfit.samples import BoolArray, StarSample
from ladderfit.sampling.run import draw

_ON_THE_LINE = ("slope", "zero_point")  # which depend on the terms of the relation
_THIRD_RUNG = ("peak_magnitude", "hubble_constant")


class Bench:
    """A ladder opened for review: no period cut, both modes at hand.

    Parameters
    ----------
    ladder : Ladder
    seed : int
    draws : int
        Of a joint fit; 0 leaves the joint fits out.
    """

    def __init__(self, ladder: Ladder, *, seed: int = 1, draws: int = 2000) -> None:
        self.ladder = ladder
        self.seed, self.draws = seed, draws
        self.opened = ladder.change(_opening(ladder))
        self._systems: dict[tuple[Any, ...], System] = {}
        self._ladders: dict[tuple[Any, ...], Ladder] = {}
        self._fits: dict[tuple[Selection, Treatment], Fit | LadderfitError] = {}
        self._results: dict[tuple[Any, ...], Result | LadderfitError] = {}
        self._resampling: Resampling | None = None

    @property
    def stars(self) -> StarSample | None:
        """The Cepheids before any cut of the paper."""
        return self.opened.cepheids

    @property
    def overtone(self) -> BoolArray | None:
        """Which of them pulsate in the first overtone; None where the table does not tell."""
        return None if self.stars is None else self.stars.overtone

    def described(self, method: Method) -> Selection:
        """The selection that a paper describes; what it does not state is not cut."""
        mode = method.mode
        if mode is None:
            cepheids = self.ladder.choices.cepheids
            drops = cepheids is not None and cepheids.overtones == "drop"
            mode = "fundamental" if drops and self.overtone is not None else "both"
        relation = self.ladder.choices.relation
        in_file = None if isinstance(relation.break_, str) else relation.break_
        has_term = relation.metallicity != "none"
        return Selection(
            periods=method.periods or EVERY_PERIOD,
            mode=mode,
            hosts=method.hosts,
            parallax_stars=not method.hosts
            if method.parallax_stars is None
            else method.parallax_stars,
            set_aside=method.set_aside,
            break_=method.break_ if method.break_ is not None else in_file,
            metallicity=has_term if method.metallicity is None else method.metallicity,
            fixed=tuple(sorted(method.fixed.items())),
        )

    def system(self, chosen: Selection) -> System:
        """All rows, with the terms of a selection."""
        key = (chosen.break_, chosen.metallicity)
        if key not in self._systems:
            self._systems[key] = linear_system(self._with_terms(chosen))
        return self._systems[key]

    def _with_terms(self, chosen: Selection) -> Ladder:
        changes = terms(chosen)
        relation = self.opened.choices.relation
        same = (relation.break_, relation.metallicity != "none") == (
            changes["relation.break"],
            chosen.metallicity,
        )
        if chosen.metallicity and relation.metallicity == "none":
            raise LadderfitError("the ladder file has no metallicity term")
        key = (chosen.break_, chosen.metallicity)
        if key not in self._ladders:
            self._ladders[key] = self.opened if same else self.opened.change(changes)
        return self._ladders[key]

    def sample(self, chosen: Selection) -> StarSample | None:
        """The Cepheids, with the terms of a selection: without a metallicity none needs one."""
        return self._with_terms(chosen).cepheids

    def rows(self, chosen: Selection) -> BoolArray:
        """Which rows of the system take part."""
        system = self.system(chosen)
        taken = np.ones(len(system.y), bool)
        stars = self.sample(chosen)
        if stars is None:
            return taken
        if not chosen.parallax_stars:
            taken[len(stars) :] = system.group[len(stars) :] != STARS
        inside = taken[: len(stars)]
        period = 10.0**stars.log_period
        low, high = chosen.periods
        inside &= (period >= low * (1.0 - 1e-12)) & (period <= high * (1.0 + 1e-12))
        if stars.overtone is not None and chosen.mode != "both":
            inside &= stars.overtone == (chosen.mode == "overtone")
        names = np.array(self._with_terms(chosen).hosts)
        if chosen.hosts:
            inside &= np.isin(names[stars.host], chosen.hosts)
        if chosen.without is not None:
            inside &= names[stars.host] != chosen.without
        if chosen.set_aside:
            inside &= ~np.isin(stars.star, chosen.set_aside)
        return taken

    def fit(self, chosen: Selection, treatment: Treatment) -> Fit:
        """A least-squares fit.

        Raises
        ------
        LadderfitError
            If the rows determine nothing, or the clip does not settle.
        """
        key = (chosen, treatment)
        if key not in self._fits:
            try:
                system = self.system(chosen)
                rows = self.rows(chosen)
                if not np.any(rows & (system.group == STARS)) and np.any(system.group == STARS):
                    raise LadderfitError("no star is left")
                self._fits[key] = fit(system.rows(rows).held(dict(chosen.fixed)), treatment)
            except LadderfitError as error:
                self._fits[key] = error
        found = self._fits[key]
        if isinstance(found, LadderfitError):
            raise found
        return found

    @property
    def resampling(self) -> Resampling:
        """The random weights, the same for every fit of this bench."""
        if self._resampling is None:
            self._resampling = Resampling(objects(self.opened), self.seed)
        return self._resampling

    def estimate(self, chosen: Selection, treatment: Treatment, claim: Claim) -> Estimate | None:
        """The number that a claim is about; None where the rows do not determine it."""
        if not len(self.system(chosen).y):
            return None
        found = self.fit(chosen, treatment)
        return self.resampling.estimate(found, self.wanted(claim, chosen))

    def wanted(self, claim: Claim, chosen: Selection, pivot: float | None = None) -> Wanted:
        """What a claim is about, as a sum of coefficients; `pivot` in place of its own."""
        choices = self._with_terms(chosen).choices if claim.quantity in _ON_THE_LINE else None
        return number_claimed(
            claim,
            choices or self.opened.choices,
            self.opened.hosts,
            overtone=chosen.mode == "overtone",
            pivot=pivot,
        )

    def joint(self, chosen: Selection, clip: float | None, *, alone: bool = False) -> Result:
        """The joint posterior of a selection, stars beyond the clip of least squares set aside.

        Parameters
        ----------
        chosen : Selection
        clip : float or None
        alone : bool
            Whether the supernovae are left out, as for a relation of a few hosts.

        Raises
        ------
        LadderfitError
            If it cannot be drawn.
        """
        treatment = Treatment(clip=clip)
        key = (chosen, treatment, alone)
        if key not in self._results:
            try:
                sample = None if self.sample(chosen) is None else self._left(chosen, treatment)
                changes = joint_changes(self.opened, chosen, sample)
                ladder = self.opened.change(changes | (NO_THIRD_RUNG if alone else {}))
                self._results[key] = draw(ladder, seed=self.seed, draws=self.draws)
            except LadderfitError as error:
                self._results[key] = error
        found = self._results[key]
        if isinstance(found, LadderfitError):
            raise found
        return found

    def _left(self, chosen: Selection, treatment: Treatment) -> tuple[Ladder, BoolArray]:
        """The ladder with the terms of a selection, and the Cepheids that a fit leaves."""
        ladder = self._with_terms(chosen)
        count = 0 if ladder.cepheids is None else len(ladder.cepheids)
        taken = self.rows(chosen)[:count].copy()
        if treatment.clip is not None:
            left = self.fit(chosen, treatment).used.row
            taken &= np.isin(self.system(chosen).row[:count], left)
        return ladder, taken

    @property
    def _scaled(self) -> bool:
        """Whether something sets the absolute scale, or none is needed."""
        anchored = bool(self.opened.geometric) or self.opened.parallax_stars is not None
        return anchored or self.stars is None

    def joint_estimate(
        self, chosen: Selection, clip: float | None, claim: Claim
    ) -> Estimate | None:
        """As `estimate`, from the joint posterior; its resampling is that of the weighted fit.

        Raises
        ------
        LadderfitError
            If the posterior cannot be drawn.
        """
        treatment = Treatment("errors and scatter", clip)
        near = self.estimate(chosen, treatment, claim)
        if near is None and (claim.quantity not in _THIRD_RUNG or not self._scaled):
            return None
        alone = bool(chosen.hosts) and claim.quantity in OF_THE_RELATION
        result = self.joint(chosen, clip, alone=alone)
        values = posterior_values(result, self.wanted(claim, chosen))
        if values is None:
            return None
        samples = (result.ladder.cepheids, result.ladder.parallax_stars)
        count = sum(len(sample) for sample in samples if sample is not None)
        nothing = np.zeros(0)
        made = Estimate(float(np.mean(values)), float(np.std(values)), 0.0, count, nothing, nothing)
        if near is None:
            return replace(made, spread=made.error)
        return replace(made, spread=near.spread, gaps=near.gaps, deviations=near.deviations)


def _opening(ladder: Ladder) -> Mapping[str, Any]:
    """Changes that take the file's own cuts off the Cepheids."""
    cepheids = ladder.choices.cepheids
    if cepheids is None:
        return {}
    changes: dict[str, Any] = {"cepheids.periods": list(EVERY_PERIOD)}
    if cepheids.overtones == "drop" and "mode" in cepheids.columns:
        changes["cepheids.overtones"] = "offset"
    return changes
