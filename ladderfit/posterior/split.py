"""Which parameters enter non-linearly (phi) and which are Gaussian given those (theta).

phi holds the scatters, what is unknown of the parallaxes (offsets, error scale,
modes of shared errors, the distance prior's length), the relation's coefficients where
parallax stars are present, those of inputs with errors and the populations' spreads, and
every coefficient whose prior is not normal.
theta holds all other coefficients and the host moduli.  This file alone decides.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from ladderfit.choices import Choices
from ladderfit.ladder import Ladder
from ladderfit.names import with_group
from ladderfit.peak_terms import PeakTerms, peak_terms
from ladderfit.posterior.colours import colour_coefficients, colour_parameters
from ladderfit.posterior.errors_in_inputs import input_errors, uses_population
from ladderfit.posterior.families import outlier_parameters
from ladderfit.posterior.parallaxes import active_coefficients, parallax_parameters
from ladderfit.priors import Fixed, HalfNormal, LogNormal, Normal, Prior, Uniform
from ladderfit.relations import coefficient_names, scatters
from ladderfit.samples import FloatArray, IntArray

Kind = Literal["plain", "folded", "bounded", "logarithmic"]

_MAG = float(0.2 * np.log(10.0))


@dataclass(frozen=True)
class Coordinate:
    """One direction of phi: a parameter seen through a map that makes its range the real line.

    ``plain`` is the parameter itself; ``folded`` its absolute value, for
    scatters; ``bounded`` the logit between the prior's bounds; ``logarithmic``
    5 log10 of it.
    """

    name: str
    prior: Prior
    kind: Kind

    def natural(self, z: FloatArray) -> FloatArray:
        """The parameter at coordinate `z`, any shape."""
        if self.kind == "folded":
            return np.abs(z)
        if self.kind == "bounded":
            low, high = self.prior.bounds
            return low + (high - low) / (1.0 + np.exp(-np.clip(z, -700.0, 700.0)))
        if self.kind == "logarithmic":
            return np.asarray(10.0 ** (0.2 * z))
        return z

    def coordinate(self, value: float) -> float:
        """The coordinate of a parameter's value (for starting points)."""
        if self.kind == "bounded":
            low, high = self.prior.bounds
            part = float(np.clip((value - low) / (high - low), 1e-6, 1.0 - 1e-6))
            return float(np.log(part / (1.0 - part)))
        if self.kind == "logarithmic":
            return 5.0 * float(np.log10(value))
        return value

    def log_prior(self, z: FloatArray) -> FloatArray:
        """Log of the prior density in the coordinate, Jacobian included.

        A folded coordinate has the density of the parameter at |z|, so that its
        positive half alone is normalised.
        """
        density = self.prior.log_density(self.natural(z))
        if self.kind == "bounded":
            low, high = self.prior.bounds
            size = np.abs(z)
            density = density + np.log(high - low) - size - 2.0 * np.log1p(np.exp(-size))
        elif self.kind == "logarithmic":
            density = density + _MAG * z + np.log(_MAG)
        return np.asarray(density)

    @property
    def start(self) -> float:
        """A starting point."""
        return self.coordinate(self.prior.centre)

    @property
    def scale(self) -> float:
        """A width of the prior in the coordinate."""
        if self.kind == "bounded":
            return 2.0
        if self.kind == "logarithmic":
            return (
                self.prior.deviation
                if isinstance(self.prior, LogNormal)
                else self.prior.sd / self.prior.centre / _MAG
            )
        return self.prior.sd


