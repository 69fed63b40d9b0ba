"""Objects whose part of the moments depends on more of phi than one scatter.

Such a part is summed alone, by the block that the posterior itself uses cut down to a
few objects, and taken from the whole.  Cepheids with nuisances of their host (mean
colour, amplitudes of shared errors) are summed host by host, with and without the star.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from ladderfit.influence.given import Given, Taken
from ladderfit.influence.without import taken
from ladderfit.kernels.arrow import Moments, no_moments
from ladderfit.posterior.cepheids import Block
from ladderfit.posterior.joint import Posterior
from ladderfit.posterior.populations import PopulationBlock
from ladderfit.posterior.shared import SharedBlock
from ladderfit.posterior.star_terms import StarTerms, star_terms
from ladderfit.samples import BoolArray


def star_block(joint: Posterior) -> StarTerms | None:
    """The Cepheids star by star, where they are not plain rows."""
    for block in joint.blocks:
        if isinstance(block, StarTerms):
            return block
        if isinstance(block, SharedBlock):
            return star_terms(joint.ladder, joint.frame, joint.split.coefficients)
    return None


def some_stars(block: StarTerms, stay: BoolArray) -> StarTerms | None:
    """The block of some of its stars; None where there are none."""
    if not stay.any():
        return None
    host = np.repeat(block.runs[:, 0], block.runs[:, 2] - block.runs[:, 1])[stay]
    starts = np.flatnonzero(np.diff(host, prepend=-1))
    stops = np.append(starts[1:], len(host))
    runs = np.stack([host[starts], starts, stops], axis=1)
    return replace(taken(block, stay), runs=runs)


def some_supernovae(block: PopulationBlock, stay: BoolArray) -> PopulationBlock | None:
    """The block of some of its independent supernovae; None where there are none."""
    if not stay.any():
        return None
    rows = replace(taken(block.rows, stay), coupled=block.rows.coupled)
    return replace(taken(block, stay), rows=rows, terms=block.terms, means=block.means)


def part_of(given: Given, block: Block | None) -> Moments:
    """The moments of a block alone, at all draws."""
    whole = given.solution.moments
    width = whole.square.shape[-1] - 1
    total = no_moments(len(given.z), whole.local.shape[1], width)
    if block is not None:
        block.add_to(total, given.value)
    return total


def difference(total: Moments, less: Moments, more: Moments | None = None) -> Moments:
    """Moments less some, and with some more."""
    parts = {}
    for name in ("local", "cross", "square", "constant"):
        parts[name] = getattr(total, name) - getattr(less, name)
        if more is not None:
            parts[name] += getattr(more, name)
    return replace(total, **parts)


def stars_one_by_one(given: Given, block: StarTerms) -> Iterator[tuple[int, int, Taken | None]]:
    """Every star, with its host; None where it is the host's only one."""
    n, total = len(block.y), given.solution.moments
    for host, start, stop in block.runs.tolist():
        own = np.zeros(n, dtype=bool)
        own[start:stop] = True
        whole = part_of(given, some_stars(block, own))
        for star in range(start, stop):
            own[star] = False
            rest = some_stars(block, own)
            own[star] = True
            changed = difference(total, whole, part_of(given, rest))
            alone = rest is None and not np.all(changed.local[:, host] > 0.0)
            yield star, host, None if alone else given.replaced(changed)


def supernovae_one_by_one(given: Given, block: PopulationBlock) -> Iterator[Taken]:
    """Every independent supernova of a block, in its order."""
    n = len(block.x)
    for row in range(n):
        part = part_of(given, some_supernovae(block, np.arange(n) == row))
        yield given.replaced(difference(given.solution.moments, part))
