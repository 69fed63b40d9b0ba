"""A ladder as one system of linear equations, the way simultaneous least squares sees it.

Rows are Cepheids (m = mu + M0 + b x + ...), parallax stars in linearised form,
geometric anchors, supernovae and the expansion; columns are host moduli, the
relation's coefficients, the parallax offset, the peak magnitude and 5 log10 H0
(Riess et al. 2016, ApJ 826, 56, appendix).  No prior enters but that of the
parallax offset.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np
from scipy.linalg import cholesky, solve_triangular

from ladderfit.assembly import SECTIONS
from ladderfit.ladder import Ladder
from ladderfit.names import base_name, with_group
from ladderfit.physics.expansion import peculiar_variance, peculiar_velocities, term_of
from ladderfit.priors import Fixed, Normal
from ladderfit.relations import design
from ladderfit.samples import BoolArray, FloatArray, IntArray, StarSample, TextArray
from ladderfit.units import LN10

HUBBLE = "5 log10 H0"
STARS, SUPERNOVAE, GIVEN = 0, 1, 2  # groups of rows: scatter of their own, or none
LEAST_SIGNAL = 5.0  # parallaxes below this many errors are not turned into distances


@dataclass(frozen=True, eq=False)
class System:
    """Rows y = X beta + e of one ladder.

    Attributes
    ----------
    names : tuple of str
        Coefficients, one per column.
    X : array, shape (n, k)
    y, variance : array, shape (n,)
        In mag; the variance is that of the measurement, without scatter.
    group : array of int, shape (n,)
        `STARS`, `SUPERNOVAE` or `GIVEN`.
    row : array of int, shape (n,)
        Which object it is, the same number in every system of one set of tables.
    log_period : array, shape (n,)
        log10 of the period [d]; NaN for rows other than stars.
    period_variance : array, shape (n,)
        Of log10 period [dex^2]; 0 where not given.
    label : array of str, shape (n,)
        Star, with its host where there are several, or supernova.
    notes : tuple of str
        What a reader has to know of the rows.
    fixed : mapping of str to float
        Coefficients held, already taken to the left side.
    """

    names: tuple[str, ...]
    X: FloatArray
    y: FloatArray
    variance: FloatArray
    group: IntArray
    row: IntArray
    log_period: FloatArray
    period_variance: FloatArray
    label: TextArray
    notes: tuple[str, ...] = ()
    fixed: Mapping[str, float] = field(default_factory=dict)

    def rows(self, mask: BoolArray) -> System:
        """The rows under a mask."""
        return replace(
            self,
            X=self.X[mask],
            y=self.y[mask],
            variance=self.variance[mask],
            group=self.group[mask],
            row=self.row[mask],
            log_period=self.log_period[mask],
            period_variance=self.period_variance[mask],
            label=self.label[mask],
        )

    def held(self, fixed: Mapping[str, float]) -> System:
        """The system with coefficients held at values: their columns go to the left side."""
        y = self.y.copy()
        for name, value in fixed.items():
            if name in self.names:
                y -= value * self.X[:, self.names.index(name)]
        free = [place for place, name in enumerate(self.names) if name not in fixed]
        names = tuple(self.names[place] for place in free)
        return replace(self, names=names, X=self.X[:, free], y=y, fixed={**self.fixed, **fixed})


@dataclass(frozen=True, eq=False)
class _Block:
    columns: dict[str, FloatArray]
    y: FloatArray
    variance: FloatArray
    group: int
    label: TextArray
    row: IntArray
    log_period: FloatArray | None = None
    period_variance: FloatArray | None = None


def linear_system(ladder: Ladder) -> System:
    """All rows of a ladder; some supernovae have none here, which a note says."""
    blocks: list[_Block] = []
    notes: list[str] = []
    if ladder.cepheids is not None:
        blocks.append(_cepheids(ladder, ladder.cepheids))
    if ladder.parallax_stars is not None:
        blocks += _parallaxes(ladder, ladder.parallax_stars, notes)
    if ladder.geometric:
        blocks.append(_anchors(ladder))
    if ladder.peak_covariance is not None or ladder.choices.peak_relation.roles:
        kind = "correlated" if ladder.peak_covariance is not None else "not standardised"
        notes.append(f"The supernovae are {kind}: they are refitted by the joint fit alone.")
    else:
        blocks += _supernovae(ladder)
    if not blocks:
        notes.append("The table has no row of the linear system: the joint fit alone is made.")
        blocks.append(_Block({}, np.zeros(0), np.zeros(0), GIVEN, np.zeros(0, "U1"), _nobody(0)))
    names = tuple(dict.fromkeys(name for block in blocks for name in block.columns))
    moduli = tuple(name for name in names if base_name(name) == "modulus")
    names = moduli + tuple(name for name in names if name not in moduli)
    return System(
        names=names,
        X=np.concatenate([_filled(block, names) for block in blocks]),
        y=np.concatenate([block.y for block in blocks]),
        variance=np.concatenate([block.variance for block in blocks]),
        group=np.concatenate([np.full(len(block.y), block.group) for block in blocks]),
        row=np.concatenate([block.row for block in blocks]),
        log_period=np.concatenate([_or_else(block.log_period, block, np.nan) for block in blocks]),
        period_variance=np.concatenate(
            [_or_else(block.period_variance, block, 0.0) for block in blocks]
        ),
        label=np.concatenate([block.label for block in blocks]),
        notes=tuple(notes),
    )


def _filled(block: _Block, names: tuple[str, ...]) -> FloatArray:
    filled = np.zeros((len(block.y), len(names)))
    for name, column in block.columns.items():
        filled[:, names.index(name)] = column
    return filled


def _or_else(values: FloatArray | None, block: _Block, other: float) -> FloatArray:
    return np.full(len(block.y), other) if values is None else values


def objects(ladder: Ladder) -> int:
    """How many objects there are in all tables, and one for rows that are none."""
    return 1 + sum(source.rows for key, source in ladder.sources.items() if key in SECTIONS)


def _rows(ladder: Ladder, section: str, row: IntArray) -> IntArray:
    """Numbers of a table's objects, tables one after another; 0 is nobody."""
    before = 0
    for key in SECTIONS:
        if key == section:
            break
        before += ladder.sources[key].rows if key in ladder.sources else 0
    return np.asarray(row + before)


