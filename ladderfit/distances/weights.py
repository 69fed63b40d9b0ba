"""Saved draws weighted by the density of new data, and new moduli drawn given each."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from typing import Any, Literal

import numpy as np

from ladderfit.diagnostics import smoothed_weights, weights_ess
from ladderfit.kernels.arrow import Solution, solve
from ladderfit.names import base_name, with_group
from ladderfit.posterior.joint import Posterior
from ladderfit.result import Result
from ladderfit.samples import FloatArray

_CHUNK = 512  # draws evaluated at once
_KNOWN = frozenset(
    {"ladder", "split", "frame", "blocks", "constant", "parallaxes", "limits", "robust"}
)


@dataclass(frozen=True, eq=False)
class Found:
    """What a route gives: draws of everything, and what they are worth."""

    values: Mapping[str, FloatArray]
    route: Literal["weights", "fit"]
    ess: float
    pareto_k: float
    notes: tuple[str, ...] = ()


def needed(joint: Posterior) -> tuple[str, ...]:
    """What the density of the new data depends on, beside new moduli."""
    return (*joint.split.coefficients, *joint.split.phi_names)


def understood(joint: Posterior) -> bool:
    """Whether the density of new data is made of parts that are known here."""
    parts = {field.name for field in fields(joint)}
    return all(getattr(joint, name) is None for name in parts - _KNOWN)


def weighted(result: Result, joint: Posterior, rng: np.random.Generator) -> Found:
    """The saved draws weighted by the new data; new moduli drawn given each."""
    log_weight = np.concatenate(
        [_log_density(joint, part) for part in _parts(joint, result.draws, np.arange(result.size))]
    )
    weights, k = smoothed_weights(log_weight)
    points = (rng.uniform() + np.arange(result.size)) / result.size
    chosen = np.minimum(np.searchsorted(np.cumsum(weights), points), result.size - 1)
    chosen = rng.permutation(chosen)
    moduli = np.concatenate(
        [_moduli(joint, part, rng) for part in _parts(joint, result.draws, chosen)]
    )
    values = {
        name: draws[chosen] for name, draws in result.draws.items() if base_name(name) != "modulus"
    }
    values |= {with_group("modulus", h): moduli[:, i] for i, h in enumerate(joint.ladder.hosts)}
    worst = min((e for e in result.diagnostics.ess.values() if np.isfinite(e)), default=result.size)
    ess = weights_ess(weights) * worst / result.size
    return Found(values, "weights", float(ess), k)


@dataclass(frozen=True, eq=False)
class _Part:
    """Some draws: coefficients as the system has them, and any parameter by name."""

    coefficients: FloatArray
    values: Mapping[str, FloatArray]

    def value(self, name: str) -> FloatArray:
        return self.values[name]


def _parts(joint: Posterior, draws: Mapping[str, FloatArray], rows: Any) -> list[_Part]:
    found = []
    for start in range(0, len(rows), _CHUNK):
        here = rows[start : start + _CHUNK]
        values = {name: draws[name][here] for name in needed(joint)}
        values |= {n: np.full(len(here), v) for n, v in joint.split.fixed.items()}
        columns = [
            5.0 * np.log10(values[n]) if n in joint.split.logarithmic else values[n]
            for n in joint.split.coefficients
        ]
        found.append(_Part(np.stack(columns, axis=1), values))
    return found


def _solution(joint: Posterior, part: _Part) -> Solution:
    """The new moduli given every coefficient."""
    total = joint.constant.repeated(len(part.coefficients))
    for block in joint.blocks:
        block.add_to(total, part.value)
    known = np.arange(len(joint.split.coefficients))
    if joint.robust is not None:
        return joint.robust.solution(total, known, part.coefficients, part.value)
    return solve(total, known, part.coefficients)


def _log_density(joint: Posterior, part: _Part) -> FloatArray:
    """Log density of the new data given each draw, new moduli integrated out.

    The system of the new ladder holds the priors of theta as rows; they are in the
    calibration's draws already and are taken out.
    """
    solution = _solution(joint, part)
    total = solution.log_evidence
    for name, prior in zip(joint.split.theta, joint.split.theta_prior, strict=True):
        column = part.coefficients[:, joint.split.coefficients.index(name)]
        total = total - prior.log_density(column)
    if joint.limits is not None:
        total = total + joint.limits.log_factor(solution, part.value)
    return np.asarray(total)


def _moduli(joint: Posterior, part: _Part, rng: np.random.Generator) -> FloatArray:
    """Moduli drawn given every coefficient, shape (b, h)."""
    solution = _solution(joint, part)
    white = rng.standard_normal((len(part.coefficients), joint.frame.hosts))
    if joint.robust is not None:
        _, local = joint.robust.draw(solution, part.value, white)
    else:
        _, local = solution.draw(white)
    if joint.limits is not None:
        joint.limits.redraw(solution, part.value, local, white)
    return joint.frame.modulus(local, part.coefficients)
