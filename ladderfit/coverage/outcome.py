"""What came of a coverage experiment: ranks, their table, and what they say in words."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from ladderfit.coverage.design import Design
from ladderfit.coverage.quantities import joint_names
from ladderfit.coverage.ranks import DRAWS, LEVELS, counts, covered, simultaneous_p
from ladderfit.diagnostics import TRUSTED_K
from ladderfit.errors import LadderfitError
from ladderfit.result import Result
from ladderfit.samples import FloatArray, IntArray
from ladderfit.sweep import Outcome

ALPHA = 0.01  # chance that right fits leave any band of the family


@dataclass(frozen=True, eq=False)
class Experiment:
    """Ranks of truths in fits to mocks of one ladder.

    Attributes
    ----------
    title : str
    design : Design or None
        Where truths came from; None where they were fixed.
    ranks : mapping of str to array of int, shape (n,)
        Of each quantity, among `DRAWS` draws.
    pulls : mapping of str to array, shape (n,)
        (posterior mean - truth) / posterior standard deviation, of parameters.
    family : tuple of str
        Quantities that are judged together: headline parameters and joint ones.
    joint : tuple of str
        Those that depend on several parameters.
    asked : int
        How many mocks there were.
    failures : tuple of str
        Why some could not be fitted.
    distrusted : int
        Fits whose Pareto k is not to be trusted; they are counted all the same.
    seconds : float
        Processor time of all mocks and fits.
    """

    title: str
    design: Design | None
    ranks: Mapping[str, IntArray]
    pulls: Mapping[str, FloatArray]
    family: tuple[str, ...]
    joint: tuple[str, ...]
    asked: int
    failures: tuple[str, ...] = ()
    distrusted: int = 0
    seconds: float = 0.0
    p_values: Mapping[str, float] = field(default_factory=dict)

    @property
    def size(self) -> int:
        """Number of mocks that were fitted."""
        return self.asked - len(self.failures)

    @property
    def chance(self) -> float:
        """Of one band being left, so that all of the family are kept with 1 - ALPHA."""
        return ALPHA / len(self.family)

    @property
    def outside(self) -> tuple[str, ...]:
        """Quantities of the family whose ranks leave their band; none for fixed truths."""
        if self.design is None:
            return ()
        return tuple(name for name in self.family if self.p_values[name] <= self.chance)

    def table(self) -> pd.DataFrame:
        """One row per quantity: p of uniform ranks, coverage by level, mean pull and spread."""
        rows = []
        for name, found in self.ranks.items():
            pulls = self.pulls.get(name)
            rows.append(
                (
                    name,
                    name in self.family,
                    self.p_values[name] if self.design is not None else float("nan"),
                    *(covered(found, level) for level in LEVELS),
                    float("nan") if pulls is None else float(np.mean(pulls)),
                    float("nan") if pulls is None else float(np.std(pulls)),
                )
            )
        levels = [f"inside_{100 * level:.0f}" for level in LEVELS]
        columns = ["quantity", "judged", "p", *levels, "mean_pull", "sd_pull"]
        return pd.DataFrame(rows, columns=columns)


def experiment_of(result: Result, design: Design | None, outcomes: Sequence[Outcome]) -> Experiment:
    """Gather the outcomes of a sweep.

    Raises
    ------
    LadderfitError
        If not one mock could be fitted.
    """
    done = [outcome.values for outcome in outcomes if outcome.status == "done"]
    failures = tuple(f"{o.key}: {o.message}" for o in outcomes if o.status != "done")
    if not done:
        raise LadderfitError(f"no mock could be fitted; {failures[0]}")
    names = [name for name in done[0]["ranks"] if all(name in each["ranks"] for each in done)]
    found = {name: np.array([each["ranks"][name] for each in done]) for name in names}
    pulls = {
        name: np.array([each["pulls"][name] for each in done])
        for name in names
        if name in done[0]["pulls"]
    }
    joint = tuple(n for n in joint_names(result.ladder, result.draws) if n in found)
    headline = tuple(name for name in result.headline if name in found)
    p = {name: simultaneous_p(counts(r), len(done)) for name, r in found.items()}
    poor = [each for each in done if (each["pareto_k"] or 0.0) > TRUSTED_K]
    return Experiment(
        title=result.choices.title,
        design=design,
        ranks=found,
        pulls=pulls,
        family=(*headline, *(name for name in joint if name not in headline)),
        joint=joint,
        asked=len(outcomes),
        failures=failures,
        distrusted=len(poor),
        seconds=sum(outcome.seconds for outcome in outcomes),
        p_values=p,
    )


__all__ = ["ALPHA", "DRAWS", "Experiment", "experiment_of"]
