"""Which checks notice which departure from the model, at which size, in surveys like the sample.

``python tests/benchmarks/breakages.py [SURVEYS [WORKERS [FILE [WORDS]]]]``; outcomes stream to
FILE, from which a killed run goes on.  With WORDS, only rows whose names start with them.

A check notices where its p-value is under 0.01.  The first row has no departure: what
is noticed there is false alarm.
"""

from __future__ import annotations

import sys
from collections import defaultdict
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np

import ladderfit as lf
from ladderfit.anchors import PARALLAXES, tension
from ladderfit.checks.predictive import predictive_checks
from ladderfit.ladder_file import read_choices
from ladderfit.mock import PLAN, simulate
from ladderfit.mock.breakages import Breakage
from ladderfit.mock.light_curves import LightCurves
from ladderfit.sampling.run import draw
from ladderfit.shipped import sample_ladder
from ladderfit.sweep import Job, Outcome, Task, sweep

SEED = 1517
LEVEL = 0.01
DRAWS = 600
SIZES: dict[str, dict[str, Any]] = {
    "none": {},
    "slope larger by 0.2 in anchors": {"slope_in_anchors": 0.2},
    "slope larger by 0.4 in anchors": {"slope_in_anchors": 0.4},
    "crowding of 0.05 mag at 32 mag": {"crowding": 0.05},
    "crowding of 0.15 mag at 32 mag": {"crowding": 0.15},
    "dust ratio larger by 0.1": {"dust_ratio": 0.1},
    "dust ratio larger by 0.2": {"dust_ratio": 0.2},
    "light curves, none": {"light": True},
    "light curves, none redder than 0.10": {"light": True, "reddest": 0.10},
    "light curves, none redder than 0.00": {"light": True, "reddest": 0.0},
}


def survey(options: Mapping[str, Any], number: int) -> tuple[lf.Ladder, dict[str, float]]:
    """One simulated survey under the sample's choices, and its truth."""
    wrong = {key: value for key, value in options.items() if key != "light"}
    light = LightCurves() if options.get("light") else None
    plan = replace(PLAN, breakage=Breakage(**wrong), light_curves=light)
    mock = simulate(plan, np.random.default_rng([SEED, number]))
    file = sample_ladder().with_name("sample.toml" if light is None else "tripp.toml")
    plain = read_choices(file).to_mapping()
    plain.pop("alternatives", None)
    plain["cepheids"].pop("set_aside", None)
    for host, (modulus, error) in mock.anchors.items():
        plain["anchors"]["geometric"][host] = {"modulus": modulus, "error": error}
    tables = {
        "cepheids": mock.cepheids,
        "anchors.parallaxes": mock.parallax_stars,
        "supernovae": mock.supernovae,
        "expansion": mock.flow,
    }
    return lf.build_ladder(plain, tables), plan.truth()


def examine(_: None, arguments: Mapping[str, Any]) -> dict[str, Any]:
    """p-values of all checks of one survey, and how far numbers are from the truth."""
    ladder, truth = survey(SIZES[arguments["name"]], arguments["number"])
    result = draw(ladder, seed=1, draws=DRAWS)
    checks = predictive_checks(result, draws=DRAWS).checks
    found = {f"{check.sample}: {check.about}": check.p for check in checks}
    for anchor in ("Tavin", "Orsell", PARALLAXES):
        found[f"tension of {anchor}"] = tension(ladder, anchor, seed=1, draws=DRAWS).probability
    pulls = {
        name: (result.mean(name) - truth[name]) / result.sd(name)
        for name in ("hubble_constant", "slope", "peak_magnitude", "beta")
        if name in truth
    }
    return {"p": found, "pulls": pulls}


def main(surveys: int, workers: int, file: Path | None, words: str) -> None:
    """Run and print; every kind is examined once before any is examined again."""
    names = [name for name in SIZES if name.startswith(words)]
    tasks = [
        Task(f"{name} {k}", {"name": name, "number": k}) for k in range(surveys) for name in names
    ]
    outcomes = sweep(Job(examine), tasks, workers=workers, file=file)
    show({task.key: outcome for task, outcome in zip(tasks, outcomes, strict=True)})


def show(outcomes: Mapping[str, Outcome]) -> None:
    """A row for each kind: pulls, and the checks that notice most often."""
    for name in SIZES:
        mine = [each for key, each in outcomes.items() if key.rpartition(" ")[0] == name]
        done = [outcome.values for outcome in mine if outcome.status == "done"]
        if not done:
            continue
        share: dict[str, list[bool]] = defaultdict(list)
        for each in done:
            for check, p in each["p"].items():
                share[check].append(p < LEVEL)
        rates = {check: float(np.mean(noticed)) for check, noticed in share.items()}
        best = sorted(rates, key=lambda check: -rates[check])[:5]
        pulls = {key: np.mean([each["pulls"][key] for each in done]) for key in done[0]["pulls"]}
        seconds = sum(outcome.seconds for outcome in mine)
        print(f"{name} ({len(done)} of {len(mine)} surveys, {len(rates)} checks, {seconds:.0f} s)")
        print("   pulls: " + ", ".join(f"{key} {pull:+.2f}" for key, pull in pulls.items()))
        print("   " + "; ".join(f"{check} {100 * rates[check]:.0f} %" for check in best))


if __name__ == "__main__":
    asked = sys.argv[1:]
    main(
        int(asked[0]) if asked else 20,
        int(asked[1]) if len(asked) > 1 else 2,
        Path(asked[2]) if len(asked) > 2 else None,
        asked[3] if len(asked) > 3 else "",
    )
