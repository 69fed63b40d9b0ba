"""Peaks against width, colour, decline rate and host mass: what is shown, and the figures."""

from __future__ import annotations

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from peak_ladders import EVERYTHING, RATE, TRIPP, ladder_with

import ladderfit as lf
from ladderfit.checks.peak_predictions import expected
from ladderfit.checks.peak_views import measured_line, peak_view, term_draws, views_of
from ladderfit.checks.residuals import flow_residuals, peak_residuals
from ladderfit.ladder import Ladder
from ladderfit.plots import figures
from ladderfit.plots.peaks import (
    colour_panel,
    decline_rate_panel,
    mass_panel,
    peaks_figure,
    width_panel,
)
from ladderfit.plots.theme import COLUMN, DARK, WIDTH
from ladderfit.posterior.joint import posterior
from ladderfit.result import Diagnostics, Result, ordered
from ladderfit.shipped import shipped

VALUES = {
    "peak_magnitude": -19.3,
    "peak_scatter": 0.1,
    "alpha": 0.14,
    "beta": 3.0,
    "decline_slope": 0.8,
    "decline_curvature": 0.4,
    "mass_step": -0.06,
    "survey_offset": 0.02,
    "width_mean": 0.1,
    "width_spread": 0.9,
    "decline_rate_mean": 0.0,
    "decline_rate_spread": 0.2,
    "colour_mean": 0.01,
    "colour_spread": 0.09,
    "hubble_constant": 71.0,
    "slope": -3.3,
    "zero_point": -5.9,
    "metallicity": -0.2,
    "scatter": 0.08,
    "modulus": 30.0,
}


def at(ladder: Ladder) -> Result:
    """A result of which every draw is the same, near plausible numbers."""
    joint = posterior(ladder)
    names = [*joint.split.coefficients, *joint.split.phi_names, *joint.split.fixed]
    names += [f"modulus[{host}]" for host in ladder.hosts]
    draws = {n: np.full(50, VALUES.get(n.split("[")[0], 0.0)) for n in dict.fromkeys(names)}
    return Result(ladder.choices, ordered(draws), Diagnostics("direct", 1, {}), ladder)


@pytest.mark.parametrize("group", ["hosts", "expansion"])
def test_expected_peaks_are_those_of_the_joint_normal(group: str) -> None:
    """Mean and variance of the peak given width and colour, from one joint covariance."""
    ladder = ladder_with("flow", TRIPP)
    result, sample = at(ladder), ladder.peaks if group == "hosts" else ladder.flow
    found = expected(result, sample, group)
    for i in range(len(sample)):
        inputs = {name: values[i] for name, values in sample.inputs.values.items()}
        a = np.array([-0.14, 3.0])
        population = np.diag([0.9**2, 0.09**2])
        wc = inputs["width_colour_covariance"]
        errors = np.array([[inputs["width_error"] ** 2, wc], [wc, inputs["colour_error"] ** 2]])
        both = population + errors
        k = np.array([inputs["peak_width_covariance"], inputs["peak_colour_covariance"]])
        cross = a @ population + k
        off = np.array([inputs["width"] - 0.1, inputs["colour"] - 0.01])
        mean = a @ [0.1, 0.01] + cross @ np.linalg.solve(both, off)
        extra = a @ population @ a - cross @ np.linalg.solve(both, cross)
        assert found.total[i] == pytest.approx(mean)
        assert found.variance[i] == pytest.approx(extra)
        assert found.noise[i] == pytest.approx(k @ np.linalg.solve(both, off))


def test_residuals_lose_all_terms() -> None:
    ladder = ladder_with("flow", EVERYTHING)
    result = at(ladder)
    bare = at(ladder.change({"peak_relation": None}))
    for function, sample, group in (
        (peak_residuals, ladder.peaks, "hosts"),
        (flow_residuals, ladder.flow, "expansion"),
    ):
        gone = function(bare).residual - function(result).residual
        np.testing.assert_allclose(gone, expected(result, sample, group).total)


