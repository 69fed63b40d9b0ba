"""Simulated papers: a table, and what an author with numpy would print of it.

The tables come from `ladderfit.mock`; the author's least squares, weights, clip and
rounding are written here anew, so that a review is held against other code.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

import ladderfit as lf
from ladderfit.ladder import Ladder
from ladderfit.mock import simulate
from ladderfit.mock.plan import Host, Plan

CEPHEIDS: dict[str, Any] = {
    "columns": {"star": "ID", "host": "Galaxy", "period": "P"},
    "magnitude": {
        "wesenheit": {"band": "H", "colour": ["V", "I"], "ratio": 0.386},
        "bands": {"H": "Hmag", "V": "Vmag", "I": "Imag"},
        "errors": {"H": "e_H", "V": "e_V", "I": "e_I"},
    },
}
QUANTITIES = ("slope", "zero_point", "scatter")
CLIPS = (None, None, 2.5, 3.0)


@dataclass(frozen=True)
class Paper:
    """A table, and what an honest author prints."""

    ladder: Ladder
    method: dict[str, Any]
    slope: float
    slope_error: float
    level: float
    level_error: float
    scatter: float
    stars: int
    x: np.ndarray
    covariance: np.ndarray

    def level_at(self, log_period: float) -> tuple[float, float]:
        """The line at a log10 period [d], and its error."""
        vector = np.array([log_period - 1.0, 1.0])
        error = float(np.sqrt(vector @ self.covariance @ vector))
        return float(vector @ [self.slope, self.level]), error


def table(rng: np.random.Generator) -> pd.DataFrame:
    """One galaxy of 30 to 300 stars; the metallicity adds to their scatter."""
    host = Host(
        "Orrel",
        modulus=float(rng.uniform(18.0, 26.0)),
        cepheids=int(rng.integers(30, 300)),
        shortest=float(rng.uniform(2.0, 6.0)),
        gradient=float(rng.uniform(0.0, 0.6)),
    )
    plan = Plan(
        hosts=(host,),
        slope=float(rng.normal(-3.3, 0.1)),
        scatter=float(rng.uniform(0.06, 0.2)),
        parallax_stars=3,
        missing_cepheids=0,
        missing_parallax_stars=0,
        flow=2,
        flow_outside=0,
    )
    return simulate(plan, rng).cepheids.to_pandas()


def fitted(
    x: np.ndarray, y: np.ndarray, sigma: np.ndarray | None
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Slope and constant, their covariance scaled to the residuals, and the residuals."""
    weight = None if sigma is None else 1.0 / sigma
    found, covariance = np.polyfit(x, y, 1, w=weight, cov=True)
    return found, covariance, y - np.polyval(found, x)


def author(rng: np.random.Generator, *, stated: bool) -> Paper:
    """A paper on a table of its own; `stated` says whether it tells weights and clip."""
    stars = table(rng)
    x = np.log10(stars["P"].to_numpy(float)) - 1.0
    colour = stars["Vmag"] - stars["Imag"]
    y = (stars["Hmag"] - 0.386 * colour).to_numpy(float)
    error = np.sqrt(stars["e_H"] ** 2 + 0.386**2 * (stars["e_V"] ** 2 + stars["e_I"] ** 2))
    method: dict[str, Any] = {}
    inside = np.ones(len(x), bool)
    if rng.random() < 0.5:
        method["periods"] = [5.0, 60.0]  # a cut is always told
        inside = (10.0 ** (x + 1.0) >= 5.0) & (10.0 ** (x + 1.0) <= 60.0)
    x, y, error = x[inside], y[inside], error.to_numpy(float)[inside]
    clip = CLIPS[rng.integers(len(CLIPS))]
    weighted = bool(rng.random() < 0.5)
    kept = np.ones(len(x), bool)
    for _ in range(50):
        sigma = np.hypot(error, 0.12)[kept] if weighted else None
        found, covariance, residual = fitted(x[kept], y[kept], sigma)
        spread = np.sqrt(np.sum(residual**2) / (kept.sum() - 2))
        near = np.abs(y - np.polyval(found, x)) < (clip or np.inf) * spread
        if np.array_equal(near, kept):
            break
        kept = near
    if stated:
        method["weights"] = "errors and scatter" if weighted else "none"
        if clip is not None:
            method["clip"] = clip
    return Paper(
        ladder=lf.build_ladder({"cepheids": CEPHEIDS}, {"cepheids": stars}),
        method=method,
        slope=float(found[0]),
        slope_error=float(np.sqrt(covariance[0, 0])),
        level=float(found[1]),
        level_error=float(np.sqrt(covariance[1, 1])),
        scatter=float(spread),
        stars=int(kept.sum()),
        x=x[kept],
        covariance=covariance,
    )


def printed(value: float, error: float, two_digits: bool) -> dict[str, Any]:
    """Value and error rounded as papers do, to one or two digits of the error."""
    places = int(-np.floor(np.log10(error))) + (1 if two_digits else 0)
    return {
        "value": round(value, places),
        "error": max(round(error, places), 10.0**-places),
        "decimals": places,
        "error_decimals": places,
    }


def claim(paper: Paper, quantity: str, two_digits: bool = True) -> dict[str, Any]:
    """An honest claim, as a claims file holds it."""
    base: dict[str, Any] = {"quantity": quantity, "method": paper.method}
    if quantity == "slope":
        return base | printed(paper.slope, paper.slope_error, two_digits)
    if quantity == "scatter":
        return base | {"value": round(paper.scatter, 3), "decimals": 3}
    level = printed(paper.level, paper.level_error, two_digits)
    return base | level | {"apparent": True, "pivot": 10.0}
