"""The error budget against least squares written out, and against noise that is simulated."""

from __future__ import annotations

from typing import Any

import builders
import numpy as np
import pandas as pd
import pytest

import ladderfit as lf
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.sensitivity.error_budget import TOTAL, error_budget

FIXED = {"scatter": {"fixed": 0.07}, "peak_scatter": {"fixed": 0.1}}
DRAWS = 20_000


def gaussian_ladder(**more: Any) -> Ladder:
    """Two anchors, no parallaxes, known scatters: all is normal, so that the budget is exact."""
    choices = builders.choices()
    del choices["anchors"]["parallaxes"]
    choices["anchors"]["geometric"]["Orrel"]["use"] = True
    choices["priors"] = {**FIXED, "slope": {"normal": [-3.3, 0.05]}}
    choices["anchors"] |= more
    tables = builders.tables()
    del tables["anchors.parallaxes"]
    return build_ladder(choices, tables)


def written_out(ladder: Ladder, with_common: float = 0.0) -> pd.DataFrame:
    """Shares by one dense weighted system: rows of data, whose each share is (g_k s_k)^2.

    The estimate is linear in the data, q = g . d; its variance is the sum over the data
    of (g_k s_k)^2.
    """
    stars, peaks, flow = ladder.cepheids, ladder.peaks, ladder.flow
    assert stars is not None
    assert peaks is not None
    assert flow is not None
    hosts = len(ladder.hosts)
    names = ["zero_point", "slope", "metallicity", "peak_magnitude", "H", "common"]
    width = hosts + len(names)
    rows, errors, source = [], [], []

    def add(where: str, error: float, host: int = -1, **columns: float) -> None:
        row = np.zeros(width)
        if host >= 0:
            row[host] = 1.0
        for name, value in columns.items():
            row[hosts + names.index(name)] = value
        rows.append(row)
        errors.append(error)
        source.append(where)

    anchored = {anchor.host for anchor in ladder.geometric}
    with_peaks = set(peaks.host.tolist())
    for i, host in enumerate(stars.host):
        kind = "anchors" if host in anchored else "supernova hosts"
        assert host in anchored | with_peaks
        x, o = stars.log_period[i] - 1.0, stars.metallicity[i] - 8.69
        error = float(np.sqrt(stars.variance[i] + 0.07**2))
        add(f"Cepheids of {kind}", error, int(host), zero_point=1.0, slope=x, metallicity=o)
    for anchor in ladder.geometric:
        add(f"anchor {anchor.name}", anchor.error, anchor.host, common=with_common)
    for i, host in enumerate(peaks.host):
        error = float(np.hypot(np.sqrt(peaks.variance[i]), 0.1))
        add("supernovae in hosts", error, int(host), peak_magnitude=1.0)
    for i in range(len(flow)):
        moved = 5.0 / np.log(10.0) * 250.0 / (299_792.458 * flow.redshift[i])
        error = float(np.sqrt(flow.variance[i] + moved**2 + 0.1**2))
        add("supernovae in the expansion", error, peak_magnitude=1.0, H=-1.0)
    add("errors that anchors share", 1.0, common=1.0)
    widths = (2.0, 0.05, 0.5, 2.0, 1.0)
    for name, error in zip(names, widths, strict=False):
        add("priors", error, **{name: 1.0})
    weighted = np.array(rows) / np.array(errors)[:, None]
    gain = np.linalg.inv(weighted.T @ weighted) @ weighted.T  # of data in units of their errors
    shares = {}
    for name, place in (("zero_point", 0), ("peak_magnitude", 3), ("hubble_constant", 4)):
        each = gain[hosts + place] ** 2
        shares[name] = pd.Series(each / each.sum()).groupby(source).sum()
    return pd.DataFrame(shares)


