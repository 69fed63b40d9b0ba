"""Axes, the table, evidences and systematics of alternatives."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import builders
import numpy as np
import pandas as pd
import pytest
from astropy.table import Table

import ladderfit as lf
from ladderfit.alternatives import Comparison, alternatives_of, run_alternatives, systematics
from ladderfit.alternatives.folder import write_comparison
from ladderfit.alternatives.words import comparison_text
from ladderfit.choices import Choices
from ladderfit.errors import InputError, UndeterminedError
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.sensitivity.error_budget import error_budget

AXES: dict[str, list[Any]] = {
    "cepheids.periods": [[5.0, 100.0], [8.0, 100.0], [8, 100], [9.0, 60.0]],  # two are new
    "relation.metallicity": ["none"],
    "priors.scatter": [{"half_normal": 0.1}],
    "expansion.q0": [-0.5],
    "cepheids.set_aside": [[{"host": "Q07", "reason": "a test"}]],
    "cepheids.columns.period": ["nowhere"],
}


@pytest.fixture(scope="module")
def ladder() -> Ladder:
    return build_ladder(builders.choices(), builders.tables())


@pytest.fixture(scope="module")
def comparison(ladder: Ladder) -> Comparison:
    return lf.run_alternatives(ladder, AXES, workers=1, draws=1000)


@pytest.fixture(scope="module")
def table(comparison: Comparison) -> pd.DataFrame:
    return comparison.table().set_index(["axis", "value"])


def test_one_change_at_a_time(ladder: Ladder) -> None:
    keys = [each.key for each in alternatives_of(ladder.choices, AXES)]
    assert keys == [
        "cepheids.periods = [8, 100]",
        "cepheids.periods = [9, 60]",
        'relation.metallicity = "none"',
        "priors.scatter = {half_normal = 0.1}",
        "expansion.q0 = -0.5",
        'cepheids.set_aside = [{host = "Q07", reason = "a test"}]',
        'cepheids.columns.period = "nowhere"',
    ]


def test_the_grid_has_every_combination_but_the_baseline(ladder: Ladder) -> None:
    axes = {key: AXES[key] for key in list(AXES)[:4]}
    found = alternatives_of(ladder.choices, axes, grid=True)
    assert len(found) == 3 * 2 * 2 * 2 - 1
    assert len({each.key for each in found}) == len(found)
    assert all(each.changes for each in found)


@pytest.mark.parametrize(
    ("axes", "words"),
    [
        ({}, "found no axis"),
        ({"expansion.q0": 3.0}, 'key alternatives."expansion.q0": found 3.0; expected a list'),
        ({"expansion.q0": "ab"}, "expected a list of values to try"),
        ({"expansion.q0": [-0.55]}, "found values that all equal the baseline's"),
    ],
)
def test_axes_that_make_no_sense(ladder: Ladder, axes: dict[str, Any], words: str) -> None:
    with pytest.raises(InputError, match=words.replace(".", r"\.")):
        alternatives_of(ladder.choices, axes)


def test_a_grid_too_large(ladder: Ladder) -> None:
    axes = {"expansion.q0": list(np.linspace(0, 1, 400)), "expansion.j0": list(np.arange(400.0))}
    with pytest.raises(InputError, match="a grid of 160,801 combinations"):
        alternatives_of(ladder.choices, axes, grid=True)


def test_the_baseline_has_to_work(ladder: Ladder) -> None:
    no_scale = {"anchors.geometric.Tavin.use": False, "anchors.parallaxes.use": False}
    with pytest.raises(UndeterminedError):
        run_alternatives(ladder.change(no_scale), {"expansion.q0": [-0.5]}, workers=1)


def test_a_row_is_what_a_fit_of_its_own_gives(ladder: Ladder, table: pd.DataFrame) -> None:
    """Within the Monte Carlo error: the fit of its own looks for its mode from nothing."""
    changed = ladder.change({"cepheids.periods": [9.0, 60.0]})
    base, fit = (lf.draw(each, draws=20_000, seed=5) for each in (ladder, changed))
    row = table.loc["cepheids.periods", "[9, 60]"]
    shift = fit.shift_from(base)["in_errors"]
    for name in ("slope", "zero_point", "hubble_constant"):
        limit = 5.0 * float(row["shift_mcse"])
        assert row[f"{name}_shift"] == pytest.approx(shift[name], abs=limit), name
        assert row[f"{name}_sd"] == pytest.approx(fit.sd(name), rel=0.15), name
    assert row["cepheids_kept"] == fit.ladder.kept["cepheids"].kept


def test_the_table(comparison: Comparison, table: pd.DataFrame) -> None:
    assert len(table) == 8
    first = comparison.table().iloc[0]
    assert (first["axis"], first["value"], first["status"]) == ("baseline", "", "done")
    assert first["hubble_constant_shift"] == 0.0
    unit = first["hubble_constant_sd"]
    change = table["hubble_constant"] - first["hubble_constant"]
    np.testing.assert_allclose(table["hubble_constant_shift"], change / unit)
    assert np.isnan(table.loc["relation.metallicity", '"none"']["metallicity"])
    gone = table.loc["cepheids.set_aside"].iloc[0]
    assert gone["cepheids_kept"] == 24
    assert np.isnan(gone["modulus[Q07]"])
    failed = table.loc["cepheids.columns.period"].iloc[0]
    assert failed["status"] == "failed"
    assert "found no such column" in failed["message"]
    assert np.isnan(failed["hubble_constant"])
    assert np.isnan(failed["cepheids_kept"])


def test_evidence_only_where_the_data_are_identical(table: pd.DataFrame) -> None:
    known = table["log_evidence"].notna()
    assert known[
        [("baseline", ""), ("relation.metallicity", '"none"'), ("expansion.q0", "-0.5")]
    ].all()
    assert known["priors.scatter"].all()
    assert not known["cepheids.periods"].any()
    assert not known["cepheids.set_aside"].any()


def test_other_data_have_another_mark(ladder: Ladder) -> None:
    from ladderfit.alternatives.fit import data_mark

    same = [{}, {"relation.pivot": 12.0}, {"expansion.j0": 0.9}, {"priors.slope": {"fixed": -3.3}}]
    other = [
        {"cepheids.magnitude.wesenheit.ratio": 0.4},
        {"anchors.geometric.Tavin.modulus": 18.5},
        {"anchors.geometric.Orrel.use": True},
        {"anchors.parallaxes.use": False},
        {"supernovae.set_aside": [{"name": "2091a", "reason": "a test"}]},
        {"expansion.redshifts": [0.05, 0.15]},
    ]
    base = data_mark(ladder)
    assert {data_mark(ladder.change(change)) for change in same} == {base}
    assert len({base, *(data_mark(ladder.change(change)) for change in other)}) == 1 + len(other)


def test_evidence_is_that_of_the_fits(ladder: Ladder, table: pd.DataFrame) -> None:
    wide = ladder.change({"priors.scatter": {"half_normal": 0.1}})
    one, other = (lf.draw(each, draws=4000, seed=9).diagnostics for each in (wide, ladder))
    assert one.log_evidence is not None
    assert other.log_evidence is not None
    row = table.loc["priors.scatter"].iloc[0]
    limit = 5.0 * float(row["log_evidence_error"]) + 0.01
    expected = one.log_evidence - other.log_evidence
    assert row["log_evidence"] == pytest.approx(expected, abs=limit)


def test_what_moves_nothing_shows_nothing(ladder: Ladder) -> None:
    """Common random numbers: a change far below the Monte Carlo error is seen as such."""
    found = run_alternatives(ladder, {"priors.slope": [{"normal": [-3.3, 0.5001]}]}, workers=1)
    row = found.table().iloc[1]
    assert abs(row["hubble_constant_shift"]) < 0.1 * row["shift_mcse"]


def test_systematics_by_hand(comparison: Comparison, table: pd.DataFrame) -> None:
    found = systematics(comparison).set_index(["axis", "parameter"])
    base = comparison.table().iloc[0]
    own = table.loc["cepheids.periods", "hubble_constant"].to_numpy() - base["hubble_constant"]
    row = found.loc["cepheids.periods", "hubble_constant"]
    largest = own[np.argmax(np.abs(own))]
    assert row["largest"] == pytest.approx(largest)
    assert row["largest_in_errors"] == pytest.approx(largest / base["hubble_constant_sd"])
    assert row["spread"] == pytest.approx(np.std([0.0, *own], ddof=1))
    assert row["fits"] == 2
    assert found.loc["cepheids.columns.period", "slope"]["fits"] == 0
    done = table[(table["status"] == "done")]["slope"] - base["slope"]
    assert found.loc["all axes", "slope"]["spread"] == pytest.approx(np.std(done, ddof=1))


def test_in_a_grid_an_axis_is_compared_at_equal_others(ladder: Ladder) -> None:
    axes = {"relation.metallicity": ["none"], "expansion.q0": [-0.5, -0.6]}
    grid = run_alternatives(ladder, axes, grid=True, workers=1, draws=500)
    assert len(grid.fits) == 5
    means = {fit.alternative.key: fit.mean("hubble_constant") for fit in grid.fits}
    means[""] = grid.baseline.mean("hubble_constant")
    none = 'relation.metallicity = "none"'
    q0 = ["", "expansion.q0 = -0.5", "expansion.q0 = -0.6"]
    changes = [means["; ".join(filter(None, (none, each)))] - means[each] for each in q0]
    row = (
        systematics(grid)
        .set_index(["axis", "parameter"])
        .loc["relation.metallicity", "hubble_constant"]
    )
    assert row["fits"] == 3
    assert row["largest"] == pytest.approx(max(changes, key=abs))
    assert row["spread"] == pytest.approx(abs(np.mean(changes)) / np.sqrt(2.0))


def test_tables_on_disk(comparison: Comparison, tmp_path: Path) -> None:
    write_comparison(comparison, error_budget(comparison.result), tmp_path)
    for suffix, format_ in ((".ecsv", "ascii.ecsv"), (".csv", "ascii.csv")):
        back = Table.read(tmp_path / f"alternatives{suffix}", format=format_)
        assert len(back) == 8
        np.testing.assert_allclose(
            np.ma.filled(back["slope"].astype(float), np.nan), comparison.table()["slope"]
        )
        assert np.ma.is_masked(back["log_evidence"][1])
    units = Table.read(tmp_path / "alternatives.ecsv")
    assert str(units["hubble_constant_sd"].unit) == "km / (Mpc s)"
    assert units["cepheids_kept"].dtype.kind == "i"
    assert ",nan" not in (tmp_path / "alternatives.csv").read_text().lower()
    assert len(Table.read(tmp_path / "systematics.csv")) > 20


def test_words(comparison: Comparison) -> None:
    text = comparison_text(comparison, error_budget(comparison.result))
    assert "Small ladder" in text
    assert "cepheids.periods = [9, 60]" in text
    assert 'cepheids.columns.period = "nowhere": failed: ' in text
    assert "Error budget of the baseline" in text
    assert all(len(line) < 140 for line in text.splitlines() if "failed: " not in line)


def test_an_alternative_may_take_its_own_axis_away(ladder: Ladder) -> None:
    """The list of alternatives does not stand in the way of a change it would not fit."""
    given = {"expansion": [{"intercept": {"value": 0.71, "error": 0.002}}], "expansion.q0": [-0.5]}
    plain = {**ladder.choices.to_mapping(), "alternatives": given}
    listed = build_ladder(plain, builders.tables())
    assert isinstance(listed.choices, Choices)
    found = run_alternatives(listed, workers=1, draws=500)
    assert [fit.done for fit in found.fits] == [True, True]
