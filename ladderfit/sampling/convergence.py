"""How far an ensemble chain has come: effective draws, agreement, and what to do next.

Walkers of one ensemble learn from each other, so they are no independent chains.
The effective number of draws therefore comes from the series of ensemble means
(Goodman & Weare 2010, CAMCoS 5, 65), on normal scores of the ranks (Vehtari et
al. 2021), and R-hat compares ensembles, which are independent, never walkers.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.special import ndtri
from scipy.stats import rankdata

from ladderfit.diagnostics import ess_of_mean, rhat

FloatArray = npt.NDArray[np.float64]

AGREED_RHAT = 1.01  # Vehtari et al. 2021: above this, independent runs have not yet agreed
_WORST_RHAT = 1e6  # stands for infinity, which JSON does not know
FEWEST_ROWS = 25  # steps of the ensembles below which nothing is estimated


@dataclass(frozen=True)
class Goal:
    """When a run ends.

    Attributes
    ----------
    ess : float or None
        Effective draws of the worst parameter, the ensembles agreeing.
    total : int or None
        Draws in all after the warm-up, whatever they are worth.
    """

    ess: float | None = None
    total: int | None = None


@dataclass(frozen=True)
class Report:
    """What the draws after the warm-up are worth.

    Attributes
    ----------
    draws : int
        Kept so far, all ensembles and walkers together.
    ess : mapping of str to float
        Effective draws by parameter.
    rhat : mapping of str to float
        By parameter, over the ensembles.
    """

    draws: int
    ess: Mapping[str, float]
    rhat: Mapping[str, float]

    @property
    def worst(self) -> str | None:
        """The parameter with the fewest effective draws; None before there is an estimate."""
        return min(self.ess, key=lambda name: self.ess[name], default=None)

    @property
    def worst_ess(self) -> float:
        """Its effective draws; 0 before there is an estimate."""
        return 0.0 if self.worst is None else self.ess[self.worst]

    @property
    def least_agreed(self) -> str | None:
        """The parameter with the largest R-hat."""
        return max(self.rhat, key=lambda name: self.rhat[name], default=None)

    @property
    def worst_rhat(self) -> float:
        """The largest R-hat; infinite before there is an estimate."""
        return math.inf if self.least_agreed is None else self.rhat[self.least_agreed]

    @property
    def agreed(self) -> bool:
        """Whether the ensembles agree on every parameter."""
        return self.worst_rhat < AGREED_RHAT

    def reaches(self, goal: Goal) -> bool:
        """Whether the goal is met, by effective draws or by the total."""
        if goal.total is not None and self.draws >= goal.total:
            return True
        return goal.ess is not None and self.worst_ess >= goal.ess and self.agreed

    def more(self, goal: Goal) -> int | None:
        """About how many more draws the goal takes; None before there is an estimate."""
        if self.reaches(goal):
            return 0
        wanted = []
        if goal.total is not None:
            wanted.append(goal.total - self.draws)
        if goal.ess is not None and self.worst_ess > 0.0:
            short = math.ceil(self.draws * (goal.ess / self.worst_ess - 1.0))
            wanted.append(max(short, math.ceil(self.draws / 2)) if not self.agreed else short)
        return max(min(wanted), 1) if wanted else None

    def sentence(self, goal: Goal, *, going: bool = True) -> str:
        """Which parameter is worst, how many more draws are needed, and what to do.

        Parameters
        ----------
        goal : Goal
        going : bool
            Whether the run is under way.
        """
        go_on = "let the run go on" if going else "resume the run"
        if self.worst is None:
            few = (
                "too few to say what they are worth" if self.draws else "as the warm-up comes first"
            )
            return f"{self.draws:,} draws so far, {few}: {go_on}."
        parts = [f"{self.worst} is worst: {self.worst_ess:,.0f} effective of {self.draws:,} draws."]
        if not self.agreed:
            parts.append(
                f"The ensembles disagree on {self.least_agreed} (R-hat {self.worst_rhat:.3f}, "
                f"above {AGREED_RHAT}): do not use these numbers yet; if R-hat stays there, look "
                "for separate modes or a bound in the corner figure."
            )
        else:
            parts.append(f"The ensembles agree (R-hat at most {self.worst_rhat:.3f}).")
        more = self.more(goal)
        if more:
            aim = f"{goal.ess:,.0f} effective" if goal.ess is not None else f"{goal.total:,}"
            parts.append(f"About {more:,} more draws for {aim}: {go_on}.")
        elif self.agreed:
            parts.append("Nothing more is needed.")
        return " ".join(parts)


def report(values: Mapping[str, FloatArray]) -> Report:
    """Take stock of draws.

    Parameters
    ----------
    values : mapping of str to array, shape (ensembles, rows, walkers)
        Draws after the warm-up, by parameter; constant ones are left out.
    """
    ess, agreement, draws = {}, {}, 0
    for name, draw in values.items():
        draws = draw.size
        if draw.shape[1] >= FEWEST_ROWS and np.ptp(draw) > 0.0:
            ess[name] = ensemble_ess(draw)
            agreement[name] = ensemble_rhat(draw)
    return Report(draws, ess, agreement)


def ensemble_ess(draws: FloatArray) -> float:
    """Effective draws behind the mean rank, shape (ensembles, rows, walkers).

    The variance of the mean follows from the autocorrelation of the ensembles'
    means, whatever the walkers of one ensemble have in common.
    """
    order = rankdata(draws, axis=None).reshape(draws.shape)
    score = ndtri((order - 0.375) / (draws.size + 0.25))
    series = score.mean(axis=2)
    spread = float(np.var(series, ddof=1))
    if not spread > 0.0:
        return 0.0
    found = ess_of_mean(series) * float(np.var(score, ddof=1)) / spread
    return min(found, float(draws.size)) if math.isfinite(found) else 0.0


def ensemble_rhat(draws: FloatArray) -> float:
    """Rank-normalised split R-hat over ensembles, shape (ensembles, rows, walkers)."""
    found = rhat(draws.reshape(draws.shape[0], -1))
    return found if found < _WORST_RHAT else _WORST_RHAT
