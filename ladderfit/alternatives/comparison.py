"""What alternatives do to the numbers: one table."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import pandas as pd

from ladderfit.alternatives.axes import Alternative
from ladderfit.alternatives.fit import BASELINE, record_of
from ladderfit.diagnostics import TRUSTED_K
from ladderfit.ladder_file import as_written
from ladderfit.names import HEADLINE, PARAMETERS, base_name, parameter
from ladderfit.result import Result
from ladderfit.sweep import Outcome

_SHOWN = ("zero_point", "peak_magnitude", "hubble_constant")
_COUNTS = {
    "cepheids": "cepheids_kept",
    "anchors.parallaxes": "parallax_stars_kept",
    "supernovae": "supernovae_kept",
    "expansion": "expansion_kept",
}


@dataclass(frozen=True)
class Fit:
    """An alternative and what came of it."""

    alternative: Alternative
    outcome: Outcome

    @property
    def done(self) -> bool:
        """Whether there are numbers."""
        return self.outcome.status == "done"

    @property
    def trusted(self) -> bool:
        """Whether there are numbers, drawn with weights that are light enough."""
        k = self.outcome.values["pareto_k"] if self.done else math.inf
        return k is not None and k <= TRUSTED_K

    def mean(self, name: str) -> float:
        """Posterior mean; NaN where the fit has no such parameter."""
        return self._number(name, 0)

    def sd(self, name: str) -> float:
        """Posterior standard deviation; NaN where the fit has no such parameter."""
        return self._number(name, 1)

    def _number(self, name: str, place: int) -> float:
        pair = self.outcome.values["parameters"].get(name) if self.done else None
        return math.nan if pair is None else float(pair[place])


@dataclass(frozen=True, repr=False)
class Comparison:
    """A baseline and its alternatives, fitted.

    Attributes
    ----------
    title : str
        The ladder's.
    baseline : Fit
    fits : tuple of Fit
        Alternatives, in order.
    current : mapping of str to value
        The baseline's value of each key that changes; None where it has none.
    result : Result
        The baseline's.
    """

    title: str
    baseline: Fit
    fits: tuple[Fit, ...]
    current: Mapping[str, Any]
    result: Result

    def __repr__(self) -> str:
        """The title and how many fits there are; `table` has the numbers."""
        return (
            f"<Comparison {self.title!r}: {len(self.fits):,} alternatives, "
            f"{len(self.failed):,} without numbers; see .table()>"
        )

    @property
    def failed(self) -> tuple[Fit, ...]:
        """Alternatives without numbers."""
        return tuple(fit for fit in self.fits if not fit.done)

    @property
    def axes(self) -> tuple[str, ...]:
        """Keys that change, in order."""
        return tuple(self.current)

    @property
    def parameters(self) -> tuple[str, ...]:
        """Every parameter of any fit, in the order of `ladderfit.names`."""
        order = {name: place for place, name in enumerate(PARAMETERS)}
        every = dict.fromkeys(
            name for fit in (self.baseline, *self.fits) if fit.done for name in _names(fit)
        )
        return tuple(sorted(every, key=lambda name: order[base_name(name)]))

    @property
    def shown(self) -> tuple[str, ...]:
        """The few parameters that a page has room for: those a ladder is built for."""
        first = [name for name in _SHOWN if name in self.headline]
        return tuple([*first, *(n for n in self.headline if n not in first)][:3])

    @property
    def headline(self) -> tuple[str, ...]:
        """Parameters of the baseline that are fitted, host moduli and errors aside."""
        names = _names(self.baseline)
        fitted = (name for name in names if base_name(name) in HEADLINE)
        return tuple(
            n for n in fitted if base_name(n) != "shared_error" and self.baseline.sd(n) > 0.0
        )

    def shift(self, fit: Fit, name: str) -> float:
        """Change of a parameter from the baseline, in the baseline's errors; NaN where none."""
        error = self.baseline.sd(name)
        change = fit.mean(name) - self.baseline.mean(name)
        return change / error if error > 0.0 else math.nan

    def shift_error(self, fit: Fit) -> float:
        """Monte Carlo error of a shift, in the baseline's errors, were the draws independent.

        Fits share their random numbers, so that most shifts are known better.
        """
        sizes = [each.outcome.values["ess"] if each.done else 0.0 for each in (self.baseline, fit)]
        return math.sqrt(sum(1.0 / size for size in sizes)) if all(sizes) else math.nan

    def evidence(self, fit: Fit) -> tuple[float, float]:
        """Log evidence less the baseline's, and its error.

        NaN unless both are fitted to identical data with trusted weights; all priors are
        proper, as no other can be stated.
        """
        mine, base = fit.outcome.values, self.baseline.outcome.values
        if not (fit.trusted and self.baseline.trusted and mine["data"] == base["data"]):
            return math.nan, math.nan
        if mine["log_evidence"] is None or base["log_evidence"] is None:
            return math.nan, math.nan
        errors = [each["log_evidence_error"] or 0.0 for each in (mine, base)]
        return mine["log_evidence"] - base["log_evidence"], math.hypot(*errors)

    def table(self) -> pd.DataFrame:
        """One row per fit, the baseline first.

        Returns
        -------
        DataFrame
            Columns ``axis``, ``value``, ``status``; for each parameter ``NAME`` and
            ``NAME_sd`` (mean and standard deviation in its unit) and ``NAME_shift`` (change
            in units of the baseline's error); ``shift_mcse``; rows kept per table; ``ess``,
            ``pareto_k``; ``log_evidence`` less the baseline's and its error, NaN
            unless the data are identical; ``notes`` and ``message``.
        """
        return pd.DataFrame([self._row(fit) for fit in (self.baseline, *self.fits)])

    def units(self) -> dict[str, str]:
        """Unit of each column of `table` that has one, FITS style."""
        known = {name: parameter(name).unit for name in self.parameters}
        pairs = {f"{name}{end}": unit for name, unit in known.items() for end in ("", "_sd")}
        return {name: unit for name, unit in pairs.items() if unit}

    def _row(self, fit: Fit) -> dict[str, Any]:
        changes, values = fit.alternative.changes, fit.outcome.values
        row: dict[str, Any] = {
            "axis": "; ".join(changes) or "baseline",
            "value": "; ".join(as_written(value) for value in changes.values()),
            "status": fit.outcome.status,
        }
        for name in self.parameters:
            row[name], row[f"{name}_sd"] = fit.mean(name), fit.sd(name)
            row[f"{name}_shift"] = self.shift(fit, name)
        row["shift_mcse"] = self.shift_error(fit)
        for section, column in _COUNTS.items():
            if section in self.baseline.outcome.values["kept"]:
                row[column] = values.get("kept", {}).get(section, 0) if fit.done else math.nan
        for name in ("ess", "pareto_k"):
            found = values.get(name)
            row[name] = math.nan if found is None else found
        evidence = self.evidence(fit) if fit.done else (math.nan, math.nan)
        row["log_evidence"], row["log_evidence_error"] = evidence
        row["notes"] = " ".join(values.get("notes", ()))
        row["message"] = fit.outcome.message
        return row


def compared(
    result: Result,
    current: Mapping[str, Any],
    alternatives: Sequence[Alternative],
    outcomes: Sequence[Outcome],
) -> Comparison:
    """Put a baseline's result and outcomes of its alternatives together."""
    base = Fit(Alternative({}), Outcome(BASELINE, "done", record_of(result)))
    fits = tuple(Fit(*pair) for pair in zip(alternatives, outcomes, strict=True))
    return Comparison(result.choices.title, base, fits, current, result)


def _names(fit: Fit) -> list[str]:
    return list(fit.outcome.values["parameters"])
