"""Views of the expansion: the running mean of residuals, and H0 along the redshift cuts."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from handmade import ladder as handmade_ladder
from handmade import result as handmade_result
from small_ladders import small_ladder

from ladderfit.checks.residuals import Residuals
from ladderfit.checks.running import running_mean
from ladderfit.errors import LadderfitError
from ladderfit.plots.cuts import cuts_figure
from ladderfit.plots.hubble import hubble_figure
from ladderfit.plots.theme import DARK
from ladderfit.sampling.run import draw
from ladderfit.sensitivity.redshift_cuts import RedshiftCuts, hubble_along_cuts

DRAWS = 2000


def residuals(n: int, seed: int = 1) -> Residuals:
    rng = np.random.default_rng(seed)
    x, sd = rng.uniform(0.02, 0.15, n), rng.uniform(0.05, 0.3, n)
    return Residuals(np.full(n, "s"), x, rng.normal(0.0, sd) + 16.0, np.full(n, 16.0), sd)


def test_running_mean_by_hand() -> None:
    data = residuals(120)
    found = running_mean(data)
    assert found is not None
    assert found.size == 12
    order = np.argsort(data.x)
    assert len(found.x) == 120 - 12 + 1
    for start in (0, 50, len(found.x) - 1):
        window = order[start : start + 12]
        weight = data.sd[window] ** -2.0
        assert found.x[start] == pytest.approx(data.x[window].mean())
        expected = np.average(data.residual[window], weights=weight)
        assert found.mean[start] == pytest.approx(expected, abs=1e-12)
        assert found.error[start] == pytest.approx(weight.sum() ** -0.5)


def test_running_mean_of_windows_of_one_is_the_data() -> None:
    data = residuals(5)
    found = running_mean(data, 1)
    assert found is not None
    np.testing.assert_allclose(np.sort(found.mean), np.sort(data.residual), atol=1e-12)


def test_no_running_mean_of_a_few() -> None:
    assert running_mean(residuals(29)) is None
    assert running_mean(residuals(30)) is not None
    assert running_mean(residuals(30), 0) is None


def test_the_running_mean_is_drawn_where_there_are_enough() -> None:
    result = draw(small_ladder("flow"), seed=1, draws=500)
    figure = hubble_figure(result)
    assert figure is not None
    assert all(axes.get_legend() is None for axes in figure.axes)  # 24 supernovae
    text = figure.axes[1].texts[0].get_text()
    assert text.splitlines()[1].startswith("$a_B$ = 0.69")
    many = draw(_many(), seed=1, draws=500)
    figure = hubble_figure(many)
    assert figure is not None
    (legend,) = [axes.get_legend() for axes in figure.axes if axes.get_legend() is not None]
    assert legend.get_texts()[0].get_text() == "running mean of 10, and its error"


def _many():
    from small_ladders import SMALL, TRUTH, _flow

    from ladderfit.ladder import build_ladder

    choices, tables = SMALL["flow"][0](np.random.default_rng(701), TRUTH)
    return build_ladder(choices, tables | {"expansion": _flow(np.random.default_rng(5), 90, TRUTH)})


@pytest.fixture(scope="module")
def cuts() -> RedshiftCuts:
    ladder = small_ladder("flow").change({"expansion.redshifts": [0.03, 0.13]})
    return hubble_along_cuts(ladder, [0.0, 0.03, 0.06, 0.12], [0.03, 0.09, 0.13, 0.2], draws=DRAWS)


def test_every_point_is_a_refit(cuts: RedshiftCuts) -> None:
    base = small_ladder("flow").change({"expansion.redshifts": [0.03, 0.13]})
    assert cuts.chosen == (0.03, 0.13)
    assert cuts.kept == len(base.flow)
    for line, end in ((cuts.lower, 0), (cuts.upper, 1)):
        assert np.all(line.kept >= 10)
        for cut, kept, mean, sd in zip(line.cut, line.kept, line.mean, line.sd, strict=True):
            ends = [0.03, 0.13]
            ends[end] = float(cut)
            ladder = base.change({"expansion.redshifts": ends})
            again = draw(ladder, seed=5, draws=DRAWS)
            assert kept == len(ladder.flow)
            limit = 5.0 * np.sqrt(2.0 / DRAWS) * sd
            assert mean == pytest.approx(again.mean("hubble_constant"), abs=limit)
            assert sd == pytest.approx(again.sd("hubble_constant"), rel=0.12)


def test_cuts_that_leave_too_few_or_the_same_are_left_out(cuts: RedshiftCuts) -> None:
    assert list(cuts.lower.cut) == [0.0, 0.03, 0.06]
    assert list(cuts.upper.cut) == [0.09, 0.13, 0.2]
    none = hubble_along_cuts(small_ladder("flow"), [0.001, 0.002], [0.15], draws=200)
    assert list(none.lower.cut) == [0.023]  # the chosen cut, as both keep what it keeps
    assert none.lower.expected[0] == 0.0


def test_the_expected_change_is_none_at_the_chosen_range_and_grows(cuts: RedshiftCuts) -> None:
    assert cuts.lower.expected[1] == 0.0
    assert cuts.upper.expected[1] == 0.0
    assert cuts.lower.expected[2] > cuts.lower.expected[0]
    # by hand: the intercept's variance is that of a weighted mean
    base = small_ladder("flow").change({"expansion.redshifts": [0.03, 0.13]})
    variance = []
    for low in (0.03, 0.06):
        flow = base.change({"expansion.redshifts": [low, 0.13]}).flow
        peculiar = (5.0 / np.log(10.0) * 250.0 / (299_792.458 * flow.redshift)) ** 2
        variance.append(0.04 / np.sum(1.0 / (flow.variance + peculiar + 0.12**2)))
    by_hand = cuts.mean * np.log(10.0) * np.sqrt(variance[1] - variance[0])
    assert cuts.lower.expected[2] == pytest.approx(by_hand, rel=0.35)


def test_progress_reaches_the_end() -> None:
    told: list[float] = []
    found = hubble_along_cuts(small_ladder("flow"), draws=200, progress=told.append)
    assert told[-1] == 1.0
    assert told == sorted(told)
    assert 0.023 in found.lower.cut
    assert len(found.lower.cut) > 3


def test_a_ladder_without_expansion_is_refused() -> None:
    for name in ("intercept", "velocities", "anchors"):
        with pytest.raises(LadderfitError, match="redshift cuts need supernovae"):
            hubble_along_cuts(small_ladder(name))
    few = small_ladder("flow").change(
        {"expansion.set_aside": [{"name": f"F{i}", "reason": "a test"} for i in range(17)]}
    )
    with pytest.raises(LadderfitError, match="at least 10 supernovae in the expansion; there are"):
        hubble_along_cuts(few)


def test_figure_of_the_cuts(cuts: RedshiftCuts) -> None:
    figure = cuts_figure(cuts, theme=DARK)
    left, right = figure.axes
    assert left.get_xlabel() == "Lower redshift cut (dotted: 0.03 chosen)"
    assert right.get_xlabel() == "Upper redshift cut (dotted: 0.13 chosen)"
    assert left.get_ylabel() == "Hubble constant [km/s/Mpc]"
    assert left.get_title() == f"{cuts.lower.kept.min()} to {cuts.lower.kept.max()} supernovae"
    words = [text.get_text() for text in left.get_legend().get_texts()]
    assert "refit and its error" in words
    drawn = left.containers[0].lines[0].get_ydata()
    np.testing.assert_array_equal(drawn, cuts.lower.mean)


def test_scatters_apart_are_told_in_the_figure() -> None:
    ladder = handmade_ladder().change({"supernovae.scatter": "apart"})
    result = handmade_result(handmade_ladder())
    draws = dict(result.draws)
    scatter = draws.pop("peak_scatter")
    draws |= {"peak_scatter[hosts]": scatter, "peak_scatter[expansion]": scatter + 0.02}
    apart = replace(result, choices=ladder.choices, draws=draws, source=ladder)
    figure = hubble_figure(apart)
    assert figure is not None
    assert "hosts = 0.100" in figure.axes[0].texts[0].get_text()
    assert "expansion = 0.120" in figure.axes[1].texts[0].get_text()
