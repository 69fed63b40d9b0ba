"""Outliers by brute force: every label or scale is sampled, nothing is summed or integrated.

All unknowns are drawn in turn (Gibbs sampling), for many chains at once: the laws'
own parameters by Metropolis steps, the label (or the scale) of every star, and then
all coefficients and moduli from the dense normal that labels and scales leave.  It
shares the rows of `brute_force` with other tests and nothing with the package's
kernels.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from brute_force import in_magnitudes, log_prior, rows_of
from scipy.special import gammaln

from ladderfit.ladder import Ladder
from ladderfit.priors import Fixed

STEPS = {  # of the Metropolis walks, each in its own coordinate
    "scatter": 0.03,
    "peak_scatter": 0.06,
    "outlier_fraction": 0.06,
    "outlier_width": 0.5,
    "degrees_of_freedom": 0.8,
}
LOGARITHMIC = ("outlier_width", "degrees_of_freedom")
SUBSTEPS = 3


@dataclass
class Gibbs:
    """Chains of one ladder: geometric anchors, Cepheids in hosts, supernovae in hosts."""

    ladder: Ladder
    chains: int
    rng: np.random.Generator
    law: str = field(init=False)
    values: dict[str, np.ndarray] = field(init=False)

    def __post_init__(self) -> None:
        self.law = self.ladder.choices.cepheids.outliers.treatment
        rows = rows_of(self.ladder)
        self.linear = tuple(dict.fromkeys(name for row in rows for name in row.terms))
        self.A = np.array([[row.terms.get(name, 0.0) for name in self.linear] for row in rows])
        self.y = np.array([row.y for row in rows])
        self.s2 = np.array([row.variance for row in rows])
        self.scatter = np.array([row.scatter or "" for row in rows])
        self.stars = self.scatter == "scatter"
        own = ("outlier_fraction", "outlier_width") if self.law == "mixture" else ()
        own = own or ("degrees_of_freedom",)
        peaks = ("peak_scatter",) if "peak_scatter" in self.scatter else ()
        self.names = ("scatter", *peaks, *own)
        prior = {name: self.ladder.choices.prior(name) for name in self.names}
        assert not any(isinstance(each, Fixed) for each in prior.values())
        self.values = {n: np.full(self.chains, p.centre * 0.7) for n, p in prior.items()}
        self.values["scatter"] = np.full(self.chains, 0.1)
        self.x = np.tile(self._start(), (self.chains, 1))
        self.labels = np.zeros(int(self.stars.sum()))  # sums of labels, star by star

    def _start(self) -> np.ndarray:
        mean, precision = self._linear_prior()
        whole = (self.A.T / (self.s2 + 0.01)) @ self.A + np.diag(precision)
        right = (self.A.T / (self.s2 + 0.01)) @ self.y + precision * mean
        return np.linalg.solve(whole, right)

    def _linear_prior(self) -> tuple[np.ndarray, np.ndarray]:
        """Mean and precision of every coefficient; moduli are flat."""
        mean, precision = np.zeros(len(self.linear)), np.zeros(len(self.linear))
        for place, name in enumerate(self.linear):
            if not name.startswith("modulus["):
                prior = self.ladder.choices.prior(name)
                if in_magnitudes(self.ladder, name):
                    prior = prior.in_magnitudes()
                mean[place], precision[place] = prior.mean, prior.deviation**-2
        return mean, precision

    def _variance(self, values: dict[str, np.ndarray]) -> np.ndarray:
        """Of deviations that are not outlying, shape (chains, rows)."""
        extra = np.zeros((self.chains, len(self.y)))
        for name in ("scatter", "peak_scatter"):
            if name in values:
                extra[:, self.scatter == name] = values[name][:, None] ** 2
        return self.s2 + extra

    def _parts(self, values: dict[str, np.ndarray], r: np.ndarray) -> tuple[np.ndarray, ...]:
        """Log densities of the stars' deviations as no outliers and as outliers."""
        v, f = self._variance(values)[:, self.stars], values["outlier_fraction"][:, None]
        wide, r = v + values["outlier_width"][:, None] ** 2, r[:, self.stars]
        inner = np.log1p(-f) - 0.5 * (r**2 / v + np.log(v))
        return inner, np.log(f) - 0.5 * (r**2 / wide + np.log(wide))

    def _log_density(self, values: dict[str, np.ndarray], r: np.ndarray) -> np.ndarray:
        total = np.zeros(self.chains)
        for name in self.names:
            value = values[name]
            total = total + log_prior(self.ladder.choices.prior(name), value)
            total += np.log(value) if name in LOGARITHMIC else 0.0
        v = self._variance(values)
        if self.law == "mixture":
            with np.errstate(invalid="ignore", divide="ignore"):
                total = total + np.logaddexp(*self._parts(values, r)).sum(axis=1)
        else:
            total = total + self._student(values, r[:, self.stars], v[:, self.stars])
        others = ~self.stars
        normal = r[:, others] ** 2 / v[:, others] + np.log(v[:, others])
        return total - 0.5 * normal.sum(axis=1)

    def _student(self, values: dict[str, np.ndarray], r: np.ndarray, v: np.ndarray) -> np.ndarray:
        nu = values["degrees_of_freedom"]
        norm = gammaln(0.5 * nu + 0.5) - gammaln(0.5 * nu) - 0.5 * np.log(nu)
        tail = np.log1p(r**2 / v / nu[:, None]).sum(axis=1)
        return r.shape[1] * norm - 0.5 * (nu + 1.0) * tail - 0.5 * np.log(v).sum(axis=1)

    def sweep(self) -> None:
        """Draw everything once."""
        r = self.y - self.x @ self.A.T
        here = self._log_density(self.values, r)
        for name in self.names * SUBSTEPS:
            step = STEPS[name] * self.rng.normal(size=self.chains)
            value = self.values[name]
            moved = value * np.exp(step) if name in LOGARITHMIC else np.abs(value + step)
            there = self._log_density({**self.values, name: moved}, r)
            taken = np.log(self.rng.random(self.chains)) < np.nan_to_num(there, nan=-1e300) - here
            self.values[name] = np.where(taken, moved, value)
            here = np.where(taken, there, here)
        self._draw_linear(self._weights(r))

    def _weights(self, r: np.ndarray) -> np.ndarray:
        """Inverse variances given labels or scales, which are drawn here."""
        v = self._variance(self.values)
        if self.law == "mixture":
            inner, outer = self._parts(self.values, r)
            label = np.log(self.rng.random(inner.shape)) < outer - np.logaddexp(inner, outer)
            self.labels += label.mean(axis=0)
            v[:, self.stars] += label * self.values["outlier_width"][:, None] ** 2
            return 1.0 / v
        nu = self.values["degrees_of_freedom"][:, None]
        square = r[:, self.stars] ** 2 / v[:, self.stars]
        scale = self.rng.gamma(0.5 * (nu + 1.0), 2.0 / (nu + square))
        weight = 1.0 / v
        weight[:, self.stars] *= scale
        return weight

    def _draw_linear(self, weight: np.ndarray) -> None:
        mean, prior = self._linear_prior()
        weighted = self.A.T[None] * weight[:, None, :]
        precision = weighted @ self.A + np.diag(prior)
        right = weighted @ self.y + prior * mean
        factor = np.linalg.cholesky(precision)
        centre = np.linalg.solve(precision, right[..., None])
        noise = self.rng.normal(size=(*self.x.shape, 1))
        self.x = (centre + np.linalg.solve(np.swapaxes(factor, 1, 2), noise))[..., 0]

    def run(self, sweeps: int, warm_up: int) -> dict[str, np.ndarray]:
        """Draws by name, each of shape (chains, sweeps), in the parameters' own units."""
        kept = []
        for number in range(warm_up + sweeps):
            if number == warm_up:
                self.labels[:] = 0.0
            self.sweep()
            if number >= warm_up:
                kept.append(np.column_stack([self.x, *self.values.values()]))
        self.labels /= sweeps
        whole = np.stack(kept, axis=1)
        draws = dict(zip((*self.linear, *self.values), np.moveaxis(whole, 2, 0), strict=True))
        return {
            name: 10.0 ** (0.2 * values) if in_magnitudes(self.ladder, name) else values
            for name, values in draws.items()
        }
