"""Rows whose variance is known beforehand: anchors, priors of theta, the prior of host moduli."""

from __future__ import annotations

import numpy as np

from ladderfit.kernels.arrow import Moments, no_moments, rows
from ladderfit.kernels.coupled import CoupledData, coupled_rows
from ladderfit.ladder import Ladder
from ladderfit.names import with_group
from ladderfit.posterior.coupled import coupled_hosts
from ladderfit.posterior.frame import Frame
from ladderfit.posterior.moduli import log_modulus_norm, tilt_of
from ladderfit.posterior.split import Split


def known_rows(ladder: Ladder, frame: Frame, parts: Split) -> Moments:
    """Their sums, batch of one."""
    anchors = _anchors(ladder, frame, parts.coefficients)
    return anchors + _theta_prior(parts, frame) + _distances(ladder, frame)


def _anchors(ladder: Ladder, frame: Frame, names: tuple[str, ...]) -> Moments:
    """Geometric moduli; what several have in common is a coefficient of its own."""
    anchors = ladder.geometric
    host = np.array([anchor.host for anchor in anchors], dtype=int)
    modulus = np.array([anchor.modulus for anchor in anchors], dtype=float)
    variance = np.array([anchor.error**2 for anchor in anchors], dtype=float)
    columns = np.zeros((len(anchors), len(names)))
    for name, shared in ladder.choices.anchors.shared_errors.items():
        place = with_group("shared_error", name)
        if place in names:
            loads = [shared.loads.get(anchor.name, 0.0) for anchor in anchors]
            columns[:, names.index(place)] = shared.error * np.array(loads)
    if ladder.anchor_covariance is None:
        return frame.modulus_rows(host, columns, modulus, variance).moments(np.zeros(1))
    whole, coupled = frame.columns(host, columns, modulus), coupled_hosts(ladder)
    data = CoupledData(host, whole, ladder.anchor_covariance, frame.hosts, coupled)
    return coupled_rows(data, None).moments(np.zeros(1))


def _theta_prior(parts: Split, frame: Frame) -> Moments:
    columns = np.zeros((len(parts.theta), len(parts.coefficients)))
    for row, name in enumerate(parts.theta):
        columns[row, parts.coefficients.index(name)] = 1.0
    mean = np.array([prior.mean for prior in parts.theta_prior], dtype=float)
    variance = np.array([prior.deviation**2 for prior in parts.theta_prior], dtype=float)
    nowhere = np.full(len(parts.theta), -1)
    return rows(nowhere, columns, mean, variance, frame.hosts).moments(np.zeros(1))


def _distances(ladder: Ladder, frame: Frame) -> Moments:
    """The prior of the moduli, exp(tilt mu) from 0 to the largest modulus.

    The closed form integrates over the whole line; moduli within the bounds by
    many of their errors make the difference nil.
    """
    width = frame.centroid.shape[1]
    prior = ladder.choices.hosts.distance_prior
    tilt, hosts = tilt_of(prior), frame.hosts
    empty = no_moments(1, hosts, width)
    cross, square = empty.cross, empty.square
    cross[:, :, -1] = tilt
    pull = -tilt * frame.centroid.sum(axis=0)
    square[:, :-1, -1] = square[:, -1, :-1] = pull
    constant = np.array([tilt * frame.origin.sum() - hosts * log_modulus_norm(prior)])
    return Moments(empty.local, cross, square, constant)