@pytest.mark.parametrize("common", [0.0, 0.05])
def test_against_least_squares_written_out(common: float) -> None:
    shared = {"both": {"error": common, "loads": {"Tavin": 1.0, "Orrel": 1.0}}}
    ladder = gaussian_ladder(**({"shared_errors": shared} if common else {}))
    budget = error_budget(lf.draw(ladder, draws=DRAWS, seed=4))
    expected = written_out(ladder, common)
    if not common:
        expected = expected.drop(index="errors that anchors share")
    assert set(budget.index) == {*expected.index, TOTAL}
    for name in expected:
        for source, share in expected[name].items():
            # the covariance with each datum is known to 1 / sqrt(n) of both spreads
            limit = 5.0 * (2.0 * np.sqrt(share / DRAWS) + 3.0 / DRAWS)
            found = float(budget.loc[source, f"{name}_share"])
            assert found == pytest.approx(share, abs=limit), (name, source)
        assert float(budget.loc[TOTAL, f"{name}_share"]) == pytest.approx(1.0, abs=0.03)


def test_errors_are_shares_of_the_error() -> None:
    result = lf.draw(gaussian_ladder(), draws=4000, seed=4)
    budget = error_budget(result, ("hubble_constant", "slope", "absent"))
    assert list(budget) == ["hubble_constant", "hubble_constant_share", "slope", "slope_share"]
    squares = budget["hubble_constant"] ** 2 / result.sd("hubble_constant") ** 2
    np.testing.assert_allclose(squares, budget["hubble_constant_share"].clip(lower=0.0))
    # the stated prior of the slope is narrow, and does much of the work
    assert float(budget.loc["priors", "slope_share"]) > 0.2


def test_independent_anchors_with_a_covariance_are_the_same() -> None:
    """Two routes: errors, and a diagonal covariance."""
    ladder = gaussian_ladder()
    plain = ladder.choices.to_mapping()
    variances = [anchor["error"] ** 2 for anchor in plain["anchors"]["geometric"].values()]
    tables = {**builders.tables(), "anchors.covariance": np.diag(variances)}
    del tables["anchors.parallaxes"]
    with_matrix = build_ladder(plain, tables)
    one, other = (error_budget(lf.draw(each, draws=4000, seed=2)) for each in (ladder, with_matrix))
    np.testing.assert_allclose(one["zero_point_share"], other["zero_point_share"], atol=1e-6)


def test_with_parallaxes_and_free_scatters_it_closes() -> None:
    ladder = build_ladder(builders.choices(), builders.tables())
    budget = error_budget(lf.draw(ladder, draws=DRAWS, seed=3))
    assert budget.loc["parallaxes", "zero_point_share"] > 0.02
    for name in ("zero_point_share", "peak_magnitude_share", "hubble_constant_share"):
        assert float(budget.loc[TOTAL, name]) == pytest.approx(1.0, abs=0.1), name


def test_what_a_rungs_noise_does(in_full: bool) -> None:
    """New noise in one rung's data scatters the estimate as the budget says, and no more.

    The weights stay; so the estimates' variance over mocks is that rung's share.
    Control: the zero point, which these data hardly touch, does not scatter by its error.
    """
    ladder = gaussian_ladder()
    result = lf.draw(ladder, draws=DRAWS, seed=6)
    budget, count = error_budget(result), 400 if in_full else 80
    peaks = builders.tables()["supernovae"]
    rng = np.random.default_rng(8)
    names = ["peak_magnitude", "zero_point"]
    estimates = []
    for _ in range(count):
        noise = rng.normal(size=len(peaks)) * np.hypot(peaks["e_mB"], 0.1)
        tables = {**builders.tables(), "supernovae": peaks.assign(mB=peaks["mB"] + noise)}
        del tables["anchors.parallaxes"]
        again = lf.draw(build_ladder(ladder.choices.to_mapping(), tables), draws=500, seed=1)
        estimates.append([again.mean(name) for name in names])
    spread = np.std(estimates, axis=0, ddof=1)
    expected = budget.loc["supernovae in hosts", names].to_numpy(dtype=float)
    limit = 5.0 / np.sqrt(2.0 * count)
    assert spread[0] == pytest.approx(expected[0], rel=limit)
    assert spread[1] == pytest.approx(expected[1], rel=limit, abs=0.05 * result.sd("zero_point"))
    assert spread[1] < 0.5 * result.sd("zero_point")
