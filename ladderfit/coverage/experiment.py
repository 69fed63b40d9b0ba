"""Many mocks of one ladder, each fitted: what is shared, what a task does, what came of all."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from importlib import metadata
from pathlib import Path
from typing import Any

import numpy as np

from ladderfit import schema
from ladderfit.assembly import IN_MEMORY, MATRICES
from ladderfit.coverage.design import WIDEN, Design, design_of
from ladderfit.coverage.outcome import Experiment, experiment_of
from ladderfit.coverage.quantities import ranks
from ladderfit.coverage.ranks import DRAWS
from ladderfit.errors import InputError, Problem
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.mock.redraw import redraw
from ladderfit.result import Result
from ladderfit.sampling.direct import Progress
from ladderfit.sampling.run import draw
from ladderfit.sampling.warm import WarmDrawer
from ladderfit.sweep import Job, Task, sweep, task_seed

__all__ = ["Experiment", "Setup", "run_coverage"]

ALL_DRAWS = 2 * DRAWS + 1  # of each fit: half are ranked, half give the centre
START_DRAWS = 4000  # of the ladder itself, from which the design prior is made


@dataclass(frozen=True, eq=False)
class Setup:
    """What all mocks and fits have in common.

    Attributes
    ----------
    ladder : Ladder
        Without its list of alternatives.
    design : Design or None
        Where truths come from; None where they are fixed.
    truth : mapping of str to float
        The fixed truth; empty where there is a design.
    seed : int
    changes : mapping of str to value
        Choices that the fits make otherwise than the simulation, by dotted key: a
        fault, to see whether it is found.
    told : mapping of str to float
        Parameters that the fits hold fixed at this multiple of the truth: another fault.
    """

    ladder: Ladder
    design: Design | None
    truth: Mapping[str, float]
    seed: int
    changes: Mapping[str, Any] = field(default_factory=dict)
    told: Mapping[str, float] = field(default_factory=dict)

    def mock(self, number: int) -> tuple[Ladder, dict[str, float]]:
        """The ladder to fit and its truth; they depend on seed and number alone."""
        rng = np.random.default_rng(task_seed(self.seed, f"mock {number}"))
        truth = dict(self.truth) if self.design is None else self.design.truth(rng)
        drawn = redraw(self.ladder, truth, rng)
        choices, tables = dict(drawn.choices), dict(drawn.tables)
        if self.design is not None:
            choices, tables = self.design.imposed(choices, tables)
            for key in tables.keys() & MATRICES:
                choices = schema.with_value(choices, key, {"file": IN_MEMORY})
        for key, value in self.changes.items():
            choices = schema.with_value(choices, key, value)
        if self.told:
            fixed = {name: {"fixed": part * truth[name]} for name, part in self.told.items()}
            choices["priors"] = {**choices.get("priors", {}), **fixed}
        return build_ladder(choices, tables), truth


@dataclass(frozen=True, eq=False)
class Start:
    """A setup at a worker, and a drawer that stands at the ladder itself."""

    setup: Setup
    drawer: WarmDrawer


def start(setup: Setup) -> Start:
    """Draw the ladder itself once, so that every mock's mode is sought from there."""
    drawer = WarmDrawer()
    drawer.draw(setup.ladder, draws=DRAWS, seed=setup.seed)
    return Start(setup, drawer)


def fit_mock(state: Start, arguments: Mapping[str, Any]) -> dict[str, Any]:
    """Simulate, fit and rank one mock."""
    number = int(arguments["number"])
    ladder, truth = state.setup.mock(number)
    seed = task_seed(state.setup.seed, f"fit {number}")
    result = state.drawer.aside(ladder, draws=ALL_DRAWS, seed=seed)
    pulls = {
        name: (result.mean(name) - truth[name]) / result.sd(name)
        for name in result.draws
        if name in truth and result.sd(name) > 0.0
    }
    return {
        "ranks": ranks(ladder, result.draws, truth, DRAWS),
        "pulls": pulls,
        "pareto_k": result.diagnostics.pareto_k,
        "ess": min(result.diagnostics.ess.values()),
    }


