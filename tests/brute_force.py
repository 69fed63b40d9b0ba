"""The posterior of a ladder written out object by object; used by tests alone.

Nothing is eliminated or integrated: coefficients, scatters, host moduli and star
moduli are all unknowns.  `Written` states the density in that form; `marginal`
integrates the Gaussian unknowns with the covariance of the data written out;
`long_sampling` draws from the whole.
"""

from __future__ import annotations

import functools
from dataclasses import dataclass, field

import numpy as np

from ladderfit.ladder import Ladder
from ladderfit.priors import Fixed, HalfNormal, LogNormal, Normal, Prior, Uniform

LOG_2PI = np.log(2.0 * np.pi)
LIGHT = 299_792.458  # km/s
FARTHEST = 50.0  # mag
TILT = 0.6 * np.log(10.0)  # of a prior uniform in volume, per mag
PER_MAG = 0.2 * np.log(10.0)


@dataclass(frozen=True)
class Row:
    """y = sum of terms + e, e normal with `variance` plus the square of a scatter."""

    terms: dict[str, float]
    y: float
    variance: float
    scatter: str | None = None


def rows_of(ladder: Ladder) -> list[Row]:
    """One row per measured magnitude, anchor, velocity or intercept."""
    found = [*_star_rows(ladder), *_anchor_rows(ladder), *_expansion_rows(ladder)]
    if ladder.peaks is not None:
        sample = ladder.peaks
        for i in range(len(sample)):
            terms = {f"modulus[{ladder.hosts[sample.host[i]]}]": 1.0, "peak_magnitude": 1.0}
            found.append(Row(terms, sample.magnitude[i], sample.variance[i], "peak_scatter"))
    return found


def _star_rows(ladder: Ladder) -> list[Row]:
    found = []
    relation = ladder.choices.relation
    for sample in (ladder.cepheids, ladder.parallax_stars):
        for i in range(0 if sample is None else len(sample)):
            host = sample.host[i]
            terms = {f"modulus[{ladder.hosts[host]}]" if host >= 0 else f"star[{i}]": 1.0}
            terms["zero_point"] = 1.0
            terms["slope"] = sample.log_period[i] - np.log10(relation.pivot)
            if relation.metallicity != "none":
                terms["metallicity"] = sample.metallicity[i] - relation.metallicity.reference
            found.append(Row(terms, sample.magnitude[i], sample.variance[i], "scatter"))
    return found


def _anchor_rows(ladder: Ladder) -> list[Row]:
    return [
        Row({f"modulus[{host}]": 1.0}, anchor.modulus, anchor.error**2)
        for host, anchor in ladder.choices.anchors.geometric.items()
        if anchor.use
    ]


def _expansion_rows(ladder: Ladder) -> list[Row]:
    section, found = ladder.choices.expansion, []
    if ladder.flow is not None:
        flow, q0, j0 = ladder.flow, section.q0, section.j0
        for i in range(len(flow)):
            z, observed = flow.redshift[i], flow.redshift_heliocentric[i]
            series = 1.0 + (1.0 - q0) * z / 2.0 - (1.0 - q0 - 3.0 * q0**2 + j0) * z**2 / 6.0
            times_h0 = (1.0 + observed) / (1.0 + z) * LIGHT * z * series
            peculiar = 5.0 / np.log(10.0) * section.peculiar_velocity / (LIGHT * z)
            y = flow.magnitude[i] - 25.0 - 5.0 * np.log10(times_h0)
            variance = flow.variance[i] + peculiar**2
            terms = {"peak_magnitude": 1.0, "hubble_constant": -1.0}
            found.append(Row(terms, y, variance, "peak_scatter"))
    if ladder.velocities is not None:
        objects = ladder.velocities
        for i in range(len(objects)):
            terms = {"hubble_constant": objects.distance[i]}
            if section.velocity_constant:
                terms["velocity_constant"] = 1.0
            # the kernel's floor of 0.001 km/s keeps a vanishing scatter finite
            found.append(Row(terms, objects.velocity[i], 1e-6, "velocity_scatter"))
    if section is not None and section.intercept is not None:
        y, error = 25.0 + 5.0 * section.intercept.value, 5.0 * section.intercept.error
        found.append(Row({"hubble_constant": 1.0, "peak_magnitude": -1.0}, y, error**2))
    return found