def _nobody(count: int) -> IntArray:
    return np.zeros(count, dtype=np.int64)


def _moduli(ladder: Ladder, host: IntArray) -> dict[str, FloatArray]:
    return {
        with_group("modulus", ladder.hosts[place]): (host == place).astype(float)
        for place in np.unique(host)
    }


def _cepheids(ladder: Ladder, stars: StarSample) -> _Block:
    columns = {**_moduli(ladder, stars.host), **design(ladder.choices, stars, ladder.hosts)}
    error = stars.log_period_error
    return _Block(
        columns,
        stars.magnitude,
        stars.variance,
        STARS,
        _star_names(ladder, stars),
        _rows(ladder, "cepheids", stars.row),
        stars.log_period,
        None if error is None else error**2,
    )


def _star_names(ladder: Ladder, stars: StarSample) -> TextArray:
    """Names of stars, with their hosts where there are several."""
    if len(np.unique(stars.host)) < 2:
        return stars.star
    hosts = np.array([f" ({host})" for host in ladder.hosts])
    return np.asarray(np.strings.add(stars.star, hosts[stars.host]))


def _parallaxes(ladder: Ladder, stars: StarSample, notes: list[str]) -> list[_Block]:
    """M = m + 5 log10 plx - 10, for parallaxes large against their errors; the offset's prior.

    A common offset is a column to first order; offsets of groups, or a scale of
    the errors, are left to the joint fit.
    """
    if stars.parallax is None or stars.parallax_error is None:
        raise TypeError("a parallax sample without parallaxes")
    prior = ladder.choices.prior("parallax_offset")
    start = prior.value if isinstance(prior, Fixed) else 0.0
    parallax = stars.parallax - start
    good = parallax > LEAST_SIGNAL * stars.parallax_error
    if not good.all():
        notes.append(
            f"{int(np.sum(~good)):,} parallaxes below {LEAST_SIGNAL:g} errors are left to the "
            "joint fit."
        )
    columns = {
        name: column[good] for name, column in design(ladder.choices, stars, ladder.hosts).items()
    }
    value, per = parallax[good], 5.0 / LN10 / parallax[good]
    if not isinstance(prior, Fixed):
        columns["parallax_offset"] = per
    error = stars.log_period_error
    rows = [
        _Block(
            columns,
            stars.magnitude[good] + 5.0 * np.log10(value) - 10.0,
            stars.variance[good] + (per * stars.parallax_error[good]) ** 2,
            STARS,
            stars.star[good],
            _rows(ladder, "anchors.parallaxes", stars.row[good]),
            stars.log_period[good],
            None if error is None else error[good] ** 2,
        )
    ]
    if isinstance(prior, Normal):
        given = {"parallax_offset": np.ones(1)}
        width = np.array([prior.deviation**2])
        mean = np.array([prior.mean])
        rows.append(_Block(given, mean, width, GIVEN, np.array([""]), _nobody(1)))
    return rows


