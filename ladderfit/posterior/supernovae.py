"""Rows of the third rung: supernovae in hosts, and the expansion."""

from __future__ import annotations

import numpy as np

from ladderfit.choices import Expansion
from ladderfit.kernels.arrow import Rows, rows
from ladderfit.ladder import Ladder
from ladderfit.peak_terms import PeakTerms, peak_terms
from ladderfit.physics.expansion import peculiar_variance, peculiar_velocities, term_of
from ladderfit.posterior.frame import Frame
from ladderfit.samples import FloatArray, FlowSample, IntArray, PeakSample, VelocitySample

_SMALLEST_VELOCITY_VARIANCE = 1e-6  # (km/s)^2, so that a vanishing scatter stays finite


def _columns(n: int, names: tuple[str, ...], **values: FloatArray | float) -> FloatArray:
    columns = np.zeros((n, len(names)))
    for name, value in values.items():
        columns[:, names.index(name)] = value
    return columns


def peak_rows(peaks: PeakSample, terms: PeakTerms, frame: Frame, names: tuple[str, ...]) -> Rows:
    """m = mu[host] + M + terms + e; inputs whose errors are met are left out of the terms."""
    columns = _peak_columns(peaks, terms, names)
    return frame.modulus_rows(peaks.host, columns, peaks.magnitude, peaks.variance)


def _peak_columns(peaks: PeakSample, terms: PeakTerms, names: tuple[str, ...]) -> FloatArray:
    return _columns(len(peaks), names, peak_magnitude=1.0, **terms.design(peaks))


def flow_variance(ladder: Ladder) -> FloatArray:
    """Variance of each peak in the expansion, peculiar velocities included [mag^2], shape (n,)."""
    flow, expansion = ladder.flow, ladder.choices.expansion
    if flow is None or expansion is None:
        return np.empty(0)
    velocity = peculiar_velocities(flow, expansion)
    return np.asarray(flow.variance + peculiar_variance(flow.redshift, velocity))


def flow_rows(
    flow: FlowSample, ladder: Ladder, expansion: Expansion, hosts: int, names: tuple[str, ...]
) -> Rows:
    """m - distance term = M - 5 log10 H0 + terms + e, peculiar velocities in the variance."""
    columns, y = _flow_arrays(flow, ladder, expansion, names)
    return rows(np.full(len(flow), -1), columns, y, flow_variance(ladder), hosts)


def _flow_arrays(
    flow: FlowSample, ladder: Ladder, expansion: Expansion, names: tuple[str, ...]
) -> tuple[FloatArray, FloatArray]:
    term = term_of(expansion, flow.redshift, flow.redshift_heliocentric)
    design = terms_of(ladder).design(flow)
    columns = _columns(len(flow), names, peak_magnitude=1.0, hubble_constant=-1.0, **design)
    return columns, flow.magnitude - term


def terms_of(ladder: Ladder) -> PeakTerms:
    """The terms of the peak-magnitude relation of a ladder."""
    return peak_terms(ladder.choices, ladder.peaks, ladder.flow)


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
        columns = _peak_columns(peaks, terms_of(ladder), names)
        parts.append((peaks.host, columns, peaks.magnitude))
    if flow is not None and expansion is not None and "flow" in kinds:
        nowhere = np.full(len(flow), -1, dtype=np.int64)
        parts.append((nowhere, *_flow_arrays(flow, ladder, expansion, names)))
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
        found.append((peak_rows(ladder.peaks, terms_of(ladder), frame, names), in_hosts))
    if expansion is None:
        return found
    if ladder.flow is not None and "flow" not in but:
        flow = flow_rows(ladder.flow, ladder, expansion, frame.hosts, names)
        found.append((flow, elsewhere))
    if ladder.velocities is not None:
        found.append((velocity_rows(ladder.velocities, frame.hosts, names), "velocity_scatter"))
    published = intercept_row(expansion, frame.hosts, names)
    if published is not None:
        found.append((published, None))
    return found
