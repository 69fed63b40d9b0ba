"""The figure of checks: every row is there, supernovae with terms in a part of their own."""

from __future__ import annotations

from functools import cache
from itertools import pairwise

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from peak_ladders import TRIPP, parts_with
from peak_surveys import survey

from ladderfit.checks.predictive import Check, Checks, predictive_checks
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.plots.checks import checks_figure, peaks_have_terms
from ladderfit.plots.theme import DARK, LIGHT
from ladderfit.sampling.run import draw
from ladderfit.workbench.canvas import checks as canvas
from ladderfit.workbench.shown import Shown


@cache
def found(name: str) -> Checks:
    if name == "no terms":
        ladder = survey(3).change({"peak_relation": None})
    elif name == "covariance":
        ladder = with_covariance()
    elif name == "hosts too few":
        ladder = survey(3, hosts=4)
    else:
        ladder = survey(3, errors=name == "populations")
    return predictive_checks(draw(ladder, seed=1, draws=200), draws=50)


def with_covariance() -> Ladder:
    """Peaks of the expansion that share an error, beside widths and colours with errors."""
    choices, tables = parts_with("flow", TRIPP)
    choices["expansion"]["covariance"] = {"adds": True}
    shared = 0.05**2 * np.ones((len(tables["expansion"]),) * 2)
    return build_ladder(choices, tables | {"expansion.covariance": shared})


def rows_of(figure: Figure) -> int:
    FigureCanvasAgg(figure).draw()
    lists = [axes for axes in figure.axes if axes.get_xlabel() == "p-value"]
    return sum(len(axes.get_yticks()) for axes in lists)


@pytest.mark.parametrize("name", ["populations", "plain columns", "no terms", "hosts too few"])
def test_every_check_has_its_row(name: str) -> None:
    checks = found(name)
    figure = checks_figure(checks, theme=DARK if name == "plain columns" else LIGHT)
    assert rows_of(figure) == len(checks.checks)
    titles = {axes.get_title() for axes in figure.axes}
    assert ("colours, expansion" in titles) == (name in ("populations", "hosts too few"))
    assert ("peaks, expansion" in titles) == (name != "no terms")
    assert peaks_have_terms(checks) == (name != "no terms")


def test_a_covariance_of_peaks_leaves_the_checks_of_inputs() -> None:
    checks = found("covariance")
    assert checks.left_out["supernovae"] == "their covariance ties them together"
    expansion = {sample.name for sample in checks.samples if sample.group == "expansion"}
    assert expansion == {"colours, expansion", "widths, expansion"}
    assert rows_of(checks_figure(checks)) == len(checks.checks)


def test_tick_labels_of_small_p_values_keep_apart() -> None:
    base = found("populations")
    names = {check.sample for check in base.checks}
    low = tuple(Check(name, "distribution", 1e-4, 20) for name in sorted(names))
    figure = checks_figure(Checks(low, {}, base.samples))
    FigureCanvasAgg(figure).draw()
    for axes in figure.axes:
        if axes.get_xlabel() == "p-value":
            boxes = [label.get_window_extent() for label in axes.get_xticklabels()]
            boxes = [box for box in boxes if box.width > 0.0]
            assert all(a.x1 < b.x0 for a, b in pairwise(boxes))
            assert len(boxes) >= 2


def test_the_workbench_shows_them_on_their_rungs() -> None:
    checks, figure = found("populations"), Figure(figsize=(7.0, 4.2))
    canvas.checks(figure, Shown(None, rung="expansion", worked=checks), LIGHT)
    FigureCanvasAgg(figure).draw()
    titles = [axes.get_title() for axes in figure.axes]
    assert titles[:3] == ["peaks, expansion", "colours, expansion", "widths, expansion"]
    assert all(title.startswith("p of trend") for title in titles[3:])
    assert [axes.get_xlabel() for axes in figure.axes[3:]] == ["colour [mag]", "width", "redshift"]


def test_along_a_redshift_stands_the_redshift() -> None:
    """Trends are with its logarithm, the axis has the number itself."""
    figure = checks_figure(found("plain columns"))
    (axes,) = (axes for axes in figure.axes if axes.get_xlabel() == "redshift")
    x = np.concatenate([line.get_xdata() for line in axes.lines if len(line.get_xdata()) > 2])
    assert np.all((x > 0.02) & (x < 0.16))
