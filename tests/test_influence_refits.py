"""Shifts by downdate and reweighting against exact refits with the object set aside.

Each refit is a ladder of its own, assembled from the tables without the object and
drawn with another seed.  95 of 100 have to agree within three combined Monte Carlo errors.
"""

from __future__ import annotations

from functools import cache

import numpy as np
import pandas as pd
import pytest
from set_asides import set_aside
from small_ladders import small_ladder

from ladderfit.influence import Influence, leave_one_out
from ladderfit.influence.sets import CEPHEID, FLOW, HOST, PEAK, STAR
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.result import Result
from ladderfit.sampling.run import draw
from ladderfit.shipped import sample_ladder

KINDS = (CEPHEID, STAR, PEAK, FLOW, HOST)


@cache
def sample() -> tuple[Ladder, Result, Influence]:
    return _with_influence(read_ladder(sample_ladder()))


@cache
def small(name: str) -> tuple[Ladder, Result, Influence]:
    return _with_influence(small_ladder(name))


def _with_influence(ladder: Ladder) -> tuple[Ladder, Result, Influence]:
    result = draw(ladder, seed=1)
    return ladder, result, leave_one_out(result)


def chosen(found: Influence, per_kind: int) -> pd.DataFrame:
    """The most influential objects of every kind, and as many spread over the rest."""
    parts = []
    target = "hubble_constant" if "hubble_constant" in found.targets else "zero_point"
    for kind in KINDS:
        table = found.by(target, kind=kind)
        table = table[table["how"] != "undetermined"]
        first = table.head(per_kind // 2)
        rest = table.iloc[len(first) :: max(1, len(table) // max(per_kind - len(first), 1))]
        parts += [first, rest.head(per_kind - len(first))]
    return pd.concat(parts)


@cache
def pulls(name: str, per_kind: int, draws: int) -> pd.DataFrame:
    """Per object and target: the shifts by refit and by downdate, and the combined error."""
    ladder, base, found = sample() if name == "sample" else small(name)
    lines = []
    for number, (_, row) in enumerate(chosen(found, per_kind).iterrows()):
        rest = set_aside(ladder, row["kind"], row["name"], row["host"])
        refit = draw(rest, seed=1000 + number, draws=draws)
        for name in found.targets:
            sides = [(result.sd(name), result.diagnostics.ess[name]) for result in (refit, base)]
            variance = sum(sd**2 / ess for sd, ess in sides) + row[f"{name}_mcse"] ** 2
            change = refit.mean(name) - base.mean(name)
            lines.append(
                (row["kind"], row["name"], name, change, row[name], np.sqrt(variance), sides[1][0])
            )
    columns = ["kind", "name", "target", "refit", "shift", "error", "sd"]
    return pd.DataFrame(lines, columns=columns)


def worst_of_objects(table: pd.DataFrame) -> pd.Series:
    """The largest disagreement of each object over all targets, in combined errors."""
    size = ((table["refit"] - table["shift"]) / table["error"]).abs()
    return size.groupby([table["kind"], table["name"]]).max()


@pytest.mark.full
def test_downdates_agree_with_refits_of_small_ladders(in_full: bool) -> None:
    """All kinds, whole hosts too."""
    names = ("all rungs", "flow", "uniform in volume") if in_full else ("all rungs",)
    parts = [pulls(name, 14, 8000) if in_full else pulls(name, 6, 4000) for name in names]
    table = pd.concat(parts, keys=names, names=["ladder"]).reset_index(level=0)
    table["name"] = table["ladder"] + " " + table["name"]
    worst = worst_of_objects(table)
    assert len(worst) > (100 if in_full else 25)
    assert np.mean(worst < 3.0) >= 0.95, worst.sort_values().tail(12)
    hosts = worst[worst.index.get_level_values(0) == HOST]
    assert len(hosts) >= (9 if in_full else 4)
    assert np.mean(hosts < 3.0) >= 0.9, hosts


@pytest.mark.full
def test_downdates_agree_with_refits_of_the_sample(in_full: bool) -> None:
    table = pulls("sample", 22, 8000) if in_full else pulls("sample", 2, 4000)
    worst = worst_of_objects(table)
    assert len(worst) >= (100 if in_full else 10)
    assert np.mean(worst < 3.0) >= (0.95 if in_full else 0.9), worst.sort_values().tail()


def test_shifts_are_not_noise() -> None:
    """Negative controls: no shift, and shifts of the wrong sign, are found at once."""
    table = pulls("all rungs", 6, 4000)
    none, wrong = table.assign(shift=0.0), table.assign(shift=-table["shift"])
    assert np.mean(worst_of_objects(none) < 3.0) < 0.6
    assert np.mean(worst_of_objects(wrong) < 3.0) < 0.6