def setup_of(
    ladder: Ladder,
    *,
    seed: int = 1,
    widen: float = WIDEN,
    fixed: bool = False,
    changes: Mapping[str, Any] | None = None,
    told: Mapping[str, float] | None = None,
) -> tuple[Setup, Result]:
    """The setup of a ladder's coverage, and the fit of the ladder that it is made from.

    Raises
    ------
    UndeterminedError, SamplingError
        If the ladder itself cannot be fitted.
    InputError
        If the simulator does not know a term of the ladder.
    """
    bare = ladder.change({"alternatives": None}) if ladder.choices.alternatives else ladder
    result = draw(bare, seed=seed, draws=START_DRAWS)
    truth = {name: result.mean(name) for name in result.draws} if fixed else {}
    design = None if fixed else design_of(result, widen)
    setup = Setup(bare, design, truth, seed, dict(changes or {}), dict(told or {}))
    plain = replace(setup, changes={}, told={})
    plain.mock(0)  # what the simulator refuses is said before anything is drawn
    return setup, result


def run_coverage(
    ladder: Ladder,
    repeats: int = 200,
    *,
    seed: int = 1,
    widen: float = WIDEN,
    fixed: bool = False,
    changes: Mapping[str, Any] | None = None,
    told: Mapping[str, float] | None = None,
    workers: Any = None,
    file: str | Path | None = None,
    progress: Progress | None = None,
) -> Experiment:
    """Simulate a ladder many times from drawn truths, fit every mock, rank the truths.

    Parameters
    ----------
    ladder : Ladder
    repeats : int
        How many mocks.
    seed : int
        The same numbers whoever does the work.
    widen : float
        Width of the design prior, in posteriors of the ladder.
    fixed : bool
        Truths stay at the ladder's posterior means, and the fits have the ladder's own
        priors: how often intervals cover then, as a frequentist would ask.
    changes : mapping of str to value, optional
        Choices of the fits alone, by dotted key: faults, to see them found.
    told : mapping of str to float, optional
        Parameters held fixed in the fits at a multiple of the truth: faults too.
    workers, file, progress
        As for `ladderfit.sweep.sweep`.

    Returns
    -------
    Experiment

    Raises
    ------
    InputError
        If the simulator does not know a term of the ladder, or `file` is of other work.
    UndeterminedError, SamplingError
        If the ladder itself cannot be fitted.
    """
    if repeats < 1:
        raise InputError(Problem(f"{repeats} mocks", "1 or more", "ask for more"))
    if progress is not None:
        progress("fitting the ladder itself", 0.0)
    setup, result = setup_of(
        ladder, seed=seed, widen=widen, fixed=fixed, changes=changes, told=told
    )
    outcomes = sweep(
        Job(fit_mock, setup, start),
        [Task(f"mock {number}", {"number": number}) for number in range(repeats)],
        workers=workers,
        file=None if file is None else Path(file),
        identity=_identity(setup),
        progress=progress,
    )
    return experiment_of(result, setup.design, outcomes)


def _identity(setup: Setup) -> dict[str, Any]:
    """What outcomes depend on besides their number."""
    ladder, design = setup.ladder, setup.design
    told = {k: v for k, v in ladder.choices.to_mapping().items() if k not in ("title", "sampling")}
    stated = dict(setup.truth) if design is None else design.table().to_dict("records")
    whole = json.dumps([told, stated, setup.changes, setup.told], sort_keys=True, default=str)
    return {
        "choices": hashlib.sha256(whole.encode()).hexdigest(),
        "tables": {key: source.sha256 for key, source in ladder.sources.items()},
        "truths": "fixed" if design is None else "design prior",
        "seed": setup.seed,
        "draws": ALL_DRAWS,
        "ladderfit": metadata.version("ladderfit"),
    }
