"""What independent draws are proposed from: Student-t components, folded where needed."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.special import gammaln, logsumexp

FloatArray = npt.NDArray[np.float64]

_FOLD_WITHIN = 8.0  # a coordinate this many widths from zero needs no folding


@dataclass(frozen=True)
class Component:
    """One multivariate Student-t."""

    centre: FloatArray
    factor: FloatArray
    freedom: float
    share: float

    def log_density(self, z: FloatArray) -> FloatArray:
        """Log density at z, shape (b, d), without folding."""
        d = z.shape[1]
        rotated = np.linalg.solve(self.factor, (z - self.centre).T)
        square = np.sum(rotated**2, axis=0) / self.freedom
        norm = (
            gammaln(0.5 * (self.freedom + d))
            - gammaln(0.5 * self.freedom)
            - 0.5 * d * np.log(np.pi * self.freedom)
            - np.log(np.diag(self.factor)).sum()
        )
        return np.asarray(norm - 0.5 * (self.freedom + d) * np.log1p(square))

    def draw(self, rng: np.random.Generator, size: int) -> FloatArray:
        """Draws, shape (size, d)."""
        normal = rng.standard_normal((size, len(self.centre)))
        stretch = np.sqrt(self.freedom / rng.chisquare(self.freedom, size))
        return np.asarray(self.centre + stretch[:, None] * (normal @ self.factor.T))


@dataclass(frozen=True)
class Proposal:
    """A mixture of components; `folded` marks coordinates that only count by their size."""

    components: tuple[Component, ...]
    folded: npt.NDArray[np.bool_]

    def draw(self, rng: np.random.Generator, size: int) -> FloatArray:
        """Draws, shape (size, d), stratified over the components, in random order."""
        share = np.array([component.share for component in self.components])
        count = np.floor(share / share.sum() * size).astype(int)
        count[0] += size - count.sum()
        z = np.concatenate(
            [c.draw(rng, int(n)) for c, n in zip(self.components, count, strict=True)]
        )
        z[:, self.folded] = np.abs(z[:, self.folded])
        return rng.permutation(z)

    def log_density(self, z: FloatArray) -> FloatArray:
        """Log density at folded draws z, shape (b, d)."""
        total = sum(component.share for component in self.components)
        parts = [
            component.log_density(mirrored) + np.log(component.share / total)
            for component in self.components
            for mirrored in self._mirrors(component, z)
        ]
        return np.asarray(logsumexp(parts, axis=0))

    def _mirrors(self, component: Component, z: FloatArray) -> list[FloatArray]:
        width = np.sqrt(np.sum(component.factor**2, axis=1))
        near = self.folded & (np.abs(component.centre) < _FOLD_WITHIN * width)
        places = np.flatnonzero(near)
        mirrors = []
        for signs in itertools.product((1.0, -1.0), repeat=len(places)):
            flip = np.ones(z.shape[1])
            flip[places] = signs
            mirrors.append(z * flip)
        return mirrors


def component(
    centre: FloatArray, covariance: FloatArray, *, widen: float, freedom: float, share: float
) -> Component:
    """A Student-t with `widen` times the width of the given covariance."""
    factor = np.asarray(np.linalg.cholesky(widen**2 * covariance), dtype=np.float64)
    return Component(centre, factor, freedom, share)
