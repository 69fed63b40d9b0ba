"""How a run stands, in numbers and in a sentence."""

from __future__ import annotations

from dataclasses import dataclass

from ladderfit.sampling.convergence import Goal, Report
from ladderfit.sampling.run_folder import State


@dataclass(frozen=True)
class RunProgress:
    """How a run stands.

    Attributes
    ----------
    state : str
        One of starting, running, stopped, finished and failed.
    draws : int
        Kept after the warm-up.
    report : Report
        What they are worth: of phi while the run goes on, of every parameter once
        it is finished.
    rate : float
        Draws per second, warm-up included.
    goal : Goal
    message : str
        What there is to say besides, such as why it failed.
    """

    state: State
    draws: int
    report: Report
    rate: float
    goal: Goal
    message: str

    @property
    def ess(self) -> float:
        """Effective draws of the worst parameter."""
        return self.report.worst_ess

    @property
    def worst(self) -> str | None:
        """The parameter with the fewest effective draws; None before there is an estimate."""
        return self.report.worst

    @property
    def rhat(self) -> float:
        """The largest R-hat over the ensembles; infinite before there is an estimate."""
        return self.report.worst_rhat

    @property
    def fraction(self) -> float:
        """How much of the goal is reached, from 0 to 1."""
        parts = [0.0]
        if self.goal.ess is not None:
            parts.append(self.ess / self.goal.ess)
        if self.goal.total is not None:
            parts.append(self.draws / self.goal.total)
        return min(max(parts), 1.0)

    def __str__(self) -> str:
        """State, then what is worst, how many more draws are needed, and what to do."""
        words = f": {self.message}" if self.message else ""
        going = self.state in ("starting", "running")
        known = f"{self.state}{words}. {self.report.sentence(self.goal, going=going)}"
        return f"{known} ({self.rate:,.0f} draws/s)" if self.rate > 0.0 else known
