"""What is added to parallaxes: residual offsets, and errors shared on the sky.

All of it is linear in its parameters: the common offset, offsets of groups in its
place, a slope with G, and standard-normal amplitudes of the leading modes of the
shared errors.  Their correlation matrix exp(-separation / length) is split into
modes until these hold 99 % of its trace; what is left of each star's variance is
added to its own error, so that only correlations of the last 1 % are lost.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from ladderfit.choices import Choices, Parallaxes
from ladderfit.names import with_group
from ladderfit.physics.sky import separations
from ladderfit.relations import members
from ladderfit.samples import FloatArray, StarSample

REFERENCE_G = 10.0  # mag: where an offset linear in G equals the common offset
KEPT_TRACE = 0.99  # of the shared errors' correlation matrix


@dataclass(frozen=True, eq=False)
class Offsets:
    """What parallaxes are shifted by.

    Attributes
    ----------
    columns : mapping of str to array, shape (n,)
        Column of each parameter, in mas per unit of it.
    variance : array, shape (n,)
        Shared errors beyond the modes kept [mas^2].
    """

    columns: Mapping[str, FloatArray]
    variance: FloatArray


def offset_terms(choices: Choices, stars: StarSample, hosts: tuple[str, ...]) -> Offsets:
    """The offsets of a sample of parallax stars; `hosts` are the ladder's."""
    section = choices.anchors.parallaxes
    n = len(stars)
    columns: dict[str, FloatArray] = {}
    if section is None:
        return Offsets(columns, np.zeros(n))
    common = np.ones(n)
    for name in section.offsets:
        inside = members(choices.groups[name], stars, hosts) & (common > 0.0)
        columns[with_group("parallax_offset", name)] = inside.astype(float)
        common[inside] = 0.0
    if common.any() or any(cluster.offset for cluster in section.clusters.values()):
        columns = {"parallax_offset": common, **columns}
    if section.offset_slope and stars.extras.g_magnitude is not None:
        columns["parallax_offset_slope"] = stars.extras.g_magnitude - REFERENCE_G
    modes, variance = shared_errors(section, stars)
    for place, mode in enumerate(modes, start=1):
        columns[with_group("parallax_field", str(place))] = mode
    return Offsets(columns, variance)


def shared_errors(section: Parallaxes, stars: StarSample) -> tuple[FloatArray, FloatArray]:
    """Leading modes of the shared errors, shape (m, n) [mas], and the variance left [mas^2]."""
    correlation, sky = section.correlation, stars.extras
    n = len(stars)
    if correlation is None or sky.longitude is None or sky.latitude is None:
        return np.empty((0, n)), np.zeros(n)
    matrix = np.exp(-separations(sky.longitude, sky.latitude) / correlation.length)
    values, vectors = np.linalg.eigh(matrix)
    values, vectors = np.maximum(values[::-1], 0.0), vectors[:, ::-1]
    most = int(np.searchsorted(np.cumsum(values), KEPT_TRACE * n)) + 1
    modes = correlation.amplitude * np.sqrt(values[:most, None]) * vectors[:, :most].T
    left = correlation.amplitude**2 - np.sum(modes**2, axis=0)
    return modes, np.maximum(left, 0.0)
