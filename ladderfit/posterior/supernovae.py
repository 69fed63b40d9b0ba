"""Rows of the third rung: supernovae in hosts, and the expansion."""

from __future__ import annotations

import numpy as np

from ladderfit.choices import Expansion
from ladderfit.kernels.arrow import Rows, rows
from ladderfit.ladder import Ladder
from ladderfit.physics.expansion import peculiar_variance, peculiar_velocities, term_of
from ladderfit.posterior.frame import Frame
from ladderfit.samples import FloatArray, FlowSample, IntArray, PeakSample, VelocitySample

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
    columns, y = _flow_arrays(flow, expansion, names)
    velocity = peculiar_velocities(flow, expansion)
    variance = flow.variance + peculiar_variance(flow.redshift, velocity)
    return rows(np.full(len(flow), -1), columns, y, variance, hosts)


def _flow_arrays(
    flow: FlowSample, expansion: Expansion, names: tuple[str, ...]
) -> tuple[FloatArray, FloatArray]:
    term = term_of(expansion, flow.redshift, flow.redshift_heliocentric)
    columns = _columns(len(flow), names, peak_magnitude=1.0, hubble_constant=-1.0)
    return columns, flow.magnitude - term


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


def correlated_samples(ladder: Ladder) -> tuple[str, ...]:
    """Which of "peaks" and "flow" the covariance correlates within itself or with the other."""
    covariance = ladder.peak_covariance
    if covariance is None:
        return ()
    split = 0 if ladder.peaks is None else len(ladder.peaks)
    near, far = covariance[:split], covariance[split:]
    crossed = bool(np.any(near[:, split:]))
    kinds = {
        "peaks": crossed or _correlates(near[:, :split]),
        "flow": crossed or _correlates(far[:, split:]),
    }
    return tuple(kind for kind, correlates in kinds.items() if correlates)


def _correlates(block: FloatArray) -> bool:
    return int(np.count_nonzero(block)) > int(np.count_nonzero(np.diag(block)))


def supernova_arrays(
    ladder: Ladder, kinds: tuple[str, ...], names: tuple[str, ...]
) -> tuple[IntArray, FloatArray, FloatArray]:
    """Host (-1 in the expansion), columns and y of the samples named, in hosts first."""
    parts: list[tuple[IntArray, FloatArray, FloatArray]] = []
    peaks, flow, expansion = ladder.peaks, ladder.flow, ladder.choices.expansion
    if peaks is not None and "peaks" in kinds:
        columns = _columns(len(peaks), names, peak_magnitude=1.0)
        parts.append((peaks.host, columns, peaks.magnitude))
    if flow is not None and expansion is not None and "flow" in kinds:
        nowhere = np.full(len(flow), -1, dtype=np.int64)
        parts.append((nowhere, *_flow_arrays(flow, expansion, names)))
    host, columns, y = (np.concatenate(arrays) for arrays in zip(*parts, strict=True))
    return host, columns, y


def ladder_rows(
    ladder: Ladder, frame: Frame, names: tuple[str, ...], but: tuple[str, ...] = ()
) -> list[tuple[Rows, str | None]]:
    """All third-rung rows of a ladder, each with the name of the scatter it gets.

    `but` names samples left out: those that a covariance correlates.
    """
    found: list[tuple[Rows, str | None]] = []
    expansion = ladder.choices.expansion
    in_hosts, elsewhere = ladder.choices.peak_scatters
    if ladder.peaks is not None and "peaks" not in but:
        found.append((peak_rows(ladder.peaks, frame, names), in_hosts))
    if expansion is None:
        return found
    if ladder.flow is not None and "flow" not in but:
        found.append((flow_rows(ladder.flow, expansion, frame.hosts, names), elsewhere))
    if ladder.velocities is not None:
        found.append((velocity_rows(ladder.velocities, frame.hosts, names), "velocity_scatter"))
    published = intercept_row(expansion, frame.hosts, names)
    if published is not None:
        found.append((published, None))
    return found
