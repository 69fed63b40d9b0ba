r"""The chance that a star enters a sample with limits; compiled.

For the unnormalised prior p(mu) of a modulus and stars with a magnitude limit, a
parallax limit or both,

    D = \int p(mu) \prod_i Phi((B_i - mu) / w_i) Phi((10^(2 - 0.2 mu) - x_i) / s_i) d mu ,

over the stars i that share the modulus (one, but for clusters).  B is the modulus
at which a star would be at the magnitude limit.

With a magnitude limit alone, integration by parts turns this into the mean of the
cumulative prior P over N(mu | B, w^2): in closed form for priors flat in modulus
and uniform in volume, a dozen equidistant nodes otherwise.  In general P is taken
up to where every factor is 1, and Gauss-Legendre panels march from there, as wide
as the factors are smooth, until one of them is 0.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled, in_halves
from ladderfit.kernels.narrow import K
from ladderfit.kernels.sightlines import VOLUME_TILT, log_falloff

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

FLAT, VOLUME, EXPONENTIAL, DISC = 0, 1, 2, 3

_CERTAIN = 6.5  # widths before a limit from which a factor counts as 1
_NEVER = 8.5  # widths beyond it from which a factor counts as 0
_PANEL = 3.0  # widths per panel
_SMOOTH = 0.4  # mag: width on which priors count as smooth
_FINE = 0.3  # mag: longest step between nodes of the mean of P
_MOST_NODES = 2000  # reached only at widths of many magnitudes
_FARTHEST = 60.0  # scale lengths beyond which an exponential prior counts as 0
_ROOT2 = math.sqrt(2.0)

_TABLE_START, _TABLE_STEP, _TABLE_SIZE = 0.0, 0.01, 2501  # mag
_X3, _W3 = np.polynomial.legendre.leggauss(3)
_X8, _W8 = np.polynomial.legendre.leggauss(8)


@compiled
def _phi(z: float) -> float:
    if z > 8.5:
        return 1.0
    return 0.5 * math.erfc(-z / _ROOT2)


@compiled
def _distance(mu: float) -> float:
    return math.exp(K * (mu - 10.0))


@compiled
def _density(
    mu: float, kind: int, rate: float, sight: FloatArray, flat: tuple[float, float]
) -> float:
    """The unnormalised prior p."""
    if kind == FLAT:
        return 1.0 if flat[0] <= mu <= flat[1] else 0.0
    d = _distance(mu)
    if kind == VOLUME:
        return d * d * d
    return d * d * d * math.exp(log_falloff(d, rate, sight))


@compiled
def _cumulative(
    mu: float,
    kind: int,
    rate: float,
    sight: FloatArray,
    table: FloatArray,
    flat: tuple[float, float],
) -> float:
    """The integral P of p up to a modulus."""
    if kind == FLAT:
        return min(max(mu - flat[0], 0.0), flat[1] - flat[0])
    d = _distance(mu)
    if kind == VOLUME:
        return d * d * d / VOLUME_TILT
    if kind == EXPONENTIAL:
        x = rate * d
        if x < 0.05:
            series = 1.0 / 3.0 - x * (0.25 - x * (0.1 - x * (1.0 / 36.0 - x / 168.0)))
            return d * d * d * series / K
        return (2.0 - math.exp(-x) * (2.0 + x * (2.0 + x))) / (K * rate**3)
    place = (mu - _TABLE_START) / _TABLE_STEP
    if place <= 0.0:
        return d * d * d * math.exp(log_falloff(d, rate, sight)) / VOLUME_TILT
    cell = min(int(place), _TABLE_SIZE - 2)
    if place >= _TABLE_SIZE - 1:
        return float(table[_TABLE_SIZE - 1, 0])
    t = place - cell
    low, high = table[cell, 0], table[cell + 1, 0]
    slope_low, slope_high = table[cell, 1] * _TABLE_STEP, table[cell + 1, 1] * _TABLE_STEP
    bend = 2.0 * (low - high) + slope_low + slope_high
    return float(low + t * (slope_low + t * (high - low - slope_low - bend + t * bend)))


@compiled
def _disc_table(sight: FloatArray, table: FloatArray) -> None:
    """P and p of one sight line on the grid of moduli; table has shape (size, 2)."""
    flat = (0.0, 0.0)
    total = _density(_TABLE_START, DISC, 0.0, sight, flat) / VOLUME_TILT
    for cell in range(_TABLE_SIZE):
        start = _TABLE_START + cell * _TABLE_STEP
        table[cell, 0] = total
        table[cell, 1] = _density(start, DISC, 0.0, sight, flat)
        for node in range(3):
            mu = start + 0.5 * _TABLE_STEP * (1.0 + _X3[node])
            total += 0.5 * _TABLE_STEP * _W3[node] * _density(mu, DISC, 0.0, sight, flat)


def disc_tables(sight: FloatArray) -> FloatArray:
    """Cumulative priors of a disc along each sight line.

    Parameters
    ----------
    sight : array, shape (n, 7)
        Rows of `ladderfit.kernels.sightlines.sight_lines`.

    Returns
    -------
    array, shape (n, nodes, 2)
        Integral of the prior up to each modulus of the grid, and the prior there.
    """
    tables = np.empty((len(sight), _TABLE_SIZE, 2))
    for line, table in zip(np.array(sight, dtype=float, order="C"), tables, strict=True):
        _disc_table(line, table)
    return tables


@compiled
def _magnitude_limited(
    limit: float,
    width: float,
    kind: int,
    rate: float,
    sight: FloatArray,
    table: FloatArray,
    flat: tuple[float, float],
) -> float:
    """Log of D for one star with a magnitude limit alone."""
    if kind == VOLUME:
        c = VOLUME_TILT
        return c * (limit - 10.0) + 0.5 * (c * width) ** 2 - math.log(c)
    if kind == FLAT:
        near, far = (limit - flat[0]) / width, (limit - flat[1]) / width
        return math.log(max(width * (_mean_excess(near) - _mean_excess(far)), 1e-300))
    step = min(0.9, _FINE / width)
    count = min(math.ceil((13.0 + VOLUME_TILT * width) / step), _MOST_NODES)
    step = (13.0 + VOLUME_TILT * width) / count
    total = 0.0
    for node in range(count + 1):
        t = -6.5 + node * step
        weight = math.exp(-0.5 * t * t)
        total += weight * _cumulative(limit + width * t, kind, rate, sight, table, flat)
    return math.log(max(total * step / math.sqrt(2.0 * math.pi), 1e-300))


@compiled
def _mean_excess(z: float) -> float:
    """The integral of Phi up to z."""
    return z * _phi(z) + math.exp(-0.5 * z * z) / math.sqrt(2.0 * math.pi)


@compiled
def _certain_until(
    limit: FloatArray, width: FloatArray, least: FloatArray, err: FloatArray
) -> float:
    """The modulus up to which every factor is 1."""
    near = math.inf
    for i in range(limit.size):
        near = min(near, limit[i] - _CERTAIN * width[i])
    for i in range(least.size):
        x = least[i] + _CERTAIN * err[i]
        if x > 0.0:
            near = min(near, 10.0 - math.log(x) / K)
    return near


@compiled
def _never_from(limit: FloatArray, width: FloatArray, least: FloatArray, err: FloatArray) -> float:
    """The modulus from which some factor is 0."""
    far = math.inf
    for i in range(limit.size):
        far = min(far, limit[i] + _NEVER * width[i])
    for i in range(least.size):
        x = least[i] - _NEVER * err[i]
        if x > 0.0:
            far = min(far, 10.0 - math.log(x) / K)
    return far


@compiled
def _panel_end(
    mu: float, far: float, limit: FloatArray, width: FloatArray, least: FloatArray, err: FloatArray
) -> float:
    """How far from mu one panel may reach."""
    parallax = math.exp(K * (10.0 - mu))
    per2 = 1.0 / (_SMOOTH * _SMOOTH)
    for i in range(limit.size):
        start = limit[i] - _CERTAIN * width[i]
        if mu >= start - 1e-9:
            per2 += 1.0 / (width[i] * width[i])
        else:
            far = min(far, start)
    for i in range(least.size):
        x = least[i] + _CERTAIN * err[i]
        if parallax <= x * (1.0 + 1e-9):
            per2 += (K * parallax / err[i]) ** 2
        elif x > 0.0:
            far = min(far, 10.0 - math.log(x) / K)
    return min(far, mu + _PANEL / math.sqrt(per2))


@compiled
def _general(
    limit: FloatArray,
    width: FloatArray,
    least: FloatArray,
    err: FloatArray,
    kind: int,
    rate: float,
    sight: FloatArray,
    table: FloatArray,
    flat: tuple[float, float],
) -> float:
    """Log of D for stars that share a modulus, with any limits."""
    near = _certain_until(limit, width, least, err)
    far = _never_from(limit, width, least, err)
    end = math.inf
    if kind == FLAT:
        end = flat[1]
        near = max(near, flat[0])
    elif kind == EXPONENTIAL:
        end = 10.0 + math.log(_FARTHEST / rate) / K
    elif kind == DISC:
        end = _TABLE_START + _TABLE_STEP * (_TABLE_SIZE - 1)
    near, far = min(near, end), min(far, end)
    total = _cumulative(near, kind, rate, sight, table, flat)
    mu = near
    for _ in range(_MOST_NODES):
        if mu >= far:
            break
        stop = _panel_end(mu, far, limit, width, least, err)
        half = 0.5 * (stop - mu)
        for node in range(8):
            here = mu + half * (1.0 + _X8[node])
            value = half * _W8[node] * _density(here, kind, rate, sight, flat)
            for i in range(limit.size):
                value *= _phi((limit[i] - here) / width[i])
            if least.size > 0:
                parallax = math.exp(K * (10.0 - here))
                for i in range(least.size):
                    value *= _phi((parallax - least[i]) / err[i])
            total += value
        mu = stop
    return math.log(max(total, 1e-300))


@compiled
def _fill(
    result: FloatArray,
    starts: IntArray,
    limit: FloatArray,
    width: FloatArray,
    least: FloatArray,
    err: FloatArray,
    kind: int,
    rate: FloatArray,
    sight: FloatArray,
    tables: FloatArray,
    flat: tuple[float, float],
) -> None:
    for draw in range(result.shape[0]):
        for group in range(result.shape[1]):
            first, last = starts[group], starts[group + 1]
            line, table = sight[group], tables[group]
            b, w = limit[draw, first:last], width[draw, first:last]
            x, s = least[draw, first:last], err[draw, first:last]
            if b.size == 1 and x.size == 0:
                value = _magnitude_limited(b[0], w[0], kind, rate[draw], line, table, flat)
            else:
                value = _general(b, w, x, s, kind, rate[draw], line, table, flat)
            result[draw, group] = value


def log_detection(
    starts: IntArray,
    magnitude: tuple[FloatArray, FloatArray] | None,
    parallax: tuple[FloatArray, FloatArray] | None,
    kind: int,
    rate: FloatArray,
    sight: FloatArray,
    tables: FloatArray,
    flat: tuple[float, float] = (0.0, 0.0),
) -> FloatArray:
    """Log of D for every draw and group of stars that share a modulus.

    Parameters
    ----------
    starts : array of int, shape (g + 1,)
        Stars of group j are starts[j] to starts[j + 1] - 1.
    magnitude : pair of arrays, shape (b, n), or None
        B [mag], the modulus at which each star would be at the limit, and the width
        of the limit, from the star's variance and the limit's softness [mag].
    parallax : pair of arrays, shape (b, n), or None
        The least parallax less the star's offset, and the parallax's error [mas].
    kind : int
        FLAT between the bounds `flat`; VOLUME and the others d^3 exp(g).
    rate, sight : array, shapes (b,) and (g, 7) or (g, 0)
        As for `ladderfit.kernels.sightlines.log_falloff_integrals`, sight per group.
    tables : array, shape (g, nodes, 2) or (g, 0, 2)
        Of `disc_tables`, for a disc.
    flat : pair of float
        Bounds of the modulus [mag], for FLAT.

    Returns
    -------
    array, shape (b, g)
        Accurate to about 1e-6 (absolute, in the log).
    """
    batch, groups = len(rate), len(starts) - 1
    none = np.empty((batch, 0))
    limit, width = (none, none) if magnitude is None else (_whole(m) for m in magnitude)
    least, err = (none, none) if parallax is None else (_whole(p) for p in parallax)
    result = np.empty((batch, groups))
    starts = np.array(starts, dtype=np.int64)
    rate, sight = np.array(rate, dtype=float), np.array(sight, dtype=float, order="C")

    def part(start: int, stop: int) -> None:
        here = slice(start, stop)
        _fill(
            result[here],
            starts,
            limit[here],
            width[here],
            least[here],
            err[here],
            kind,
            rate[here],
            sight,
            tables,
            flat,
        )

    in_halves(part, batch, work=2 * result.size)
    return result


def _whole(values: FloatArray) -> FloatArray:
    return np.array(values, dtype=float, order="C")
