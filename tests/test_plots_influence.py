"""Figures of anchors, influence and priors: what they say is what the tables hold."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from matplotlib.figure import Figure
from small_ladders import small_ladder

from ladderfit.anchors import compare_anchors
from ladderfit.influence import leave_one_out
from ladderfit.plots.anchors import anchors_figure
from ladderfit.plots.influence import influence_figure
from ladderfit.plots.priors import priors_figure
from ladderfit.plots.theme import DARK, LIGHT
from ladderfit.result import Result
from ladderfit.sampling.run import draw
from ladderfit.sensitivity.power_scaling import prior_sensitivity


@cache
def drawn(name: str) -> Result:
    return draw(small_ladder(name), draws=1000)


def texts(figure: Figure) -> list[str]:
    """All text of a figure once it is laid out."""
    figure.draw_without_rendering()
    axes = figure.axes
    found = [label.get_text() for each in axes for label in each.get_yticklabels()]
    found += [text.get_text() for each in axes for text in each.texts]
    found += [each.get_title(loc="left") for each in axes]
    found += [each.get_xlabel() for each in axes]
    return found


@pytest.mark.parametrize("theme", [LIGHT, DARK], ids=lambda theme: theme.name)
def test_anchors_have_rows_and_tensions(theme) -> None:
    found = compare_anchors(drawn("anchors and parallaxes").ladder, draws=1000)
    figure = anchors_figure(found, theme=theme)
    written = texts(figure)
    table = found.table()
    for case in found.cases:
        share = f"(weight {100.0 * case.weight:.0f} %)"
        assert f"{case.anchor.removeprefix('the ')} {share}" in written
        assert f"{table.loc[case.anchor, 'tension']:.1f} sd" in written
    assert "free zero points" in written
    axes = figure.axes[0]
    low, high = sorted(axes.get_xlim())
    assert low < table["zero_point_alone"].min() and table["zero_point_alone"].max() < high


def test_an_anchor_without_comparison_says_so() -> None:
    figure = anchors_figure(compare_anchors(small_ladder("one anchor"), draws=500))
    assert "nothing to compare" in texts(figure)


def test_influence_is_ranked() -> None:
    found = leave_one_out(drawn("all rungs"))
    figure = influence_figure(found, "zero_point", most=5)
    single, hosts = figure.axes
    order = found.by("zero_point")
    expected = order[order["kind"] != "host"].head(5)
    shown = [label.get_text().split(" (")[0] for label in single.get_yticklabels()]
    assert shown == expected["name"].tolist()
    assert single.get_title(loc="left").startswith("5 of ")
    assert hosts.get_title(loc="left") == "5 of 5 whole hosts"
    marks = [line for line in single.lines if line.get_marker() not in ("None", None, "", "|")]
    places = sorted(float(line.get_xdata()[0]) for line in marks if len(line.get_xdata()) == 1)
    np.testing.assert_allclose(places, sorted(expected["zero_point"]))
    with pytest.raises(KeyError, match="scatter"):
        influence_figure(found, "scatter")


def test_what_cannot_be_spared_is_written() -> None:
    figure = influence_figure(leave_one_out(drawn("one anchor")))
    assert "scale undetermined without it" in texts(figure)
    assert any("$M_0$" in text for text in texts(figure))  # no Hubble constant to show


def test_names_are_not_read_as_mathematics() -> None:
    found = leave_one_out(drawn("anchors"), kinds=["Cepheid"])
    found.table.loc[found.table.index[0], "name"] = "a$b$c"
    written = texts(influence_figure(found, "zero_point", most=len(found.table)))
    assert any(text.startswith(r"a\$b\$c") for text in written)


def test_priors_show_both_sensitivities_and_shifts() -> None:
    found = prior_sensitivity(drawn("all rungs"))
    figure = priors_figure(found)
    left = figure.axes[0]
    drawn_points = {line.get_label(): line.get_xdata() for line in left.lines}
    np.testing.assert_allclose(drawn_points["priors"], found.table["prior"])
    np.testing.assert_allclose(drawn_points["data"], found.table["likelihood"])
    largest = found.components.stack().idxmax()
    value = round(float(found.shifts.loc[largest]), 2)
    text = f"{value:+.2f}".replace("-", "\N{MINUS SIGN}") if value else "0.00"
    assert text in texts(figure)
