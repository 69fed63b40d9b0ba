"""One alternative: its fit, and what is recorded of it."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from ladderfit.ladder import Ladder
from ladderfit.posterior.errors_in_inputs import uses_population
from ladderfit.result import Result
from ladderfit.samples import FloatArray, StarSample
from ladderfit.sampling.warm import WarmDrawer

BASELINE = ""  # the key of the baseline among alternatives


@dataclass(frozen=True, eq=False)
class Baseline:
    """What all fits start from: the ladder, without its list of alternatives, and settings."""

    ladder: Ladder
    draws: int
    seed: int


@dataclass(frozen=True, eq=False)
class Start:
    """A baseline that has been drawn, and the drawer that stands at it."""

    baseline: Baseline
    drawer: WarmDrawer
    result: Result


def start(baseline: Baseline) -> Start:
    """Draw the baseline; every worker does so once, and finds the same.

    It is drawn once to find it, and once more as the alternatives are, from there, so
    that it shares their random numbers.
    """
    drawer = WarmDrawer()
    drawer.draw(baseline.ladder, draws=baseline.draws, seed=baseline.seed)
    again = drawer.aside(baseline.ladder, draws=baseline.draws, seed=baseline.seed)
    return Start(baseline, drawer, again)


def fit(state: Start, arguments: Mapping[str, Any]) -> dict[str, Any]:
    """Fit one alternative from where the baseline is, whatever was fitted in between.

    All fits use the baseline's seed (unless the seed is what changes), so that a change
    of choices shows above the noise of drawing: what two fits have in common of it
    cancels in their difference.
    """
    changes, baseline = arguments["changes"], state.baseline
    ladder = baseline.ladder.change(changes)
    seed = ladder.choices.sampling.seed if "sampling.seed" in changes else baseline.seed
    draws = ladder.choices.sampling.draws if "sampling.draws" in changes else baseline.draws
    return record_of(state.drawer.aside(ladder, draws=draws, seed=seed))


def record_of(result: Result) -> dict[str, Any]:
    """What a table needs of a result, as plain JSON values."""
    found = result.diagnostics
    return {
        "parameters": {name: [result.mean(name), result.sd(name)] for name in result.draws},
        "kept": {section: kept.kept for section, kept in result.ladder.kept.items()},
        "draws": result.size,
        "ess": min((value for value in found.ess.values()), default=float(result.size)),
        "pareto_k": found.pareto_k,
        "log_evidence": found.log_evidence,
        "log_evidence_error": found.log_evidence_error,
        "data": data_mark(result.ladder),
        "notes": list(found.notes),
    }


def data_mark(ladder: Ladder) -> str:
    """A mark that two ladders share if they are fitted to the same data.

    Data are the numbers that have a density in the likelihood: magnitudes, parallaxes,
    peaks and what standardises them, velocities, geometric moduli, a published
    intercept, and metallicities and colours where they have populations; with whose
    they are.  Periods, redshifts, errors and other metallicities are given, not
    fitted: they belong to the model.
    """
    mark = hashlib.sha256()

    def add(*parts: Any) -> None:
        for part in parts:
            if isinstance(part, np.ndarray) and part.dtype.kind in "fi":
                mark.update(np.ascontiguousarray(part).tobytes())
            else:
                mark.update(json.dumps(list(map(str, part))).encode())

    for section, stars in (("stars", ladder.cepheids), ("parallaxes", ladder.parallax_stars)):
        if stars is not None:
            order = np.argsort(stars.row, kind="stable")
            add([section], stars.row[order], *(column[order] for column in _fitted(ladder, stars)))
    for name in ("peaks", "flow"):
        sample = getattr(ladder, name)
        if sample is not None:
            inputs = sample.inputs.values
            add([name, *inputs], sample.row, sample.magnitude, *inputs.values())
    if ladder.velocities is not None:
        add(["velocities"], ladder.velocities.row, ladder.velocities.velocity)
    add(*([a.name, repr(a.modulus)] for a in ladder.geometric))
    expansion = ladder.choices.expansion
    if expansion is not None and expansion.intercept is not None:
        add(["intercept", repr(expansion.intercept.value)])
    return mark.hexdigest()[:16]


def _fitted(ladder: Ladder, stars: StarSample) -> list[FloatArray]:
    columns = [stars.magnitude]
    if stars.parallax is not None:
        columns.append(stars.parallax)
    if uses_population(ladder, stars):
        columns.append(stars.metallicity)
    if stars.photometry is not None:  # colours have a density of their own
        columns += [stars.photometry.band, stars.photometry.colour]
    return columns


def identity_of(baseline: Baseline, version: str) -> dict[str, Any]:
    """What outcomes depend on besides their own changes, for the head of their file."""
    mapping = baseline.ladder.choices.to_mapping()
    told = {key: value for key, value in mapping.items() if key not in ("title", "sampling")}
    choices = json.dumps(told, sort_keys=True, default=str)
    return {
        "choices": hashlib.sha256(choices.encode()).hexdigest(),
        "tables": {key: source.sha256 for key, source in baseline.ladder.sources.items()},
        "draws": baseline.draws,
        "seed": baseline.seed,
        "ladderfit": version,
    }
