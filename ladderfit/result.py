"""A calibration's result: named draws, their summary, and what to think of them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt
import pandas as pd

from ladderfit.choices import Choices
from ladderfit.errors import LadderfitError
from ladderfit.ladder import Ladder
from ladderfit.names import DERIVED, HEADLINE, PARAMETERS, base_name, parameter

FloatArray = npt.NDArray[np.float64]

COLUMNS = ("mean", "sd", "q16", "q50", "q84", "unit", "ess", "mcse")


@dataclass(frozen=True)
class Diagnostics:
    """How the draws came about and how far to trust them.

    Attributes
    ----------
    sampler : str
    seed : int
    ess : mapping of str to float
        Effective number of draws, by parameter.
    pareto_k : float or None
        Of the importance weights (direct draws only).
    efficiency : float or None
        Effective draws per proposal (direct draws only).
    rhat : mapping of str to float
        By parameter, over independent ensembles (ensemble draws only).
    log_evidence, log_evidence_error : float or None
        Comparable only between fits to identical data.
    informed : mapping of str to float
        Posterior over prior standard deviation, by parameter with a prior.
    notes : tuple of str
        Sentences a reader has to see.
    """

    sampler: str
    seed: int
    ess: Mapping[str, float]
    pareto_k: float | None = None
    efficiency: float | None = None
    rhat: Mapping[str, float] = field(default_factory=dict)
    log_evidence: float | None = None
    log_evidence_error: float | None = None
    informed: Mapping[str, float] = field(default_factory=dict)
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False, repr=False)
class Result:
    """The joint posterior of one ladder as equally weighted draws.

    Attributes
    ----------
    choices : Choices
        What was fitted.
    draws : mapping of str to array, shape (n,)
        By parameter, in its unit; host moduli as ``modulus[HOST]``.  Fixed
        parameters are included, constant.
    diagnostics : Diagnostics
    source : Ladder or None
        The ladder; None if its inputs are no longer to be had.
    """

    choices: Choices
    draws: Mapping[str, FloatArray]
    diagnostics: Diagnostics
    source: Ladder | None = None

    def __repr__(self) -> str:
        """The title and the size; `summary` has the numbers."""
        return (
            f"<Result {self.choices.title!r}: {self.size:,} draws of {len(self.draws)} parameters "
            f"by {self.diagnostics.sampler!r}; see .summary()>"
        )

    @property
    def ladder(self) -> Ladder:
        """The ladder that was fitted.

        Raises
        ------
        LadderfitError
            If the result was read back and its inputs are missing or changed.
        """
        if self.source is None:
            raise LadderfitError(
                "the tables behind this result are missing or changed; only its numbers can be used"
            )
        return self.source

    @property
    def parameters(self) -> tuple[str, ...]:
        """Names of all parameters, headline first, then the host moduli."""
        return tuple(self.draws)

    @property
    def headline(self) -> tuple[str, ...]:
        """Names of the parameters other than host moduli."""
        return tuple(name for name in self.draws if base_name(name) in HEADLINE)

    @property
    def derived(self) -> tuple[str, ...]:
        """Names of numbers that follow from the parameters and have no prior of their own."""
        return tuple(name for name in self.draws if base_name(name) in DERIVED)

    @property
    def size(self) -> int:
        """Number of draws."""
        return len(next(iter(self.draws.values())))

    def mean(self, name: str) -> float:
        """Posterior mean of a parameter; the value itself where fixed."""
        draws = self.draws[name]
        return float(np.mean(draws)) if np.ptp(draws) > 0.0 else float(draws[0])

    def sd(self, name: str) -> float:
        """Posterior standard deviation of a parameter; 0 where fixed."""
        draws = self.draws[name]
        return float(np.std(draws, ddof=1)) if np.ptp(draws) > 0.0 else 0.0

    def summary(self) -> pd.DataFrame:
        """One row per parameter: mean, sd, 16, 50 and 84 % points, unit, ess, mcse."""
        rows = {}
        for name, draws in self.draws.items():
            low, middle, high = np.quantile(draws, [0.16, 0.5, 0.84])
            sd = self.sd(name)
            ess = self.diagnostics.ess.get(name, float("nan")) if sd > 0.0 else float("nan")
            rows[name] = (
                self.mean(name),
                sd,
                float(low),
                float(middle),
                float(high),
                parameter(name).unit,
                ess,
                sd / float(np.sqrt(ess)) if sd > 0.0 else 0.0,
            )
        return pd.DataFrame.from_dict(rows, orient="index", columns=list(COLUMNS))

    def shift_from(self, base: Result) -> pd.DataFrame:
        """Change of every shared parameter from `base`, also in units of base's error.

        Returns
        -------
        DataFrame
            Columns ``change`` (in the parameter's unit) and ``in_errors``
            (NaN where base's error is zero).
        """
        rows = {}
        for name in self.draws:
            if name in base.draws:
                change, error = self.mean(name) - base.mean(name), base.sd(name)
                rows[name] = (change, change / error if error > 0.0 else float("nan"))
        return pd.DataFrame.from_dict(rows, orient="index", columns=["change", "in_errors"])


def ordered(draws: Mapping[str, FloatArray]) -> dict[str, FloatArray]:
    """Draws in the order of `ladderfit.names`, moduli last."""
    order = {name: place for place, name in enumerate(PARAMETERS)}
    return dict(sorted(draws.items(), key=lambda item: order[base_name(item[0])]))
