"""The data rows of a ladder by kind, and whether they are all that its posterior holds."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from ladderfit.errors import LadderfitError
from ladderfit.influence.given import Given
from ladderfit.influence.without import taken
from ladderfit.kernels.arrow import Moments, Rows, no_moments
from ladderfit.posterior.cepheids import NoisyBlock, ScatterBlock, plain_rows
from ladderfit.posterior.joint import Posterior
from ladderfit.posterior.populations import PopulationBlock
from ladderfit.posterior.shared import SharedBlock
from ladderfit.posterior.star_terms import StarTerms
from ladderfit.posterior.supernovae import correlated_samples, ladder_rows
from ladderfit.relations import scatters
from ladderfit.samples import FloatArray, IntArray

CEPHEID, PEAK, FLOW, VELOCITY = "Cepheid", "supernova", "in the expansion", "velocity"
STAR, HOST = "parallax star", "host"

_PROBES = 6  # draws at which the moments are compared
_AGREE = 1e-6


class NotCoveredError(LadderfitError):
    """The ladder's posterior holds more than this part knows."""


@dataclass(frozen=True, eq=False)
class RowSet:
    """Independent rows of one kind, widened by one scatter.

    Attributes
    ----------
    kind : str
    place : array of int, shape (n,)
        In the sample, row by row.
    host : array of int, shape (n,)
        -1 where a row has no host.
    rows : Rows
    scatter : str or None
    """

    kind: str
    place: IntArray
    host: IntArray
    rows: Rows
    scatter: str | None

    def variance(self, given: Given) -> FloatArray:
        """Of every row, shape (s, n) or (1, n)."""
        if self.scatter is None:
            return self.rows.variance[None, :]
        return np.asarray(self.rows.variance + given.value(self.scatter)[:, None] ** 2)

    def among(self, host: int) -> IntArray:
        """Which rows are those of a host."""
        return np.flatnonzero(self.host == host)


def row_sets(joint: Posterior) -> list[RowSet]:
    """All rows of objects that are independent, and depend on phi by one scatter alone."""
    ladder, frame, names = joint.ladder, joint.frame, joint.split.coefficients
    found: list[RowSet] = []
    stars, others = ladder.cepheids, {type(block) for block in joint.blocks}
    special = joint.robust is not None or others & {NoisyBlock, StarTerms, SharedBlock}
    if stars is not None and not special:
        which = scatters(ladder.choices, stars, ladder.hosts)[1]
        for number, (rows, scatter) in enumerate(plain_rows(ladder, frame)):
            place = np.flatnonzero(which == number)
            found.append(RowSet(CEPHEID, place, stars.host[place], rows, scatter))
    together = ("peaks", "flow") if PopulationBlock in others else correlated_samples(ladder)
    kinds = [
        (PEAK, ladder.peaks if "peaks" not in together else None),
        (FLOW, ladder.flow if "flow" not in together else None),
        (VELOCITY, ladder.velocities),
    ]
    present = [(kind, sample) for kind, sample in kinds if sample is not None]
    listed = ladder_rows(ladder, frame, names, but=together)
    for (kind, sample), (rows, widened) in zip(present, listed, strict=False):
        host = getattr(sample, "host", np.full(len(sample), -1, dtype=np.int64))
        place = np.argsort(host, kind="stable")  # the order of rows
        found.append(RowSet(kind, place, host[place], rows, widened))
    return found


def noisy_block(joint: Posterior) -> NoisyBlock | None:
    """The Cepheids whose inputs have errors, if they do."""
    return next((block for block in joint.blocks if isinstance(block, NoisyBlock)), None)


def cut(block: NoisyBlock, host: int) -> NoisyBlock | None:
    """The stars of one host alone."""
    for number, start, stop in block.slices:
        if number == host:
            own = np.zeros(len(block.y), dtype=bool)
            own[start:stop] = True
            return replace(taken(block, own), slices=((host, 0, stop - start),))
    return None


def rows_of_host(joint: Posterior) -> IntArray:
    """How many rows each host has: Cepheids, supernovae and anchor."""
    ladder = joint.ladder
    count = np.zeros(len(ladder.hosts), dtype=np.int64)
    for sample in (ladder.cepheids, ladder.peaks):
        if sample is not None:
            count += np.bincount(sample.host, minlength=len(count))
    for anchor in ladder.geometric:
        count[anchor.host] += 1
    return count


def check_covered(given: Given, sets: list[RowSet]) -> None:
    """Raise unless these rows, anchors and priors are all that the posterior is made of.

    The moments at some draws, less those of the data, have to be the same for all
    draws, as those of anchors and priors are; and the log density has to be the sum of
    its known parts.

    Raises
    ------
    NotCoveredError
        If they are not.
    """
    joint = given.joint
    if not len(given.z):
        return
    z = given.z[np.linspace(0, len(given.z) - 1, _PROBES).astype(int)]
    probe = Given(joint, z, ())
    if _strays(probe.solution.moments, data_moments(probe, sets)):
        _refuse()
    whole = probe.solution.log_evidence + joint.split.log_prior(z)
    whole += joint.log_parallaxes(z).sum(axis=1)
    if joint.limits is not None:
        whole += joint.limits.log_factor(probe.solution, probe.value)
    if not np.allclose(whole, joint.log_density(z), rtol=0.0, atol=1e-6):
        _refuse()


def _strays(total: Moments, data: Moments) -> bool:
    """Whether what is not data differs between draws, in units of each sum's natural size."""
    width = np.sqrt(np.abs(np.diagonal(total.square, axis1=1, axis2=2)).max(axis=0)) + 1e-9
    weight = np.sqrt(np.abs(total.local).max(axis=0))
    sizes = {
        "local": weight**2,
        "cross": weight[:, None] * width,
        "square": width[:, None] * width,
    }
    return any(
        bool(np.any(np.ptp(getattr(total, name) - getattr(data, name), axis=0) > _AGREE * size))
        for name, size in sizes.items()
    )


def _refuse() -> None:
    raise NotCoveredError(
        "leaving objects out one by one does not cover all of this ladder's data: its posterior "
        "holds more than the rows known here; refit with the object set aside instead"
    )


def data_moments(given: Given, sets: list[RowSet]) -> Moments:
    """Moments of all rows of objects, at the draws of `given`."""
    joint, batch = given.joint, len(given.z)
    whole = given.solution.moments
    width = whole.square.shape[-1] - 1
    total = no_moments(batch, whole.local.shape[1], width, whole.coupled)
    for each in sets:
        scatter = np.zeros(batch) if each.scatter is None else given.value(each.scatter)
        each.rows.add_to(total, scatter**2)
    for block in joint.blocks:
        if not isinstance(block, ScatterBlock):
            block.add_to(total, given.value)
    return total


def slow_kinds(joint: Posterior) -> frozenset[str]:
    """Kinds whose objects cannot be taken out of sums: the ladder is built without each.

    Those are hosts with magnitude limits, hosts whose Cepheids deviate as no normal
    does (but for single Cepheids), and supernovae that both have errors of their
    inputs and are correlated.
    """
    found: set[str] = set()
    if joint.limits is not None:
        found |= {CEPHEID, PEAK, HOST}
    if joint.robust is not None:
        found |= {PEAK, HOST}
    for block in joint.blocks:
        if isinstance(block, PopulationBlock) and block.independent is None:
            found |= {PEAK, FLOW, HOST}
    return frozenset(found)
