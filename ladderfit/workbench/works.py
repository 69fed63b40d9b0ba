"""The slow work of views: many fits, told piece by piece; no widgets."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from ladderfit.alternatives import Comparison, run_alternatives
from ladderfit.anchors import AnchorComparison, compare_anchors
from ladderfit.checks.outliers import outlier_table
from ladderfit.checks.predictive import Checks, predictive_checks
from ladderfit.influence import Influence, leave_one_out
from ladderfit.ladder import Ladder
from ladderfit.priors import Fixed
from ladderfit.result import Result
from ladderfit.schema import written
from ladderfit.sensitivity.distance_priors import PRIORS, along_distance_priors
from ladderfit.sensitivity.power_scaling import PriorSensitivity, prior_sensitivity
from ladderfit.sensitivity.redshift_cuts import RedshiftCuts, hubble_along_cuts
from ladderfit.workbench.shown import Tell

CUT_DRAWS = 1000


def priors_of(ladder: Ladder) -> dict[str, Any]:
    """The distance priors to compare, by words; those chosen stand in place of their like."""
    stars = ladder.choices.anchors.parallaxes
    found: dict[str, Any] = dict(PRIORS)
    if stars is None:
        return found
    own = stars.distance_prior
    if stars.modulus_bounds is not None:
        words = "flat, {:g} to {:g} mag".format(*stars.modulus_bounds)
        found = {words if own == key else key: value for key, value in found.items()}
    length = 2.0 if stars.exponential is None else stars.exponential
    free = not isinstance(ladder.choices.prior("distance_length"), Fixed)
    exponential = f"exponential, {'free length' if free else f'{length:g} kpc'}"
    disc: Mapping[str, Any] | None = None
    if stars.disc is not None:
        disc = {
            "length": stars.disc.length,
            "height": stars.disc.height,
            "solar_radius": stars.disc.solar_radius,
            "solar_height": stars.disc.solar_height,
        }
    exchanged: dict[str, Any] = {}
    for words, value in found.items():
        kind = next(iter(value)) if isinstance(value, Mapping) else ""
        if kind == "exponential":
            exchanged[exponential] = {"exponential": length}
        elif kind == "disc" and disc is not None:
            exchanged[f"disc, {disc['length']:g} and {disc['height']:g} kpc"] = {"disc": disc}
        else:
            exchanged[words] = value
    return exchanged


def distance_priors(result: Result, tell: Tell) -> dict[str, Result]:
    """The posterior under each distance prior; under the one in force it is that on show."""
    stars = result.choices.anchors.parallaxes
    known = priors_of(result.ladder)
    force = None if stars is None else written(stars.distance_prior)
    own = next((words for words, value in known.items() if value == force), "")
    others = {words: value for words, value in known.items() if words != own}
    found = along_distance_priors(result.ladder, others, progress=tell) if others else {}
    shown = {own: result, **found} if own else found
    return {words: shown[words] for words in known if words in shown}


def redshift_cuts(result: Result, tell: Tell) -> RedshiftCuts:
    """The Hubble constant along the redshift cuts."""
    return hubble_along_cuts(result.ladder, draws=CUT_DRAWS, progress=tell)


def anchors(result: Result, tell: Tell) -> AnchorComparison:
    """The anchors against each other."""
    return compare_anchors(result.ladder, base=result, progress=lambda _, share: tell(share))


def influence(result: Result, tell: Tell) -> Influence:
    """What every object does when it is left out."""
    return leave_one_out(result, progress=lambda _, share: tell(share))


def sensitivity(result: Result, tell: Tell) -> PriorSensitivity:
    """What the priors do."""
    tell(0.1)
    return prior_sensitivity(result)


def alternatives(result: Result, tell: Tell) -> Comparison:
    """The ladder file's alternatives to the choices in force, one after another."""
    ladder = result.ladder
    return run_alternatives(ladder, workers=1, progress=lambda _, share: tell(share))


def outliers(result: Result, tell: Tell) -> Any:
    """What each star of a sample whose outliers are modelled is taken for."""
    tell(0.1)
    return outlier_table(result)


def checks(result: Result, tell: Tell) -> Checks:
    """Predictive checks."""
    tell(0.1)
    return predictive_checks(result)
