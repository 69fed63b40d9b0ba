"""Supernovae with a covariance, each taken out.

With W the inverse of the rows' covariance, scatters included, taking out the row j
is taking out an independent row of weight W_jj that measures what the others do
not say of it: the combination W_j / W_jj of all rows.  Several rows J at once leave
A' W A less (A' W_J) (W_JJ)^-1 (W_J' A).  W A and the entries of W that are needed are
smooth in the logarithm of the scatters' squares; they are computed at Chebyshev
points over the range of the draws and interpolated, which is checked.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.polynomial import chebyshev
from scipy.linalg import lapack

from ladderfit.errors import LadderfitError
from ladderfit.influence.given import Given, Taken
from ladderfit.kernels.arrow import LOG_2PI, Moments
from ladderfit.kernels.coupled import CoupledData
from ladderfit.names import with_group
from ladderfit.posterior.coupled import supernova_data
from ladderfit.posterior.populations import PopulationBlock
from ladderfit.samples import FloatArray, IntArray

_NODES = {1: 13, 2: 7}  # per scatter
_FLOOR = 1e-4  # mag^2, added to a squared scatter before the logarithm
_TOLERANCE = 1e-6  # of the interpolated products, against the exact ones
_CHUNK = 16  # rows at a time


@dataclass(frozen=True, eq=False)
class Correlated:
    """Correlated rows at the draws of a `Given`; build with `correlated`.

    Attributes
    ----------
    data : CoupledData
    weight_columns : array, shape (nodes, n, q)
        Coefficients of W [indicators, X, y].
    own : array, shape (nodes, n)
        Of the diagonal of W.
    near : array, shape (nodes, h, h)
        Of W among the rows in hosts, which come first.
    basis : array, shape (s, nodes)
        Polynomials at the draws.
    """

    data: CoupledData
    weight_columns: FloatArray
    own: FloatArray
    near: FloatArray
    basis: FloatArray

    def taken(self, given: Given, wanted: IntArray) -> Iterator[tuple[IntArray, Taken]]:
        """Some of the rows, with what taking each out does, a few at a time."""
        for start in range(0, len(wanted), _CHUNK):
            rows = wanted[start : start + _CHUNK]
            yield rows, given.rows_out(*self.as_independent(given, rows))

    def as_independent(
        self, given: Given, rows: IntArray
    ) -> tuple[FloatArray, FloatArray, IntArray, FloatArray | None]:
        """What `Given.rows_out` is told of some of the rows."""
        inside, coupled = self.data.inside, given.solution.moments.coupled
        size = self.basis @ self.own[:, rows]
        combined = np.tensordot(self.basis, self.weight_columns[:, rows], 1) / size[..., None]
        weights = None
        if coupled is not None:
            weights = np.zeros((*size.shape, len(coupled)))
            weights[:, :, np.searchsorted(coupled, inside)] = combined[:, :, : len(inside)]
        nowhere = np.full(len(rows), -1, dtype=np.int64)
        return combined[:, :, len(inside) :], 1.0 / size, nowhere, weights

    def less(self, total: Moments, rows: IntArray) -> Moments:
        """Moments without some rows in hosts, all at once."""
        inside = self.data.inside
        m = len(inside)
        wide = np.tensordot(self.basis, self.weight_columns[:, rows], 1)
        small = np.tensordot(self.basis, self.near[:, rows[:, None], rows[None, :]], 1)
        lost = np.swapaxes(wide, 1, 2) @ np.linalg.solve(small, wide)
        constant = total.constant - 0.5 * np.linalg.slogdet(small)[1] + 0.5 * len(rows) * LOG_2PI
        square = total.square - lost[:, m:, m:]
        if m == 0 or total.coupled is None or total.coupling is None:
            return replace(total, square=square, constant=constant)
        cross, coupling = total.cross.copy(), total.coupling.copy()
        cross[:, inside] -= lost[:, :m, m:]
        places = np.searchsorted(total.coupled, inside)
        coupling[:, places[:, None], places[None, :]] -= lost[:, :m, :m]
        return replace(total, cross=cross, coupling=coupling, square=square, constant=constant)


def correlated(given: Given) -> Correlated | None:
    """The correlated supernovae of a posterior, if there are any."""
    joint = given.joint
    data = supernova_data(joint.ladder, joint.frame, joint.split.coefficients)
    if data is None or any(isinstance(block, PopulationBlock) for block in joint.blocks):
        return None
    in_hosts, elsewhere = joint.ladder.choices.peak_scatters
    hosted = data.host >= 0
    used = list(
        dict.fromkeys([in_hosts] * bool(hosted.any()) + [elsewhere] * bool((~hosted).any()))
    )
    which = np.where(hosted, used.index(in_hosts) if hosted.any() else 0, len(used) - 1)
    values = np.stack([given.value(name) ** 2 for name in used], axis=1)
    rows = np.column_stack([data.indicators(), data.columns])
    nodes = _NODES[len(used)]
    while nodes <= 4 * _NODES[len(used)]:
        made = _interpolated(data, rows, which, values, nodes)
        if _agrees(made, rows, which, values):
            return made
        nodes = 2 * nodes - 1
    raise LadderfitError(
        "the supernovae's covariance changes too fast with their scatter to be tabulated; "
        "set supernovae aside and draw anew instead"
    )


def _interpolated(
    data: CoupledData, rows: FloatArray, which: IntArray, values: FloatArray, nodes: int
) -> Correlated:
    """Coefficients from exact products at the points, and polynomials at the draws."""
    points, fits, bases = [], [], []
    for column in range(values.shape[1]):
        logs = np.log(values[:, column] + _FLOOR)
        low, high = float(logs.min()), float(logs.max())
        count = nodes if high - low > 1e-9 else 1
        at = chebyshev.chebpts1(count)
        points.append(np.exp(low + 0.5 * (at + 1.0) * (high - low)) - _FLOOR)
        fits.append(np.linalg.inv(chebyshev.chebvander(at, count - 1)))
        scaled = 2.0 * (logs - low) / (high - low) - 1.0 if count > 1 else 0.0 * logs
        bases.append(chebyshev.chebvander(scaled, count - 1))
    exact = [_exact(data, rows, np.array(squares)[which]) for squares in itertools.product(*points)]
    fit = np.asarray(fits[0], dtype=np.float64)
    basis = np.asarray(bases[0], dtype=np.float64)
    for more, other in zip(fits[1:], bases[1:], strict=True):
        fit = np.asarray(np.kron(fit, more), dtype=np.float64)
        basis = (basis[:, :, None] * other[:, None, :]).reshape(len(basis), -1)
    wide, own, near = (
        np.tensordot(fit, np.stack([each[part] for each in exact]), 1) for part in range(3)
    )
    return Correlated(data, wide, own, near, basis)


def _exact(
    data: CoupledData, rows: FloatArray, extra: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """W [indicators, X, y], the diagonal of W, and W among the rows in hosts."""
    factor, bad = lapack.dpotrf(data.covariance + np.diag(np.maximum(extra, 0.0)), lower=1)
    if bad:
        raise np.linalg.LinAlgError("a covariance is not positive definite")
    inverse = lapack.dpotri(factor, lower=1)[0]
    inverse = np.tril(inverse) + np.tril(inverse, -1).T
    n = int(np.sum(data.host >= 0))
    return inverse @ rows, np.diag(inverse).copy(), inverse[:n, :n].copy()


def _agrees(made: Correlated, rows: FloatArray, which: IntArray, values: FloatArray) -> bool:
    """Whether the interpolation is exact enough at some draws."""
    for draw in np.linspace(0, len(values) - 1, 3).astype(int):
        wide, own, _ = _exact(made.data, rows, values[draw][which])
        basis = made.basis[draw]
        off = np.abs(np.tensordot(basis, made.weight_columns, 1) - wide).max()
        diagonal = np.abs(basis @ made.own / own - 1.0).max()
        if off > _TOLERANCE * np.abs(wide).max() or diagonal > _TOLERANCE:
            return False
    return True


def correlated_anchors(given: Given) -> Correlated | None:
    """The geometric anchors as correlated rows, if a covariance correlates them."""
    ladder, frame = given.joint.ladder, given.joint.frame
    coupled = given.solution.moments.coupled
    if ladder.anchor_covariance is None or coupled is None:
        return None
    host, columns = anchor_columns(given)
    data = CoupledData(host, columns, ladder.anchor_covariance, frame.hosts, coupled)
    rows = np.column_stack([data.indicators(), columns])
    wide, own, near = _exact(data, rows, np.zeros(len(host)))
    return Correlated(data, wide[None], own[None], near[None], np.ones((len(given.z), 1)))


def anchor_columns(given: Given) -> tuple[IntArray, FloatArray]:
    """Host, shape (n,), and [columns, modulus] in the frame, shape (n, k + 1), of each anchor."""
    ladder, names = given.joint.ladder, given.joint.split.coefficients
    columns = np.zeros((len(ladder.geometric), len(names)))
    for name, shared in ladder.choices.anchors.shared_errors.items():
        if with_group("shared_error", name) in names:
            loads = [shared.loads.get(anchor.name, 0.0) for anchor in ladder.geometric]
            place = names.index(with_group("shared_error", name))
            columns[:, place] = shared.error * np.array(loads)
    host = np.array([anchor.host for anchor in ladder.geometric], dtype=np.int64)
    moduli = np.array([anchor.modulus for anchor in ladder.geometric])
    return host, given.joint.frame.columns(host, columns, moduli)
