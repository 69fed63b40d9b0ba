"""The figure of the relation follows a break, overtones with an offset and a group's scatter."""

from __future__ import annotations

from collections.abc import Mapping

import handmade
import numpy as np
import pytest
from matplotlib.figure import Figure
from star_tables import built

from ladderfit.plots.relation import relation_figure
from ladderfit.result import Diagnostics, Result

MORE = {"slope_beyond": -2.6, "overtone_offset": -0.5, "scatter[far]": 0.15}
CHANGES = {
    "cepheids.overtones": "offset",
    "cepheids.periods": [3.0, 100.0],
    "relation.break": 20.0,
    "relation.scatter": ["far"],
    "groups": {"far": {"hosts": ["Q07"]}},
}


def figure(changes: Mapping[str, object], *more: str) -> Figure:
    ladder = built(dict(changes))
    numbers = {name: mean for name, (mean, _) in handmade.names_of(ladder).items()}
    numbers |= {name: MORE[name] for name in more}
    draws = {name: np.full(50, mean) for name, mean in numbers.items()}
    made = relation_figure(Result(ladder.choices, draws, Diagnostics("direct", 1, {}), ladder))
    assert made is not None
    return made


def legend(made: Figure) -> list[str]:
    found = made.axes[0].get_legend()
    assert found is not None
    return [text.get_text() for text in found.get_texts()]


def test_the_line_bends_at_the_break() -> None:
    axes = figure(CHANGES, *MORE).axes[0]
    line = next(line for line in axes.get_lines() if len(line.get_xdata()) == 200)
    log_period, magnitude = np.log10(np.asarray(line.get_xdata())), np.asarray(line.get_ydata())
    slopes = np.diff(magnitude) / np.diff(log_period)
    bend = np.log10(20.0)
    assert slopes[log_period[1:] < bend] == pytest.approx(-3.3, abs=1e-9)
    assert slopes[log_period[:-1] > bend] == pytest.approx(-2.6, abs=1e-9)


def test_words_of_the_terms() -> None:
    made = figure(CHANGES, *MORE)
    axes = made.axes[0]
    assert axes.get_ylabel() == (
        "Absolute magnitude [mag]\nat 12+log(O/H) = 8.69,\nas of the fundamental mode"
    )
    assert "intrinsic scatter (68 % of stars in no group)" in legend(made)
    (numbers,) = (text.get_text() for text in axes.texts)
    assert [line.split(" = ")[0] for line in numbers.splitlines()] == [
        "$b$",
        "$M_0$",
        "$Z$",
        "$t$",
        "$b_2$",
        "$M_1$",
        "$t$ far",
    ]


def test_a_plain_relation_says_less() -> None:
    made = figure({})
    assert made.axes[0].get_ylabel() == "Absolute magnitude [mag]\nat 12+log(O/H) = 8.69"
    assert "intrinsic scatter (68 % of stars)" in legend(made)


def test_all_stars_in_groups_leave_no_common_scatter() -> None:
    ladder = built(
        {**CHANGES, "groups": {"far": {"hosts": ["Q07", "Orrel", "Tavin"], "parallax_stars": True}}}
    )
    numbers = {name: mean for name, (mean, _) in handmade.names_of(ladder).items()} | MORE
    del numbers["scatter"]
    draws = {name: np.full(50, mean) for name, mean in numbers.items()}
    made = relation_figure(Result(ladder.choices, draws, Diagnostics("direct", 1, {}), ladder))
    assert made is not None
    assert not any("scatter" in words for words in legend(made))
