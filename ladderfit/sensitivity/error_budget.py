"""The error budget: what each rung's data contribute to the variance of a number.

Near its peak the posterior is normal with the covariance S = (sum over r of I_r)^-1, where
I_r is the Fisher information of the r-th independent set of data (or of the priors).
For a number q with the covariance vector c = S dq/dx,

    Var(q) = c' S^-1 c = sum over r of c' I_r c ,

and the r-th term is the variance that the estimate of q has because the r-th data are
noisy, the weights of the fit being what they are: the propagation of errors through
the joint fit, all correlations counted (the identity is that of generalised least
squares; Aitken 1935, Proc. R. Soc. Edinburgh 55, 42).  Terms are never negative and
add up.  What a rung *could* gain if its data were perfect is another question: the
weights would change.

c is the covariance of all parameters with q over the draws.  I_r acts on it through the
change of each datum's prediction m and variance v along c, with the expected
information (dm)^2 / v + (d ln v)^2 / 2 of a normal datum; for parallax stars
through the curvature of their exact densities.  The noise of c from a finite number of
draws would add to each square; only products of different groups of draws are used.
What is far from normal shows as a budget that does not close: the sum is told.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import replace

import numpy as np
import pandas as pd

from ladderfit.checks.residuals import (
    Residuals,
    cepheid_residuals,
    flow_residuals,
    peak_residuals,
    velocity_residuals,
)
from ladderfit.names import base_name, parameter, with_group
from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.priors import Fixed
from ladderfit.result import Result
from ladderfit.samples import FloatArray

TARGETS = ("zero_point", "peak_magnitude", "hubble_constant")
TOTAL = "all together"
_GROUPS = 20
_STEP = 0.5  # of the change of parameters with one standard deviation of the number

Direction = Mapping[str, float]  # change of each parameter, in its unit
Form = Callable[[Direction], dict[str, float]]  # information along a direction, by source


def error_budget(result: Result, targets: tuple[str, ...] = TARGETS) -> pd.DataFrame:
    """What anchors, parallaxes, Cepheids, supernovae, expansion and priors contribute.

    Parameters
    ----------
    result : Result
        Drawn directly, with its ladder.
    targets : tuple of str
        Names of parameters; those that the result does not have are left out.

    Returns
    -------
    DataFrame
        Indexed by source; for each number ``NAME`` (the error that the source
        contributes, in the number's unit: their squares add up) and ``NAME_share``
        (of its variance).  The last row is the sum, whose share is 1 as far as the
        posterior is normal.
    """
    forms = _forms(result)
    columns: dict[str, dict[str, float]] = {}
    for name in targets:
        if name in result.draws and result.sd(name) > 0.0:
            share = _shares(result, name, forms)
            share[TOTAL] = sum(share.values())
            sd = result.sd(name)
            columns[name] = {each: sd * math.sqrt(max(s, 0.0)) for each, s in share.items()}
            columns[f"{name}_share"] = share
    return pd.DataFrame(columns)


def budgeted(budget: pd.DataFrame) -> list[str]:
    """Names of the numbers that a budget is of."""
    columns = [str(column) for column in budget.columns]
    return [name.removesuffix("_share") for name in columns if name.endswith("_share")]


def _shares(result: Result, name: str, forms: list[Form]) -> dict[str, float]:
    """Shares of the variance of one number by source."""
    parts = _directions(result, name)
    whole = {key: sum(part[key] for part in parts) for key in parts[0]}
    total: dict[str, float] = {}
    for form in forms:
        found = form(whole)
        own = [form(part) for part in parts]
        for source, value in found.items():
            between = value - sum(each[source] for each in own)
            between *= _GROUPS / (_GROUPS - 1.0)
            total[source] = total.get(source, 0.0) + between
    return total


def _directions(result: Result, name: str) -> list[dict[str, float]]:
    """Change of all parameters with one standard deviation of the number, from each group of draws.

    Together they are the covariance over the standard deviation.
    """
    off = result.draws[name] - np.mean(result.draws[name])
    off = off / (float(np.std(off)) * len(off))
    parts = np.array_split(np.arange(len(off)), _GROUPS)
    centred = {key: draws - np.mean(draws) for key, draws in result.draws.items()}
    return [
        {key: float(draws[part] @ off[part]) for key, draws in centred.items()} for part in parts
    ]


def _forms(result: Result) -> list[Form]:
    """Every independent source of information."""
    means = {name: result.mean(name) for name in result.draws}
    stars = result.ladder.parallax_stars
    joint = None if stars is None else posterior(result.ladder)
    return [
        lambda way: _of_anchors(result, way),
        lambda way: {} if joint is None else {"parallaxes": _of_parallaxes(joint, means, way)},
        lambda way: _of_stars(result, means, way),
        lambda way: _of_supernovae(result, means, way),
        lambda way: _of_expansion(result, means, way),
        lambda way: _of_priors(result, means, way),
    ]


def _moved(means: Mapping[str, float], way: Direction, steps: float) -> dict[str, float]:
    return {name: value + steps * way[name] for name, value in means.items()}


def _along(
    result: Result,
    means: Mapping[str, float],
    way: Direction,
    residuals: Callable[[Result], Residuals | None],
) -> tuple[FloatArray, FloatArray, FloatArray] | None:
    """Change of residuals, of the log variances, and the variances, along a direction."""
    ends = []
    for step in (_STEP, 0.0, -_STEP):
        values = _moved(means, way, step)
        there = replace(result, draws={name: np.array([v]) for name, v in values.items()})
        found = residuals(there)
        if found is None:
            return None
        ends.append(found)
    ahead, here, behind = ends
    change = (ahead.residual - behind.residual) / (2.0 * _STEP)
    widened = np.log(ahead.sd / behind.sd) / _STEP
    return change, np.asarray(widened), here.sd**2


def _information(along: tuple[FloatArray, FloatArray, FloatArray]) -> FloatArray:
    change, widened, variance = along
    return np.asarray(change**2 / variance + 0.5 * widened**2)


def _of_stars(result: Result, means: Mapping[str, float], way: Direction) -> dict[str, float]:
    along = _along(result, means, way, cepheid_residuals)
    stars = result.ladder.cepheids
    if along is None or stars is None:
        return {}
    each = _information(along)
    anchors = np.isin(stars.host, [anchor.host for anchor in result.ladder.geometric])
    peaks = result.ladder.peaks
    hosts = np.isin(stars.host, [] if peaks is None else peaks.host) & ~anchors
    parts = {
        "Cepheids of anchors": anchors,
        "Cepheids of supernova hosts": hosts,
        "other Cepheids": ~(anchors | hosts),
    }
    return {source: float(each[part].sum()) for source, part in parts.items() if part.any()}


def _of_supernovae(result: Result, means: Mapping[str, float], way: Direction) -> dict[str, float]:
    """Supernovae in hosts and in the expansion; what they share counts half with each."""
    names = {"supernovae in hosts": peak_residuals, "supernovae in the expansion": flow_residuals}
    along = {source: _along(result, means, way, made) for source, made in names.items()}
    known = {source: found for source, found in along.items() if found is not None}
    covariance = result.ladder.peak_covariance
    if covariance is None or not known:
        return {source: float(_information(found).sum()) for source, found in known.items()}
    change, widened, variance = (np.concatenate(each) for each in zip(*known.values(), strict=True))
    matrix = covariance + np.diag(variance - np.diag(covariance))
    inverse = np.linalg.inv(matrix)
    wider = np.diag(variance * widened)
    product = inverse @ wider
    each = change * (inverse @ change) + 0.5 * np.einsum("ij,ji->i", product, product)
    sizes = np.cumsum([len(found[0]) for found in known.values()])[:-1]
    return {
        source: float(part.sum()) for source, part in zip(known, np.split(each, sizes), strict=True)
    }


def _of_expansion(result: Result, means: Mapping[str, float], way: Direction) -> dict[str, float]:
    """A published intercept; velocities."""
    found: dict[str, float] = {}
    expansion = result.choices.expansion
    if expansion is not None and expansion.intercept is not None:
        change = _magnitudes(means, way) - way["peak_magnitude"]
        found["the intercept"] = (change / (5.0 * expansion.intercept.error)) ** 2
    along = _along(result, means, way, velocity_residuals)
    if along is not None:
        found["velocities"] = float(_information(along).sum())
    return found


def _magnitudes(means: Mapping[str, float], way: Direction) -> float:
    """Change of 5 log10 H0."""
    return 5.0 / math.log(10.0) * way["hubble_constant"] / means["hubble_constant"]


def _of_anchors(result: Result, way: Direction) -> dict[str, float]:
    ladder = result.ladder
    shared = ladder.choices.anchors.shared_errors
    change = np.zeros(len(ladder.geometric))
    found: dict[str, float] = {}
    for place, anchor in enumerate(ladder.geometric):
        change[place] = way[with_group("modulus", anchor.name)]
        for name, error in shared.items():
            common = way.get(with_group("shared_error", name), 0.0)
            change[place] += error.error * error.loads.get(anchor.name, 0.0) * common
    covariance = ladder.anchor_covariance
    if covariance is None:
        covariance = np.diag([anchor.error**2 for anchor in ladder.geometric])
    each = change * np.linalg.solve(covariance, change) if len(change) else change
    for anchor, value in zip(ladder.geometric, each, strict=True):
        found[f"anchor {anchor.name}"] = float(value)
    modes = [way[name] for name in way if base_name(name) == "shared_error"]
    if modes:
        found["errors that anchors share"] = float(np.sum(np.square(modes)))
    return found


def _of_parallaxes(joint: Posterior, means: Mapping[str, float], way: Direction) -> float:
    """Curvature of the stars' densities, and of the errors they share on the sky."""
    at = [joint.coordinates(_moved(means, way, step)) for step in (_STEP, 0.0, -_STEP)]
    ahead, here, behind = joint.log_parallaxes(np.array(at)).sum(axis=1)
    field = [value for name, value in way.items() if base_name(name) == "parallax_field"]
    curvature = (2.0 * here - ahead - behind) / _STEP**2
    return float(curvature + np.sum(np.square(field)))


def _of_priors(result: Result, means: Mapping[str, float], way: Direction) -> dict[str, float]:
    """Curvature of the log priors of parameters; those of shared errors belong to the data."""
    total = 0.0
    for name, change in way.items():
        if base_name(name) in ("shared_error", "parallax_field") or parameter(name).prior is None:
            continue
        prior = result.choices.prior(name)
        if isinstance(prior, Fixed):
            continue
        step = 1e-3 * prior.sd
        low, high = prior.bounds
        middle = min(max(means[name], low + 2.0 * step), high - 2.0 * step)
        points = np.array([middle + step, middle, middle - step])
        ahead, here, behind = prior.log_density(points)
        total += float(2.0 * here - ahead - behind) / step**2 * change**2
    return {"priors": total}
