"""Rows of the third rung: supernovae in hosts, and the expansion."""

from __future__ import annotations

import numpy as np

from ladderfit.choices import Expansion
from ladderfit.kernels.arrow import Rows, rows
from ladderfit.ladder import Ladder
from ladderfit.physics.expansion import distance_term, peculiar_variance
from ladderfit.posterior.frame import Frame
from ladderfit.samples import FloatArray, FlowSample, PeakSample, VelocitySample

_SMALLEST_VELOCITY_VARIANCE = 1e-6  # (km/s)^2, so that a vanishing scatter stays finite


def _columns(n: int, names: tuple[str, ...], **values: FloatArray | float) -> FloatArray:
    columns = np.zeros((n, len(names)))
    for name, value in values.items():
        columns[:, names.index(name)] = value
    return columns


def peak_rows(peaks: PeakSample, frame: Frame, names: tuple[str, ...]) -> Rows:
    """m = mu[host] + M + e."""
    columns = _columns(len(peaks), names, peak_magnitude=1.0)
    return frame.modulus_rows(peaks.host, columns, peaks.magnitude, peaks.variance)


def flow_rows(flow: FlowSample, expansion: Expansion, hosts: int, names: tuple[str, ...]) -> Rows:
    """m - distance term = M - 5 log10 H0 + e, peculiar velocities in the variance."""
    term = distance_term(flow.redshift, flow.redshift_heliocentric, expansion.q0, expansion.j0)
    variance = flow.variance + peculiar_variance(flow.redshift, expansion.peculiar_velocity)
    columns = _columns(len(flow), names, peak_magnitude=1.0, hubble_constant=-1.0)
    nowhere = np.full(len(flow), -1)
    return rows(nowhere, columns, flow.magnitude - term, variance, hosts)


def intercept_row(expansion: Expansion, hosts: int, names: tuple[str, ...]) -> Rows | None:
    """5 log10 H0 - M = 25 + 5 a + e, from a published intercept a = log10(c z f) - 0.2 m."""
    if expansion.intercept is None:
        return None
    columns = _columns(1, names, peak_magnitude=-1.0, hubble_constant=1.0)
    y = np.array([25.0 + 5.0 * expansion.intercept.value])
    variance = np.array([(5.0 * expansion.intercept.error) ** 2])
    return rows(np.array([-1]), columns, y, variance, hosts)


def velocity_rows(velocities: VelocitySample, hosts: int, names: tuple[str, ...]) -> Rows:
    """v = H0 d (+ v0) + e."""
    values: dict[str, FloatArray | float] = {"hubble_constant": velocities.distance}
    if "velocity_constant" in names:
        values["velocity_constant"] = 1.0
    columns = _columns(len(velocities), names, **values)
    nowhere = np.full(len(velocities), -1)
    variance = np.full(len(velocities), _SMALLEST_VELOCITY_VARIANCE)
    return rows(nowhere, columns, velocities.velocity, variance, hosts)


def ladder_rows(
    ladder: Ladder, frame: Frame, names: tuple[str, ...]
) -> list[tuple[Rows, str | None]]:
    """All third-rung rows of a ladder, each with the name of the scatter it gets."""
    found: list[tuple[Rows, str | None]] = []
    expansion = ladder.choices.expansion
    if ladder.peaks is not None:
        found.append((peak_rows(ladder.peaks, frame, names), "peak_scatter"))
    if expansion is None:
        return found
    if ladder.flow is not None:
        found.append((flow_rows(ladder.flow, expansion, frame.hosts, names), "peak_scatter"))
    if ladder.velocities is not None:
        found.append((velocity_rows(ladder.velocities, frame.hosts, names), "velocity_scatter"))
    published = intercept_row(expansion, frame.hosts, names)
    if published is not None:
        found.append((published, None))
    return found