@dataclass(frozen=True)
class Split:
    """Names and places of all parameters.

    Attributes
    ----------
    coefficients : tuple of str
        Every linear coefficient, in the order of the system's columns.
    logarithmic : frozenset of str
        Coefficients that stand for 5 log10 of their parameter.
    phi : tuple of Coordinate
    fixed : mapping of str to float
        Parameters held at a known value.
    theta : tuple of str
        Coefficients that are integrated in closed form.
    theta_prior : tuple of Normal
        Their priors, on the coefficient.
    """

    coefficients: tuple[str, ...]
    logarithmic: frozenset[str]
    phi: tuple[Coordinate, ...]
    fixed: dict[str, float]
    theta: tuple[str, ...]
    theta_prior: tuple[Normal, ...]
    known: IntArray = field(repr=False)

    @property
    def phi_names(self) -> tuple[str, ...]:
        """Names of the parameters in phi."""
        return tuple(coordinate.name for coordinate in self.phi)

    def value(self, name: str, z: FloatArray) -> FloatArray:
        """A parameter of phi, or a fixed one, in its unit, shape (b,); `z` has shape (b, d)."""
        if name in self.fixed:
            return np.full(len(z), self.fixed[name])
        place = self.phi_names.index(name)
        return self.phi[place].natural(z[:, place])

    def known_values(self, z: FloatArray) -> FloatArray:
        """Values of the coefficients that phi or a fixed prior gives, shape (b, len(known))."""
        columns = []
        for index in self.known:
            name = self.coefficients[index]
            value = self.value(name, z)
            columns.append(5.0 * np.log10(value) if name in self.logarithmic else value)
        return np.stack(columns, axis=1) if columns else np.empty((len(z), 0))

    def log_prior(self, z: FloatArray) -> FloatArray:
        """Log prior density of phi in its coordinates, shape (b,)."""
        total = np.zeros(len(z))
        for place, coordinate in enumerate(self.phi):
            total = total + coordinate.log_prior(z[:, place])
        return total


def split(ladder: Ladder) -> Split:
    """Sort a ladder's parameters into phi, theta and fixed ones."""
    choices = ladder.choices
    coefficients = linear_coefficients(ladder)
    logarithmic = frozenset({"hubble_constant"} if ladder.velocities is None else ())
    nonlinear = _nonlinear(ladder)
    fixed: dict[str, float] = {}
    phi: list[Coordinate] = []
    theta: dict[str, Normal] = {}
    for name in (*coefficients, *_others(ladder)):
        prior = choices.prior(name)
        linear = _linear(prior, name in logarithmic) if name in coefficients else None
        if isinstance(prior, Fixed):
            fixed[name] = prior.value
        elif linear is None or name in nonlinear:
            phi.append(_coordinate(name, prior, name in logarithmic))
        else:
            theta[name] = linear
    known = np.array([i for i, name in enumerate(coefficients) if name not in theta], dtype=int)
    return Split(
        coefficients,
        logarithmic,
        tuple(phi),
        fixed,
        tuple(theta),
        tuple(theta.values()),
        known,
    )


def linear_coefficients(ladder: Ladder) -> tuple[str, ...]:
    """Every linear coefficient: the relation's, the third rung's, shared errors of anchors."""
    relation = coefficient_names(ladder.choices) if _has_relation(ladder) else ()
    relation = (*relation, *colour_coefficients(ladder))
    terms = _peak_terms(ladder)
    third = (*_expansion_coefficients(ladder), *terms.columns, *terms.means)
    return (*relation, *third, *_shared(ladder))


def _peak_terms(ladder: Ladder) -> PeakTerms:
    return peak_terms(ladder.choices, ladder.peaks, ladder.flow)


def _has_relation(ladder: Ladder) -> bool:
    return ladder.cepheids is not None or ladder.parallax_stars is not None


def _nonlinear(ladder: Ladder) -> set[str]:
    """Coefficients on which parallax stars or variances depend."""
    found: set[str] = set()
    names = coefficient_names(ladder.choices) if _has_relation(ladder) else ()
    if ladder.parallax_stars is not None:
        found.update(active_coefficients(ladder, ladder.parallax_stars))
        found.update(colour_coefficients(ladder))
    for stars in (ladder.cepheids, ladder.parallax_stars):
        errors = input_errors(ladder, stars)
        if errors is not None:
            found.update(n for n, s in zip(names, errors.sensitive, strict=True) if s)
    found.update(_integrated_by_host(ladder))
    terms = _peak_terms(ladder)
    if terms.curved:
        found.update(terms.means)
    return found


