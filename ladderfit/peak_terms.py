"""The terms of the peak-magnitude relation.

    m = mu + M - alpha w + beta c + (b d + c d^2) + step + survey's offset + e

with width w and colour c (Tripp 1998, A&A 331, 815), or the decline rate d
(Phillips 1993, ApJ 413, L105) in place of the width, each less its reference.  A term
is a column of the design matrix, or, where its input has errors that are integrated,
a power of that input.  To add a term, write a function that yields its columns and put
it into `TERMS`; a term in an input with errors goes into `POWERS`.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from ladderfit.choices import Choices, PeakRelation
from ladderfit.inputs.peaks import error_blocks
from ladderfit.names import with_group
from ladderfit.samples import FloatArray, FlowSample, PeakSample

NamedColumn = tuple[str, FloatArray]
Supernovae = PeakSample | FlowSample

HOSTS, EXPANSION = "hosts", "expansion"  # the two populations


@dataclass(frozen=True)
class Power:
    """A term in one input: sign times the input to a power."""

    name: str
    power: int
    sign: float


POWERS: dict[str, tuple[Power, ...]] = {
    "width": (Power("alpha", 1, -1.0),),
    "decline_rate": (Power("decline_slope", 1, 1.0), Power("decline_curvature", 2, 1.0)),
    "colour": (Power("beta", 1, 1.0),),
}


def powers_of(relation: PeakRelation, name: str) -> tuple[Power, ...]:
    """The terms in one input that the choices ask for."""
    rate = relation.decline_rate
    highest = 2 if name == "decline_rate" and rate != "none" and rate.quadratic else 1
    return tuple(power for power in POWERS[name] if power.power <= highest)


def step_of(relation: PeakRelation, log_mass: FloatArray) -> FloatArray:
    """The step with the host's mass: -1/2 under it, +1/2 above; smooth where asked for."""
    section = relation.host_mass
    if section == "none":
        return np.zeros_like(log_mass)
    beyond = log_mass - section.step
    if section.smoothing == 0.0:
        return np.where(beyond >= 0.0, 0.5, -0.5)
    return np.asarray(0.5 * np.tanh(0.5 * beyond / section.smoothing))


def _mass_of(sample: Supernovae) -> FloatArray:
    return sample.inputs.values.get("host_mass", np.zeros(len(sample)))


def _mass(relation: PeakRelation, sample: Supernovae) -> Iterator[NamedColumn]:
    if relation.host_mass != "none":
        yield "mass_step", step_of(relation, _mass_of(sample))


def _surveys(relation: PeakRelation, sample: Supernovae) -> Iterator[NamedColumn]:
    for survey in relation.surveys:
        theirs = sample.inputs.survey
        inside = np.zeros(len(sample)) if theirs is None else (theirs == survey).astype(float)
        yield with_group("survey_offset", survey), inside


Term = Callable[[PeakRelation, Supernovae], Iterator[NamedColumn]]

TERMS: tuple[Term, ...] = (_mass, _surveys)


