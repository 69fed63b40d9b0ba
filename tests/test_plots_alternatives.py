"""The figures of alternatives: what they show."""

from __future__ import annotations

import builders
import numpy as np
import pytest
from matplotlib.figure import Figure

from ladderfit.alternatives import Comparison, run_alternatives
from ladderfit.ladder import build_ladder
from ladderfit.plots.alternatives import (
    MOST_ROWS,
    alternatives_figure,
    budget_figure,
    comparison_figures,
)
from ladderfit.plots.theme import DARK
from ladderfit.sensitivity.error_budget import error_budget

AXES = {
    "cepheids.periods": [[8.0, 100.0], [5.0, 50.0]],
    "relation.metallicity": ["none"],
    "anchors.parallaxes.use": [False],
    "cepheids.columns.period": ["$no where$"],
}


@pytest.fixture(scope="module")
def comparison() -> Comparison:
    ladder = build_ladder(builders.choices(), builders.tables())
    return run_alternatives(ladder, AXES, workers=1, draws=300)


def texts(figure: Figure, panel: int) -> list[str]:
    figure.canvas.draw()
    return [text.get_text() for text in figure.axes[panel].get_yticklabels()]


def test_a_row_per_fit(comparison: Comparison) -> None:
    figure = alternatives_figure(comparison)
    assert len(figure.axes) == 3
    assert texts(figure, 0)[:2] == ["baseline", "cepheids.periods = [8, 100]"]
    assert texts(figure, 0)[-1] == r'cepheids.columns.period = "\$no where\$"'
    assert [axes.get_xlabel() for axes in figure.axes][2] == "$H_0$ [km/s/Mpc]"
    drawn = [float(each[0].get_xdata()[0]) for each in figure.axes[2].containers]
    fits = [comparison.baseline, *comparison.fits]
    np.testing.assert_allclose(drawn, [fit.mean("hubble_constant") for fit in fits if fit.done])
    assert "failed" in [text.get_text() for text in figure.axes[0].texts]


def test_many_fits_are_points_per_axis() -> None:
    ladder = build_ladder(builders.choices(), builders.tables())
    axes = {
        "expansion.q0": [-0.505 - 0.01 * i for i in range(MOST_ROWS)],
        "relation.metallicity": ["none"],
    }
    found = run_alternatives(ladder, axes, workers=1, draws=100)
    figure = alternatives_figure(found, theme=DARK)
    assert texts(figure, 0) == ["expansion.q0 (40)", "relation.metallicity (1)"]
    shown = figure.axes[2].lines[1].get_xdata()
    shifts = [found.shift(fit, "hubble_constant") for fit in found.fits[:MOST_ROWS]]
    np.testing.assert_allclose(shown, shifts)


def test_the_budget(comparison: Comparison) -> None:
    budget = error_budget(comparison.result)
    assert [name for name, _ in comparison_figures(comparison, budget)] == [
        "alternatives",
        "budget",
    ]
    figure = budget_figure(budget)
    assert figure is not None
    assert texts(figure, 0)[0] == "anchor Tavin"
    widths = [bar.get_width() for bar in figure.axes[2].patches]
    shares = 100.0 * budget["hubble_constant_share"].iloc[:-1].clip(lower=0.0)
    np.testing.assert_allclose(widths, shares)
    assert budget_figure(error_budget(comparison.result, ())) is None
