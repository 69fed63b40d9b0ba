"""Photometric errors that a host's stars share: backgrounds, crowding, zero points of frames.

Every host has amplitudes of its own, normal about zero with standard deviations that
are fixed or in phi; a star's loadings say how much of each it has.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ladderfit.kernels.arrow import Moments
from ladderfit.kernels.shared import SharedRows, eliminated, shared_sums, tables_of
from ladderfit.ladder import Ladder
from ladderfit.posterior.cepheids import Values
from ladderfit.posterior.frame import Frame, star_rows
from ladderfit.posterior.split import shared_photometry
from ladderfit.priors import Fixed
from ladderfit.relations import scatters
from ladderfit.samples import StarSample


@dataclass(frozen=True, eq=False)
class SharedBlock:
    """Cepheids whose sums are tabulated, one set per scatter; a block of the posterior.

    Attributes
    ----------
    rows : tuple of SharedRows
    scatters : tuple of str
    places : tuple of list of int
        Of each set: its hosts among all.
    widths : tuple of str
        Names of the amplitudes' standard deviations.
    hosts : int
    """

    rows: tuple[SharedRows, ...]
    scatters: tuple[str, ...]
    places: tuple[list[int], ...]
    widths: tuple[str, ...]
    hosts: int

    def add_to(self, total: Moments, values: Values) -> None:
        """Add the sums at the given parameter values to `total`, in place."""
        batch, width = len(total.constant), total.square.shape[1]
        q = len(self.widths)
        constant, square = np.zeros(batch), np.zeros((batch, width, width))
        sums = np.zeros((batch, self.hosts, q + 1, q + 1 + width))
        for rows, scatter, places in zip(self.rows, self.scatters, self.places, strict=True):
            more, products, by_host = rows.unpacked(values(scatter) ** 2)
            constant += more
            square += products
            sums[:, places] += by_host
        spread = np.stack([values(name) for name in self.widths], axis=1)
        found = eliminated(constant, square, sums, spread)
        total.local[:] += found.local
        total.cross[:] += found.cross
        total.square[:] += found.square
        total.constant[:] += found.constant


def shared_block(
    ladder: Ladder, frame: Frame, stars: StarSample, largest: Callable[[str], float]
) -> SharedBlock:
    """The Cepheids of a ladder with shared terms.

    Sums are tabulated up to the extra variance ``largest(name)`` of each scatter.
    """
    names, which = scatters(ladder.choices, stars, ladder.hosts)
    if stars.loadings is None:
        raise TypeError("shared terms without loadings")
    rows, places = [], []
    for place, name in enumerate(names):
        chosen = which == place
        mine = star_rows(ladder, frame, stars, chosen)  # keeps the order: sorted by host
        sums = shared_sums(mine, np.ascontiguousarray(stars.loadings[chosen]))
        fixed = isinstance(ladder.choices.prior(name), Fixed)
        rows.append(SharedRows(sums, [] if fixed else tables_of(sums, largest(name))))
        places.append([host for host, _, _ in mine.slices])
    widths = shared_photometry(ladder)
    return SharedBlock(tuple(rows), names, tuple(places), widths, frame.hosts)