def test_views_follow_the_terms() -> None:
    ladder = ladder_with("flow", EVERYTHING)
    assert views_of(at(ladder)) == ("width", "colour", "host_mass")
    assert views_of(at(ladder_with("flow", RATE))) == ("decline_rate", "colour")
    assert views_of(at(ladder.change({"peak_relation": None}))) == ()
    with pytest.raises(ValueError, match="no term in decline_rate"):
        peak_view(at(ladder), "decline_rate")


def test_a_view_has_this_term_and_no_other() -> None:
    ladder = ladder_with("flow", EVERYTHING)
    result = at(ladder)
    view = peak_view(result, "host_mass")
    assert len(view) == len(ladder.peaks) + len(ladder.flow)
    assert view.in_hosts.sum() == len(ladder.peaks)
    step = np.where(view.x >= 10.0, -0.03, 0.03)
    np.testing.assert_allclose(view.model, step)
    both = np.concatenate([peak_residuals(result).residual, flow_residuals(result).residual])
    np.testing.assert_allclose(view.data, both + step)
    assert not view.diluted
    line = term_draws(result, "width", [0.0, 1.0])
    np.testing.assert_allclose(line, np.tile([0.0, -0.14], (50, 1)))


def test_measured_widths_follow_a_shallower_line() -> None:
    view = peak_view(at(ladder_with("flow", TRIPP, covariances=False)), "width")
    rise = float(np.diff(measured_line(view, [0.0, 1.0]))[0])
    assert -0.14 < rise < -0.09  # errors of 0.2 to 0.6 beside a spread of 0.9
    exact = peak_view(at(ladder_with("flow", TRIPP, covariances=False, errors=False)), "width")
    assert float(np.diff(measured_line(exact, [0.0, 1.0]))[0]) == pytest.approx(-0.14)


def test_naive_expectations_are_the_coefficient_times_the_measured_input() -> None:
    ladder = ladder_with("flow", TRIPP).change({"peak_relation.errors": "in the variance"})
    view = peak_view(at(ladder), "width")
    np.testing.assert_allclose(view.model, -0.14 * view.x)


@pytest.fixture(scope="module")
def tripp() -> Result:
    return lf.draw(lf.read_ladder(shipped("sample_data") / "tripp.toml"), seed=1, draws=500)


def test_the_figure_has_a_panel_for_each_term(tripp: Result) -> None:
    figure = peaks_figure(tripp)
    assert [axes.get_xlabel() for axes in figure.axes] == [
        "Width",
        "Colour [mag]",
        r"$\log_{10}$ of stellar mass [$M_\odot$]",
    ]
    assert [axes.yaxis_inverted() for axes in figure.axes] == [True] * 3
    titles = [axes.get_title() for axes in figure.axes]
    assert all(
        symbol in title for symbol, title in zip(("alpha", "beta", "gamma"), titles, strict=True)
    )
    (legend,) = figure.legends
    words = [text.get_text() for text in legend.get_texts()]
    assert "expected at the measured value" in words
    assert len(words) == len(set(words))


@pytest.mark.parametrize("width", [WIDTH, COLUMN])
def test_no_label_leaves_the_figure(tripp: Result, width: float) -> None:
    figure = peaks_figure(tripp, theme=DARK, width=width)
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    for artist in [*figure.axes, *figure.legends]:
        extent, box = artist.get_tightbbox(canvas.get_renderer()), figure.bbox
        assert extent.x0 >= box.x0 - 1.0
        assert extent.x1 <= box.x1 + 1.0
        assert extent.y0 >= box.y0 - 1.0
        assert extent.y1 <= box.y1 + 1.0


def test_panels_draw_into_axes(tripp: Result) -> None:
    for panel in (width_panel, colour_panel, mass_panel):
        figure = Figure()
        assert panel(tripp, figure.add_subplot()) is figure
    with pytest.raises(ValueError, match="no term in decline_rate"):
        decline_rate_panel(tripp, Figure().add_subplot())


def test_no_figure_without_terms(tripp: Result) -> None:
    assert "peaks" in figures(tripp)
    plain = at(ladder_with("flow", {}))
    assert peaks_figure(plain) is None
    assert "peaks" not in figures(plain)