@dataclass(frozen=True)
class PeakTerms:
    """Which terms are plain columns, and which have inputs that are integrated.

    Attributes
    ----------
    relation : PeakRelation
    noisy : tuple of str
        Inputs whose errors are met.
    exact : tuple of str
        The other inputs that have a term.
    groups : tuple of str
        Which populations there are: of hosts, of the expansion.
    """

    relation: PeakRelation
    noisy: tuple[str, ...]
    exact: tuple[str, ...]
    groups: tuple[str, ...]

    @property
    def integrated(self) -> bool:
        """Whether true inputs are integrated over populations."""
        return bool(self.noisy) and self.relation.errors == "population"

    @property
    def columns(self) -> tuple[str, ...]:
        """Names of the coefficients of plain columns."""
        return tuple(self.design(_NOBODY))

    @property
    def means(self) -> tuple[str, ...]:
        """Names of the populations' means."""
        return tuple(name for group in self.groups for name in self.means_of(group))

    def means_of(self, group: str) -> tuple[str, ...]:
        """Names of one population's means, one for each noisy input."""
        if not self.integrated:
            return ()
        return tuple(with_group(f"{name}_mean", group) for name in self.noisy)

    def spreads_of(self, group: str) -> tuple[str, ...]:
        """Names of one population's spreads, one for each noisy input."""
        if not self.integrated:
            return ()
        return tuple(with_group(f"{name}_spread", group) for name in self.noisy)

    def correlation_of(self, group: str) -> str | None:
        """Name of the correlation of true shape and colour, where both are integrated."""
        both = self.integrated and len(self.noisy) == 2
        return with_group("shape_colour_correlation", group) if both else None

    @property
    def nonlinear(self) -> tuple[str, ...]:
        """Names of the parameters that enter variances: coefficients, spreads, correlations."""
        names = [power.name for name in self.noisy for power in self.powers(name)]
        for group in self.groups:
            names += self.spreads_of(group)
            correlation = self.correlation_of(group)
            names += [] if correlation is None else [correlation]
        return tuple(names)

    @property
    def curved(self) -> bool:
        """Whether a noisy input has a term in its square."""
        return any(power.power == 2 for name in self.noisy for power in self.powers(name))

    def powers(self, name: str) -> tuple[Power, ...]:
        """The terms in one input."""
        return powers_of(self.relation, name)

    def design(self, sample: Supernovae) -> dict[str, FloatArray]:
        """Plain columns by the name of the coefficient, shape (n,) each."""
        found: dict[str, FloatArray] = {}
        for name in self.exact:
            value = self.measured(sample, name)
            found |= {p.name: p.sign * value**p.power for p in self.powers(name)}
        for term in TERMS:
            found.update(term(self.relation, sample))
        return found

    def measured(self, sample: Supernovae, name: str) -> FloatArray:
        """An input as measured, less its reference, shape (n,)."""
        values = sample.inputs.values.get(name, np.zeros(len(sample)))
        return np.asarray(values - self.relation.reference(name))

    def noisy_inputs(self, sample: Supernovae) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Noisy inputs (n, p), their covariances (n, p, p), and those with the peak (n, p)."""
        columns = [self.measured(sample, name) for name in self.noisy]
        own, with_peak = error_blocks(sample, self.noisy)
        return np.stack(columns, axis=1), own, with_peak

    def linear(self, values: Mapping[str, FloatArray]) -> FloatArray:
        """Coefficients of the noisy inputs, signs included, shape (b, p)."""
        first = [self.powers(name)[0] for name in self.noisy]
        return np.stack([power.sign * values[power.name] for power in first], axis=1)

    def square(self, values: Mapping[str, FloatArray]) -> FloatArray | None:
        """Coefficient of the square of the first noisy input, shape (b,), if there is one."""
        second = [p for name in self.noisy for p in self.powers(name) if p.power == 2]
        return second[0].sign * values[second[0].name] if second else None


def peak_terms(choices: Choices, peaks: PeakSample | None, flow: FlowSample | None) -> PeakTerms:
    """The terms of the supernovae that take part; without any, there are none."""
    samples: dict[str, Supernovae] = {}
    if peaks is not None:
        samples[HOSTS] = peaks
    if flow is not None:
        samples[EXPANSION] = flow
    relation = choices.peak_relation if samples else PeakRelation()
    met = relation.errors != "ignored"
    noisy = tuple(
        name
        for name in relation.inputs
        if met and any(f"{name}_error" in s.inputs.values for s in samples.values())
    )
    exact = tuple(name for name in relation.inputs if name not in noisy)
    return PeakTerms(relation, noisy, exact, tuple(samples))


_EMPTY = np.empty(0)
_NOBODY = PeakSample(
    name=np.empty(0, dtype=np.str_),
    host=np.empty(0, dtype=np.int64),
    magnitude=_EMPTY,
    variance=_EMPTY,
    row=np.empty(0, dtype=np.int64),
)
