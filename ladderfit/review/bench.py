"""One table on the bench: selections of its stars, refits of each, every fit made once."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from ladderfit import schema
from ladderfit.choices.columns import Range
from ladderfit.errors import LadderfitError
from ladderfit.ladder import Ladder
from ladderfit.names import base_name, with_group
from ladderfit.relations import design, scatters
from ladderfit.result import Result
from ladderfit.review.claims import Claim, Method, period_words
from ladderfit.review.fits import Fit, Treatment, fit
from ladderfit.review.resampling import Estimate, Resampling, Wanted
from ladderfit.review.system import HUBBLE, STARS, System, linear_system
from ladderfit.samples import BoolArray, StarSample
from ladderfit.sampling.run import draw

EVERY_PERIOD: Range = (0.0, float("inf"))
_WIDE = {"slope": {"normal": [-3.3, 5.0]}, "zero_point": {"normal": [-5.9, 10.0]}}
_STAND_IN = 10.0  # mag: modulus given to a host where nothing sets the scale


@dataclass(frozen=True)
class Selection:
    """Which stars take part, and which terms the relation has.

    Attributes
    ----------
    periods : (float, float)
        In d, ends included.
    mode : str
        ``fundamental``, ``overtone`` or ``both``.
    hosts : tuple of str
        Those that take part; empty is all.
    parallax_stars : bool
        Whether stars with parallaxes take part.
    without : str or None
        A host left out.
    set_aside : tuple of str
        Names of stars.
    break_ : float or None
        Period beyond which the slope is another [d].
    metallicity : bool
    fixed : tuple of (str, float)
        Coefficients held.
    """

    periods: Range = EVERY_PERIOD
    mode: str = "both"
    hosts: tuple[str, ...] = ()
    parallax_stars: bool = True
    without: str | None = None
    set_aside: tuple[str, ...] = ()
    break_: float | None = None
    metallicity: bool = False
    fixed: tuple[tuple[str, float], ...] = ()

    @property
    def words(self) -> str:
        """The selection in one phrase."""
        said = [period_words(self.periods)]
        if self.mode != "both":
            said.append(f"{self.mode} mode")
        if self.hosts:
            said.append("hosts " + ", ".join(self.hosts))
        if self.without:
            said.append(f"without {self.without}")
        if self.break_:
            said.append(f"break at {self.break_:g} d")
        return ", ".join(said)


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
        self._fits: dict[tuple[Selection, Treatment], Fit | LadderfitError] = {}
        self._results: dict[tuple[Selection, Treatment], Result | LadderfitError] = {}
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
        changes = _terms(chosen)
        relation = self.opened.choices.relation
        same = (relation.break_, relation.metallicity != "none") == (
            changes["relation.break"],
            chosen.metallicity,
        )
        if chosen.metallicity and relation.metallicity == "none":
            raise LadderfitError("the ladder file has no metallicity term")
        return self.opened if same else self.opened.change(changes)

    def rows(self, chosen: Selection) -> BoolArray:
        """Which rows of the system take part."""
        system = self.system(chosen)
        taken = np.ones(len(system.y), bool)
        stars = self.stars
        if stars is None:
            return taken
        if not chosen.parallax_stars:
            taken[len(stars) :] = system.group[len(stars) :] != STARS
        inside = taken[: len(stars)]
        period = 10.0**stars.log_period
        low, high = chosen.periods
        inside &= (period >= low * (1.0 - 1e-12)) & (period <= high * (1.0 + 1e-12))
        if self.overtone is not None and chosen.mode != "both":
            inside &= self.overtone == (chosen.mode == "overtone")
        names = np.array(self.opened.hosts)
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
            first = next(iter(self._systems.values()), None) or linear_system(self.opened)
            self._resampling = Resampling(first, self.seed)
        return self._resampling

    def estimate(self, chosen: Selection, treatment: Treatment, claim: Claim) -> Estimate | None:
        """The number that a claim is about; None where the rows do not determine it."""
        found = self.fit(chosen, treatment)
        return self.resampling.estimate(found, self.wanted(claim, chosen))

    def wanted(self, claim: Claim, chosen: Selection, pivot: float | None = None) -> Wanted:
        """What a claim is about, as a sum of coefficients; `pivot` in place of its own."""
        if claim.quantity == "scatter":
            return Wanted(scatter=True, intrinsic=claim.intrinsic)
        if claim.quantity == "hubble_constant":
            return Wanted({HUBBLE: 1.0})
        if claim.quantity == "modulus":
            return Wanted({with_group("modulus", str(claim.host)): 1.0})
        own = self.opened.choices.relation.pivot
        if claim.quantity == "slope":
            steeper = self.line(chosen, 10.0 * own)
            parts = {n: c for n, c in steeper.items() if base_name(n) == "slope_offset"}
            return Wanted({"slope": 1.0, **parts})
        if claim.quantity != "zero_point":
            return Wanted({claim.quantity: 1.0})
        sums = self.line(chosen, pivot or claim.pivot or own)
        if claim.apparent:
            host = claim.host or self.opened.hosts[0]
            sums[with_group("modulus", host)] = 1.0
        return Wanted(sums)

    def line(self, chosen: Selection, period: float) -> dict[str, float]:
        """The relation at a period [d] and the reference metallicity, as a sum of coefficients."""
        ladder = self._with_terms(chosen)
        metallicity = ladder.choices.relation.metallicity
        zero = np.zeros(1)
        star = StarSample(
            star=np.array([""]),
            host=np.array([-1]),
            log_period=np.array([float(np.log10(period))]),
            magnitude=zero,
            variance=zero,
            metallicity=zero if metallicity == "none" else np.array([metallicity.reference]),
            row=np.zeros(1, dtype=np.int64),
            overtone=np.array([chosen.mode == "overtone"]),
        )
        columns = design(ladder.choices, star, ())
        return {name: float(column[0]) for name, column in columns.items() if column[0] != 0.0}

    def joint(self, chosen: Selection, clip: float | None) -> Result:
        """The joint posterior of a selection, stars beyond the clip of least squares set aside.

        Raises
        ------
        LadderfitError
            If it cannot be drawn.
        """
        treatment = Treatment(clip=clip)
        key = (chosen, treatment)
        if key not in self._results:
            try:
                ladder = self.opened.change(self._joint_changes(chosen, treatment))
                self._results[key] = draw(ladder, seed=self.seed, draws=self.draws)
            except LadderfitError as error:
                self._results[key] = error
        found = self._results[key]
        if isinstance(found, LadderfitError):
            raise found
        return found

    def _joint_changes(self, chosen: Selection, treatment: Treatment) -> dict[str, Any]:
        changes = _terms(chosen) | self._wide_priors()
        changes |= {f"priors.{name}": {"fixed": value} for name, value in chosen.fixed}
        stars, cepheids = self.stars, self.opened.choices.cepheids
        if stars is None or cepheids is None:
            return changes
        taken = self.rows(chosen)[: len(stars)].copy()
        if treatment.clip is not None:
            left = self.fit(chosen, treatment)
            places = left.used.row
            taken &= np.isin(np.arange(len(stars)), places[places < len(stars)])
        aside = ~taken
        if chosen.periods != EVERY_PERIOD:
            changes["cepheids.periods"] = list(chosen.periods)
            period = 10.0**stars.log_period
            aside &= (period >= chosen.periods[0]) & (period <= chosen.periods[1])
        if self.overtone is not None and chosen.mode == "fundamental":
            changes["cepheids.overtones"] = "drop"
            aside &= ~self.overtone
        if self.overtone is not None and chosen.mode == "overtone":
            changes["priors.overtone_offset"] = {"fixed": 0.0}
        names = self.opened.hosts
        entries = [
            {"star": str(stars.star[place]), "host": names[stars.host[place]], "reason": "review"}
            for place in np.flatnonzero(aside)
        ]
        if entries:
            given = self.opened.choices.to_mapping()["cepheids"].get("set_aside", [])
            changes["cepheids.set_aside"] = [*given, *entries]
        if not chosen.parallax_stars and self.opened.parallax_stars is not None:
            changes["anchors.parallaxes.use"] = False
        return changes | self._stand_in(chosen, stars, taken)

    def _wide_priors(self) -> dict[str, Any]:
        """Priors that say next to nothing, for coefficients on which the file states none."""
        stated = self.opened.choices.priors
        return {f"priors.{name}": prior for name, prior in _WIDE.items() if name not in stated}

    def _stand_in(self, chosen: Selection, stars: StarSample, taken: BoolArray) -> dict[str, Any]:
        """Without any anchor one host gets a modulus, so that slopes and levels can be drawn."""
        present = {int(host) for host in np.unique(stars.host[taken])}
        if any(anchor.host in present for anchor in self.opened.geometric):
            return {}
        if (chosen.parallax_stars and self.opened.parallax_stars is not None) or not present:
            return {}
        host = self.opened.hosts[int(stars.host[taken][0])]
        level = float(np.median(stars.magnitude[taken])) - _STAND_IN
        return {
            schema.join("anchors.geometric", host): {"modulus": _STAND_IN, "error": 1e-4},
            "priors.zero_point": {"normal": [level, 100.0]},
        }

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
        if claim.quantity == "zero_point" and not claim.apparent and near is None:
            return None
        result = self.joint(chosen, clip)
        values = _posterior_values(result, self.wanted(claim, chosen))
        if values is None:
            return None
        samples = (result.ladder.cepheids, result.ladder.parallax_stars)
        count = sum(len(sample) for sample in samples if sample is not None)
        nothing = np.zeros(0)
        made = Estimate(float(np.mean(values)), float(np.std(values)), 0.0, count, nothing, nothing)
        if near is None:
            return replace(made, spread=made.error)
        return replace(made, spread=near.spread, gaps=near.gaps, deviations=near.deviations)


def _posterior_values(result: Result, wanted: Wanted) -> Any:
    draws = result.draws
    if wanted.scatter:
        stars = result.ladder.cepheids or result.ladder.parallax_stars
        if stars is None:
            return None
        names, which = scatters(result.choices, stars, result.ladder.hosts)
        share = np.bincount(which, minlength=len(names)) / len(stars)
        squares = sum(part * draws[name] ** 2 for part, name in zip(share, names, strict=True))
        return np.sqrt(squares + (0.0 if wanted.intrinsic else float(np.mean(stars.variance))))
    if HUBBLE in wanted.coefficients:
        return draws.get("hubble_constant")
    if any(name not in draws for name in wanted.coefficients):
        return None
    return sum(factor * draws[name] for name, factor in wanted.coefficients.items())


def _terms(chosen: Selection) -> dict[str, Any]:
    changes: dict[str, Any] = {"relation.break": chosen.break_ or "none"}
    if not chosen.metallicity:
        changes["relation.metallicity"] = "none"
        changes["relation.slope_metallicity"] = False
    return changes


def _opening(ladder: Ladder) -> Mapping[str, Any]:
    """Changes that take the file's own cuts off the Cepheids."""
    cepheids = ladder.choices.cepheids
    if cepheids is None:
        return {}
    changes: dict[str, Any] = {"cepheids.periods": list(EVERY_PERIOD)}
    if cepheids.overtones == "drop" and "mode" in cepheids.columns:
        changes["cepheids.overtones"] = "offset"
    return changes
