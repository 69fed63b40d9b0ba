"""The hierarchical fit of a selection: which choices it changes; the number a claim is about."""

from __future__ import annotations

from typing import Any

import numpy as np

from ladderfit import schema
from ladderfit.choices import Choices
from ladderfit.ladder import Ladder
from ladderfit.names import base_name, with_group
from ladderfit.relations import design, scatters
from ladderfit.result import Result
from ladderfit.review.claims import Claim
from ladderfit.review.resampling import Wanted
from ladderfit.review.selection import EVERY_PERIOD, Selection, terms
from ladderfit.review.system import HUBBLE
from ladderfit.samples import BoolArray, FloatArray, StarSample

NO_THIRD_RUNG: dict[str, Any] = {"supernovae": None, "expansion": None}
_WIDE = {"slope": {"normal": [-3.3, 5.0]}, "zero_point": {"normal": [-5.9, 10.0]}}
_STAND_IN = 10.0  # mag: modulus given to a host where nothing sets the scale


def joint_changes(
    opened: Ladder, chosen: Selection, sample: tuple[Ladder, BoolArray] | None
) -> dict[str, Any]:
    """Choices that leave exactly the stars of a selection, by dotted key.

    Priors on slope and zero point are wide where the file states none.

    Parameters
    ----------
    opened : Ladder
        Without the file's own cuts.
    chosen : Selection
    sample : (Ladder, array of bool) or None
        The ladder with the terms of the selection, and which of its Cepheids take
        part; None where there are none.
    """
    changes = terms(chosen)
    stated = opened.choices.priors
    changes |= {f"priors.{name}": prior for name, prior in _WIDE.items() if name not in stated}
    changes |= {f"priors.{name}": {"fixed": value} for name, value in chosen.fixed}
    if sample is None or sample[0].cepheids is None:
        return changes
    ladder, taken = sample
    stars = sample[0].cepheids
    aside = ~taken
    if chosen.periods != EVERY_PERIOD:
        changes["cepheids.periods"] = list(chosen.periods)
        period = 10.0**stars.log_period
        aside &= (period >= chosen.periods[0]) & (period <= chosen.periods[1])
    if stars.overtone is not None and chosen.mode == "fundamental":
        changes["cepheids.overtones"] = "drop"
        aside &= ~stars.overtone
    if stars.overtone is not None and chosen.mode == "overtone":
        changes["priors.overtone_offset"] = {"fixed": 0.0}
    entries = _set_aside(stars, ladder.hosts, aside)
    if entries:
        given = opened.choices.to_mapping()["cepheids"].get("set_aside", [])
        changes["cepheids.set_aside"] = [*given, *entries]
    if not chosen.parallax_stars and opened.parallax_stars is not None:
        changes["anchors.parallaxes.use"] = False
    return changes | _stand_in(ladder, chosen, stars, taken)


def _set_aside(stars: StarSample, hosts: tuple[str, ...], aside: BoolArray) -> list[dict[str, str]]:
    return [
        {"star": str(stars.star[place]), "host": hosts[stars.host[place]], "reason": "review"}
        for place in np.flatnonzero(aside)
    ]


def _stand_in(
    ladder: Ladder, chosen: Selection, stars: StarSample, taken: BoolArray
) -> dict[str, Any]:
    """Without any anchor one host gets a modulus, so that slopes and levels can be drawn."""
    present = {int(host) for host in np.unique(stars.host[taken])}
    if any(anchor.host in present for anchor in ladder.geometric):
        return {}
    if (chosen.parallax_stars and ladder.parallax_stars is not None) or not present:
        return {}
    host = ladder.hosts[int(stars.host[taken][0])]
    level = float(np.median(stars.magnitude[taken])) - _STAND_IN
    return {
        schema.join("anchors.geometric", host): {"modulus": _STAND_IN, "error": 1e-4},
        "priors.zero_point": {"normal": [level, 100.0]},
    }


def line_at(choices: Choices, period: float, *, overtone: bool = False) -> dict[str, float]:
    """The relation at a period [d] and the reference metallicity, as a sum of coefficients."""
    metallicity = choices.relation.metallicity
    zero = np.zeros(1)
    star = StarSample(
        star=np.array([""]),
        host=np.array([-1]),
        log_period=np.array([float(np.log10(period))]),
        magnitude=zero,
        variance=zero,
        metallicity=zero if metallicity == "none" else np.array([metallicity.reference]),
        row=np.zeros(1, dtype=np.int64),
        overtone=np.array([overtone]),
    )
    columns = design(choices, star, ())
    return {name: float(column[0]) for name, column in columns.items() if column[0] != 0.0}


def number_claimed(
    claim: Claim,
    choices: Choices,
    hosts: tuple[str, ...],
    *,
    overtone: bool = False,
    pivot: float | None = None,
) -> Wanted:
    """What a claim is about, as a sum of coefficients.

    Parameters
    ----------
    claim : Claim
    choices : Choices
        Whose terms the relation has.
    hosts : tuple of str
        An apparent magnitude without a host is that of the first.
    overtone : bool
        Whether the relation is that of overtone pulsators.
    pivot : float, optional
        Period of a zero point [d], in place of the claim's own.
    """
    if claim.quantity == "scatter":
        return Wanted(scatter=True, intrinsic=claim.intrinsic)
    if claim.quantity == "hubble_constant":
        return Wanted({HUBBLE: 1.0})
    if claim.quantity == "modulus":
        return Wanted({with_group("modulus", str(claim.host)): 1.0})
    own = choices.relation.pivot
    if claim.quantity == "slope":
        steeper = line_at(choices, 10.0 * own, overtone=overtone)
        parts = {n: c for n, c in steeper.items() if base_name(n) == "slope_offset"}
        return Wanted({"slope": 1.0, **parts})
    if claim.quantity != "zero_point":
        return Wanted({claim.quantity: 1.0})
    sums = line_at(choices, pivot or claim.pivot or own, overtone=overtone)
    if claim.apparent:
        sums[with_group("modulus", claim.host or hosts[0])] = 1.0
    return Wanted(sums)


def posterior_values(result: Result, wanted: Wanted) -> FloatArray | None:
    """Draws of a number; None where the posterior does not have it."""
    draws = result.draws
    if wanted.scatter:
        stars = result.ladder.cepheids or result.ladder.parallax_stars
        if stars is None:
            return None
        names, which = scatters(result.choices, stars, result.ladder.hosts)
        share = np.bincount(which, minlength=len(names)) / len(stars)
        squares = sum(part * draws[name] ** 2 for part, name in zip(share, names, strict=True))
        errors = 0.0 if wanted.intrinsic else float(np.mean(stars.variance))
        return np.asarray(np.sqrt(squares + errors))
    if HUBBLE in wanted.coefficients:
        return draws.get("hubble_constant")
    if any(name not in draws for name in wanted.coefficients):
        return None
    parts = [factor * draws[name] for name, factor in wanted.coefficients.items()]
    return np.asarray(sum(parts))
