"""The moduli of parallax stars: their prior, and which stars share one."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ladderfit.choices import LARGEST_MODULUS, DistancePrior, Parallaxes
from ladderfit.kernels import detection
from ladderfit.kernels.quadrature import LOG_2PI, log_parallax_integrals
from ladderfit.kernels.sightlines import VOLUME_TILT, log_falloff_integrals, sight_lines
from ladderfit.samples import FloatArray, IntArray, StarSample


def log_modulus_norm(prior: DistancePrior) -> float:
    """Log of the integral of the unnormalised distance prior from 0 to the largest modulus."""
    if prior == "flat in modulus":
        return float(np.log(LARGEST_MODULUS))
    return float(VOLUME_TILT * LARGEST_MODULUS - np.log(VOLUME_TILT))


def tilt_of(prior: DistancePrior) -> float:
    """The prior of a modulus is exp(tilt mu): 0, or 0.6 ln 10 where uniform in volume."""
    return 0.0 if prior == "flat in modulus" else VOLUME_TILT


@dataclass(frozen=True, eq=False)
class Distances:
    """The prior of the moduli, one per star or cluster.

    Attributes
    ----------
    kind : int
        Of `ladderfit.kernels.detection`.
    flat : pair of float
        Bounds of the modulus, for a prior flat in it [mag].
    sight : array, shape (g, 7) or (g, 0)
    tables : array, shape (g, nodes, 2) or (g, 0, 2)
        Cumulative prior, for a disc.
    """

    kind: int
    flat: tuple[float, float]
    sight: FloatArray
    tables: FloatArray

    def log_integrals(
        self, a: FloatArray, v: FloatArray, plx: FloatArray, err: FloatArray, rate: FloatArray
    ) -> FloatArray:
        """Log of the integral over each modulus, shape (b, g), the prior not normalised."""
        if self.kind == detection.FLAT:
            return log_parallax_integrals(a, v, plx, err)
        if self.kind == detection.VOLUME:
            found = log_parallax_integrals(a, v, plx, err, VOLUME_TILT)
            return found - 10.0 * VOLUME_TILT
        return log_falloff_integrals(a, v, plx, err, rate, self.sight)

    def log_norm(self, rate: FloatArray) -> FloatArray:
        """Log of the integral of the prior, shape (b, 1) or (1, g)."""
        if self.kind == detection.FLAT:
            return np.array([[np.log(self.flat[1] - self.flat[0])]])
        if self.kind == detection.VOLUME:
            far = VOLUME_TILT * (LARGEST_MODULUS - 10.0) - np.log(VOLUME_TILT)
            return np.array([[far]])
        if self.kind == detection.EXPONENTIAL:
            return np.asarray(np.log(6.0 / VOLUME_TILT) - 3.0 * np.log(rate))[:, None]
        return np.asarray(np.log(self.tables[:, -1, 0]))[None, :]


@dataclass(frozen=True, eq=False)
class Sharing:
    """Which stars share a modulus.

    Attributes
    ----------
    order : array of int, shape (n,)
        Stars sorted by cluster; a star in none is alone.
    starts : array of int, shape (g + 1,)
        Places in `order` where clusters start.
    parallax_order, parallax_starts : array of int
        The same for parallaxes: those of the stars, then those of clusters.
    """

    order: IntArray
    starts: IntArray
    parallax_order: IntArray
    parallax_starts: IntArray


def sharing_of(stars: StarSample, measured: list[int]) -> Sharing | None:
    """Who shares a modulus; `measured` are the clusters that have a parallax of their own."""
    cluster = stars.extras.cluster
    if cluster is None:
        return None
    n, clusters = len(stars), len(stars.extras.clusters)
    alone = np.arange(n) + clusters
    group = np.where(cluster >= 0, cluster, alone)
    both = np.concatenate([group, np.array(measured, dtype=np.int64)])
    order, starts = _sorted(group)
    parallax_order, parallax_starts = _sorted(both)
    return Sharing(order, starts, parallax_order, parallax_starts)


def _sorted(group: IntArray) -> tuple[IntArray, IntArray]:
    order = np.argsort(group, kind="stable")
    edges = np.flatnonzero(np.diff(group[order])) + 1
    return order, np.array([0, *edges, len(group)], dtype=np.int64)


def distances_of(section: Parallaxes, stars: StarSample, sharing: Sharing | None) -> Distances:
    """The prior of every modulus; of a cluster's, along the sight line of its first star."""
    first = np.arange(len(stars)) if sharing is None else sharing.order[sharing.starts[:-1]]
    sight, tables = np.empty((len(first), 0)), np.empty((len(first), 0, 2))
    kind = detection.FLAT if section.distance_prior == "flat in modulus" else detection.VOLUME
    disc, sky = section.disc, stars.extras
    if section.exponential is not None:
        kind = detection.EXPONENTIAL
    elif disc is not None and sky.longitude is not None and sky.latitude is not None:
        kind = detection.DISC
        sight = sight_lines(
            sky.longitude[first],
            sky.latitude[first],
            length=disc.length,
            height=disc.height,
            solar_radius=disc.solar_radius,
            solar_height=disc.solar_height,
        )
        tables = detection.disc_tables(sight)
    flat = (0.0, LARGEST_MODULUS) if section.modulus_bounds is None else section.modulus_bounds
    return Distances(kind, flat, sight, tables)


def product(
    value: FloatArray, variance: FloatArray, starts: IntArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Normals of a common mean as one: value, variance, and the log of what is left over.

    Shapes (b, n) in, (b, g) out; normal densities multiply to that of the result
    times the exponential of what is left over.
    """
    weight = 1.0 / variance
    total = np.add.reduceat(weight, starts[:-1], axis=1)
    mean = np.add.reduceat(weight * value, starts[:-1], axis=1) / total
    size = np.diff(starts)
    apart = value - np.repeat(mean, size, axis=1)
    inside = np.add.reduceat(weight * apart**2 + np.log(variance), starts[:-1], axis=1)
    left = -0.5 * (inside + (size - 1) * LOG_2PI + np.log(total))
    return mean, 1.0 / total, left