def log_prior(prior: Prior, x: np.ndarray) -> np.ndarray:
    """Log density of a prior in the parameter's own unit, minus infinity outside."""
    match prior:
        case Normal(mean, sd):
            return -0.5 * ((x - mean) / sd) ** 2 - np.log(sd) - 0.5 * LOG_2PI
        case HalfNormal(sd):
            inside = -0.5 * (x / sd) ** 2 - np.log(sd) + 0.5 * np.log(2.0 / np.pi)
            return np.where(x >= 0.0, inside, -np.inf)
        case Uniform(low, high):
            return np.where((x >= low) & (x <= high), -np.log(high - low), -np.inf)
        case LogNormal(median, sd):
            width = sd * PER_MAG  # of the natural logarithm
            safe = np.where(x > 0.0, x, 1.0)
            gap = np.log(safe / median) / width
            inside = -0.5 * gap**2 - np.log(width * safe) - 0.5 * LOG_2PI
            return np.where(x > 0.0, inside, -np.inf)
    raise AssertionError(prior)


def in_magnitudes(ladder: Ladder, name: str) -> bool:
    """The ladder is linear in 5 log10 of the Hubble constant, the linear law in itself."""
    return name == "hubble_constant" and ladder.velocities is None


@dataclass(frozen=True, eq=False)
class Written:
    """The density of all unknowns together; build with `written`.

    A point x holds coefficients (the Hubble constant as 5 log10 of it where the
    ladder is linear in that), moduli of hosts and of parallax stars, scatters and
    the parallax offset.  Fixed parameters are not among them.  A place beyond a
    bound stands for its mirror image, so that the density is defined everywhere.
    """

    ladder: Ladder
    linear: tuple[str, ...]
    others: tuple[str, ...]
    A: np.ndarray
    y: np.ndarray
    variance: np.ndarray
    scatter: tuple[str | None, ...]
    shared: np.ndarray | None = None  # covariance on top of the variances, shape (rows, rows)
    names: tuple[str, ...] = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "names", (*self.linear, *self.others))

    @functools.cached_property
    def priors(self) -> dict[str, Prior]:
        free = [name for name in self.names if not name.startswith(("modulus[", "star["))]
        return {name: self.ladder.choices.prior(name) for name in free}

    def natural(self, name: str, x: np.ndarray) -> np.ndarray:
        """A parameter in its own unit, from its place in x."""
        value = self._mirrored(name, x)
        return 10.0 ** (0.2 * value) if in_magnitudes(self.ladder, name) else value

    def _mirrored(self, name: str, x: np.ndarray) -> np.ndarray:
        if "scatter" in name and not isinstance(self.priors[name], Uniform):
            return np.abs(x)
        if not isinstance(self.priors.get(name), Uniform):
            return x
        low, high = self._ends(name)
        turn = np.mod(x - low, 2.0 * (high - low))
        return low + np.minimum(turn, 2.0 * (high - low) - turn)

    def _ends(self, name: str) -> tuple[float, float]:
        """The bounds of a uniform prior, in the unit of x."""
        low, high = self.priors[name].bounds
        if in_magnitudes(self.ladder, name):
            return 5.0 * np.log10(low), 5.0 * np.log10(high)
        return low, high

    def point(self, truth: dict[str, float]) -> np.ndarray:
        """A place to start from: the truth, stars where their parallax or magnitude puts them."""
        values = dict(truth)
        stars = self.ladder.parallax_stars
        if stars is not None:
            bare = stars.magnitude - truth["zero_point"]
            bare = bare - truth["slope"] * (stars.log_period - 1.0)
            values |= {f"star[{i}]": value for i, value in enumerate(bare)}
        if in_magnitudes(self.ladder, "hubble_constant") and "hubble_constant" in values:
            values["hubble_constant"] = 5.0 * np.log10(values["hubble_constant"])
        for name, prior in self.priors.items():
            if isinstance(prior, Uniform):
                low, high = self._ends(name)
                edge = 0.2 * (high - low)
                values[name] = np.clip(values[name], low + edge, high - edge)
        return np.array([values[name] for name in self.names])

    def log_density(self, x: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Log density at x, shape (b, p), and its gradient."""
        k = len(self.linear)
        gradient, given = np.zeros_like(x), x
        x = np.stack([self._mirrored(n, x[:, i]) for i, n in enumerate(self.names)], axis=1)
        variance = np.broadcast_to(self.variance, (len(x), len(self.y))).copy()
        held = {}
        for name in {name for name in self.scatter if name is not None}:
            held[name] = np.array([each == name for each in self.scatter])
            variance[:, held[name]] += self._scatter(name, x)[:, None] ** 2
        gap, weight = self.y - x[:, :k] @ self.A.T, 1.0 / variance
        total = -0.5 * (gap**2 * weight + np.log(variance) + LOG_2PI).sum(axis=1)
        gradient[:, :k] = (gap * weight) @ self.A
        for name, rows in held.items():
            if name in self.others:
                place = self.names.index(name)
                pull = (gap[:, rows] ** 2 * weight[:, rows] ** 2 - weight[:, rows]).sum(axis=1)
                gradient[:, place] += pull * x[:, place]
        total = total + self._parallaxes(x, gradient) + self._moduli(x, gradient)
        for name, prior in self.priors.items():
            place = self.names.index(name)
            value, slope = self._prior(name, prior, x[:, place])
            total, gradient[:, place] = total + value, gradient[:, place] + slope
        gradient = gradient * self._direction(given)
        return np.where(np.isnan(total), -np.inf, total), np.nan_to_num(gradient)

    def _direction(self, x: np.ndarray) -> np.ndarray:
        """Minus one where a place is a mirror image that runs backwards."""
        sign = np.ones_like(x)
        for place, name in enumerate(self.names):
            if "scatter" in name or isinstance(self.priors.get(name), Uniform):
                step = 1e-7
                ahead = self._mirrored(name, x[:, place] + step)
                sign[:, place] = np.sign(ahead - self._mirrored(name, x[:, place]))
        return sign

    def _scatter(self, name: str, x: np.ndarray) -> np.ndarray:
        if name in self.others:
            return x[:, self.names.index(name)]
        return np.full(len(x), self.ladder.choices.prior(name).centre)

    def _parallaxes(self, x: np.ndarray, gradient: np.ndarray) -> np.ndarray:
        stars = self.ladder.parallax_stars
        if stars is None:
            return np.zeros(len(x))
        free = "parallax_offset" in self.others
        place = self.names.index("parallax_offset") if free else -1
        offset = x[:, place] if free else self.ladder.choices.prior("parallax_offset").centre
        here = [self.names.index(f"star[{i}]") for i in range(len(stars))]
        true = 10.0 ** (2.0 - 0.2 * x[:, here])
        gap = (stars.parallax - true - np.expand_dims(offset, -1)) / stars.parallax_error
        gradient[:, here] -= gap / stars.parallax_error * PER_MAG * true
        if free:
            gradient[:, place] += (gap / stars.parallax_error).sum(axis=1)
        terms = -0.5 * gap**2 - np.log(stars.parallax_error) - 0.5 * LOG_2PI
        return terms.sum(axis=1)

    def _moduli(self, x: np.ndarray, gradient: np.ndarray) -> np.ndarray:
        """The prior of every modulus, within its bounds of 0 and 50 mag."""
        total = np.zeros(len(x))
        choices = self.ladder.choices
        for kind, section in (("modulus[", choices.hosts), ("star[", choices.anchors.parallaxes)):
            places = [i for i, name in enumerate(self.linear) if name.startswith(kind)]
            if places:
                tilt, log_norm = tilt_and_norm(section.distance_prior)
                mu = x[:, places]
                inside = (mu >= 0.0) & (mu <= FARTHEST)
                total = total + np.where(inside, tilt * mu - log_norm, -np.inf).sum(axis=1)
                gradient[:, places] += tilt
        return total

    def _prior(self, name: str, prior: Prior, x: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        def log(place: np.ndarray) -> np.ndarray:
            if not in_magnitudes(self.ladder, name):
                return log_prior(prior, place)
            value = 10.0 ** (0.2 * place)
            return log_prior(prior, value) + np.log(PER_MAG * value)

        step = 1e-5 * max(prior.sd, 1e-3)
        with np.errstate(invalid="ignore", divide="ignore"):
            return log(x), (log(x + step) - log(x - step)) / (2.0 * step)


def tilt_and_norm(prior: str) -> tuple[float, float]:
    """The prior of a modulus is exp(tilt mu) from 0 to 50 mag, over exp of the second number."""
    if prior == "flat in modulus":
        return 0.0, np.log(FARTHEST)
    return TILT, np.log(np.expm1(TILT * FARTHEST) / TILT)


def written(ladder: Ladder) -> Written:
    """The posterior of a ladder, written out."""
    rows = rows_of(ladder)
    terms = list(dict.fromkeys(name for row in rows for name in row.terms))

    def fixed(name: str) -> bool:
        local = name.startswith(("modulus[", "star["))
        return not local and isinstance(ladder.choices.prior(name), Fixed)

    linear = tuple(name for name in terms if not fixed(name))
    y = np.array([row.y for row in rows])
    for name in filter(fixed, terms):
        value = ladder.choices.prior(name).centre
        value = 5.0 * np.log10(value) if in_magnitudes(ladder, name) else value
        y = y - value * np.array([row.terms.get(name, 0.0) for row in rows])
    others = dict.fromkeys(row.scatter for row in rows if row.scatter is not None)
    if ladder.parallax_stars is not None:
        others["parallax_offset"] = None
    return Written(
        ladder=ladder,
        linear=linear,
        others=tuple(name for name in others if not fixed(name)),
        A=np.array([[row.terms.get(name, 0.0) for name in linear] for row in rows]),
        y=y,
        variance=np.array([row.variance for row in rows]),
        scatter=tuple(row.scatter for row in rows),
    )


def marginal(whole: Written, values: dict[str, float]) -> float:
    """Log density of the data with all Gaussian unknowns integrated out, stars left aside.

    The covariance of the data is written out: measurement, scatter, and the
    priors of the coefficients that `values` (coefficients as in a point x, and
    scatters) leaves open.  Host moduli have the density of their prior without
    bounds.  `whole.shared` is heeded here alone.
    """
    keep = np.array([not np.any(row[_stars(whole)]) for row in whole.A])
    A, y, variance = whole.A[keep], whole.y[keep], whole.variance[keep]
    names = np.array(whole.scatter, dtype=object)[keep]
    variance = variance + np.array([0.0 if name is None else values[name] ** 2 for name in names])
    covariance, tilt, norm, hosts = np.diag(variance), 0.0, 0.0, []
    if whole.shared is not None:
        covariance = covariance + whole.shared[np.ix_(keep, keep)]
    for place, name in enumerate(whole.linear):
        column = A[:, place]
        if name.startswith("modulus["):
            hosts.append(column)
            tilt, log_norm = tilt_and_norm(whole.ladder.choices.hosts.distance_prior)
            # the modulus counts from a whole number near it: a shift, to keep digits
            near = np.round(np.average(y[column != 0.0]))
            y = y - near * column
            norm += tilt * near - log_norm
        elif name in values:
            y = y - column * values[name]
        elif not name.startswith("star["):
            prior = whole.ladder.choices.prior(name)
            normal = prior.in_magnitudes() if isinstance(prior, LogNormal) else prior
            y = y - column * normal.mean
            covariance = covariance + normal.deviation**2 * np.outer(column, column)
    inverse = np.linalg.inv(covariance)
    total = norm - 0.5 * (y @ inverse @ y + np.linalg.slogdet(covariance)[1] + len(y) * LOG_2PI)
    if hosts:
        B = np.array(hosts).T
        precision, pull = B.T @ inverse @ B, B.T @ inverse @ y + tilt
        total += 0.5 * pull @ np.linalg.solve(precision, pull)
        total -= 0.5 * (np.linalg.slogdet(precision)[1] - len(hosts) * LOG_2PI)
    return float(total)


def conditional(whole: Written, values: dict[str, float]) -> tuple[np.ndarray, np.ndarray]:
    """Mean and covariance of all linear unknowns at the given scatters, by dense algebra.

    For ladders without parallax stars whose coefficients all have normal priors.
    """
    extra = np.array([0.0 if name is None else values[name] ** 2 for name in whole.scatter])
    weight = 1.0 / (whole.variance + extra)
    precision = (whole.A * weight[:, None]).T @ whole.A
    pull = (whole.A * weight[:, None]).T @ whole.y
    for place, name in enumerate(whole.linear):
        if name.startswith("modulus["):
            pull[place] += tilt_and_norm(whole.ladder.choices.hosts.distance_prior)[0]
        else:
            prior = whole.ladder.choices.prior(name)
            normal = prior.in_magnitudes() if in_magnitudes(whole.ladder, name) else prior
            precision[place, place] += normal.deviation**-2
            pull[place] += normal.mean * normal.deviation**-2
    covariance = np.linalg.inv(precision)
    return covariance @ pull, covariance


def _stars(whole: Written) -> list[int]:
    return [i for i, name in enumerate(whole.linear) if name.startswith("star[")]