def _anchors(ladder: Ladder) -> _Block:
    """mu = geometric modulus, made independent where the errors are correlated."""
    anchors = ladder.geometric
    X = np.zeros((len(anchors), len(ladder.hosts)))
    X[np.arange(len(anchors)), [anchor.host for anchor in anchors]] = 1.0
    y = np.array([anchor.modulus for anchor in anchors])
    covariance = ladder.anchor_covariance
    if covariance is None:
        covariance = np.diag([anchor.error**2 for anchor in anchors])
    names = [anchor.name for anchor in anchors]
    covariance = np.array(covariance, dtype=float)
    for shared in ladder.choices.anchors.shared_errors.values():
        load = np.array([shared.loads.get(name, 0.0) for name in names])
        covariance += shared.error**2 * np.outer(load, load)
    factor = cholesky(covariance, lower=True)
    white = solve_triangular(factor, np.column_stack([X, y]), lower=True)
    columns = {
        with_group("modulus", host): white[:, place]
        for place, host in enumerate(ladder.hosts)
        if np.any(white[:, place])
    }
    ones = np.ones(len(y))
    return _Block(columns, white[:, -1], ones, GIVEN, np.array(names), _nobody(len(y)))


def _supernovae(ladder: Ladder) -> list[_Block]:
    """m = mu + M in hosts; m - term = M - 5 log10 H0 in the expansion, or its intercept."""
    blocks = []
    if ladder.peaks is not None:
        peaks = ladder.peaks
        columns = {**_moduli(ladder, peaks.host), "peak_magnitude": np.ones(len(peaks))}
        row = _rows(ladder, "supernovae", peaks.row)
        blocks.append(_Block(columns, peaks.magnitude, peaks.variance, SUPERNOVAE, peaks.name, row))
    expansion, flow = ladder.choices.expansion, ladder.flow
    if expansion is not None and flow is not None:
        ones = np.ones(len(flow))
        columns = {"peak_magnitude": ones, HUBBLE: -ones}
        velocity = peculiar_velocities(flow, expansion)
        blocks.append(
            _Block(
                columns,
                flow.magnitude - term_of(expansion, flow.redshift, flow.redshift_heliocentric),
                flow.variance + peculiar_variance(flow.redshift, velocity),
                SUPERNOVAE,
                flow.name,
                _rows(ladder, "expansion", flow.row),
            )
        )
    if expansion is not None and expansion.intercept is not None:
        given = expansion.intercept
        columns = {"peak_magnitude": -np.ones(1), HUBBLE: np.ones(1)}
        y = np.array([25.0 + 5.0 * given.value])
        blocks.append(
            _Block(
                columns,
                y,
                np.array([(5.0 * given.error) ** 2]),
                GIVEN,
                np.array([""]),
                _nobody(1),
            )
        )
    return blocks