def _expansion_coefficients(ladder: Ladder) -> tuple[str, ...]:
    expansion = ladder.choices.expansion
    peak = ("peak_magnitude",)
    if ladder.velocities is not None:
        constant = expansion is not None and expansion.velocity_constant
        return (
            *(peak if ladder.peaks is not None else ()),
            "hubble_constant",
            *(("velocity_constant",) if constant else ()),
        )
    expands = ladder.flow is not None or has_intercept(ladder.choices)
    return (
        *(peak if ladder.peaks is not None or expands else ()),
        *(("hubble_constant",) if expands else ()),
    )


def _shared(ladder: Ladder) -> tuple[str, ...]:
    used = {anchor.name for anchor in ladder.geometric}
    return tuple(
        with_group("shared_error", name)
        for name, shared in ladder.choices.anchors.shared_errors.items()
        if used.intersection(shared.loads)
    )


def has_intercept(choices: Choices) -> bool:
    """Whether a published intercept stands for the expansion."""
    return choices.expansion is not None and choices.expansion.intercept is not None


def _others(ladder: Ladder) -> tuple[str, ...]:
    """Parameters that are no coefficients."""
    names: list[str] = [*colour_parameters(ladder), *shared_photometry(ladder)]
    names += outlier_parameters(ladder)
    samples = [s for s in (ladder.cepheids, ladder.parallax_stars) if s is not None]
    for stars in samples:
        names += [n for n in scatters(ladder.choices, stars, ladder.hosts)[0] if n not in names]
    if any(uses_population(ladder, stars) for stars in samples):
        names.append("metallicity_spread")
    if ladder.parallax_stars is not None:
        if uses_population(ladder, ladder.parallax_stars):
            names.append("parallax_metallicity")
        names += parallax_parameters(ladder)
    in_hosts, elsewhere = ladder.choices.peak_scatters
    if ladder.peaks is not None:
        names.append(in_hosts)
    if ladder.flow is not None and elsewhere not in names:
        names.append(elsewhere)
    if ladder.velocities is not None:
        names.append("velocity_scatter")
    return (*names, *_peak_terms(ladder).nonlinear)


def _integrated_by_host(ladder: Ladder) -> Iterator[str]:
    """Where hosts have limits or outliers, every coefficient that data of hosts depend on."""
    section = ladder.choices.cepheids
    if section is None or ladder.cepheids is None:
        return
    if section.completeness is None and not section.outliers.robust:
        return
    yield from coefficient_names(ladder.choices)
    yield from (name for name in _expansion_coefficients(ladder) if name == "peak_magnitude")
    terms = _peak_terms(ladder)
    yield from (*terms.columns, *terms.means)
    yield from _shared(ladder)


def shared_photometry(ladder: Ladder) -> tuple[str, ...]:
    """Names of the standard deviations of photometric errors that hosts' stars share."""
    section = ladder.choices.cepheids
    if section is None or ladder.cepheids is None:
        return ()
    return tuple(with_group("shared_photometry", name) for name in section.shared)


def _linear(prior: Prior, logarithmic: bool) -> Normal | None:
    """The normal prior on the coefficient, if there is one."""
    if logarithmic:
        return prior.in_magnitudes() if isinstance(prior, LogNormal) else None
    return prior if isinstance(prior, Normal) else None


def _coordinate(name: str, prior: Prior, logarithmic: bool) -> Coordinate:
    kind: Kind = "plain"
    if isinstance(prior, HalfNormal):
        kind = "folded"
    elif isinstance(prior, Uniform):
        kind = "bounded"
    elif logarithmic or isinstance(prior, LogNormal):
        kind = "logarithmic"
    return Coordinate(name, prior, kind)
