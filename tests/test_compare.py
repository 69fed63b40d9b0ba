"""Results side by side: shifts of nested, overlapping and disjoint data, and what differs."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from small_ladders import small_ladder

from ladderfit.cli import main
from ladderfit.comparison.files import comparison_text, shift_table, write_comparison
from ladderfit.comparison.resampling import Together, objects_of, resample_together
from ladderfit.comparison.results import ResultComparison, compare_results
from ladderfit.errors import InputError
from ladderfit.ladder import Ladder, build_ladder, read_ladder
from ladderfit.result import Result
from ladderfit.sample_arrays import joined, taken
from ladderfit.sampling.run import draw
from ladderfit.store import write_result

SCATTER, ERROR = 0.08, 0.06
CHOICES: dict[str, Any] = {
    "title": "Two hosts",
    "cepheids": {
        "columns": {"star": "ID", "host": "Galaxy", "period": "P"},
        "magnitude": {"band": "W", "bands": {"W": "W"}, "errors": {"W": "e_W"}},
    },
    "anchors": {"geometric": {"Tavin": {"modulus": 18.5, "error": 0.03}}},
    "priors": {
        "scatter": {"fixed": SCATTER},
        "slope": {"normal": [-3.3, 20.0]},
        "zero_point": {"normal": [-5.9, 20.0]},
    },
}


def stars(seed: int, count: int = 60) -> pd.DataFrame:
    """Stars of an anchor and of another host; errors as the choices have them."""
    rng = np.random.default_rng([44, seed])
    host = np.repeat(["Tavin", "Q07"], count)
    log_period = rng.uniform(0.7, 1.7, 2 * count)
    modulus = np.where(host == "Tavin", 18.5, 29.4)
    noise = np.hypot(SCATTER, ERROR) * rng.normal(size=2 * count)
    return pd.DataFrame(
        {
            "ID": [f"S{i}" for i in range(2 * count)],
            "Galaxy": host,
            "P": 10.0**log_period,
            "W": modulus - 5.9 - 3.3 * (log_period - 1.0) + noise,
            "e_W": np.full(2 * count, ERROR),
        }
    )


def fitted(table: pd.DataFrame, draws: int = 4000, seed: int = 1, **choices: Any) -> Result:
    return draw(build_ladder(CHOICES | choices, {"cepheids": table}), seed=seed, draws=draws)


def errors(found: ResultComparison) -> pd.Series:
    return found.shift(1)["error"]


# --- shifts ---------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def nested() -> ResultComparison:
    """All stars, and those with longer periods."""
    whole = fitted(stars(1))
    part = draw(whole.ladder.change({"cepheids.periods": [9.0, 100.0]}), seed=2, draws=4000)
    return compare_results({"all": whole, "long": part}, resamples=200)


def test_nested_data_shift_by_what_the_rest_adds(nested: ResultComparison) -> None:
    """For efficient estimates from nested data the variance of the shift is the difference
    of the variances (Gratton & Challinor 2020, MNRAS 499, 3410)."""
    base, part = nested.results
    for name in ("slope", "zero_point", "modulus[Q07]"):
        expected = np.sqrt(part.sd(name) ** 2 - base.sd(name) ** 2)
        found = errors(nested)[name]
        assert found == pytest.approx(expected, rel=0.25), name
        row = nested.shift(1).loc[name]
        assert row["least"] < found < row["most"]
        assert abs(row["shift"]) < 4.0 * found


def test_adding_in_quadrature_would_not_do(nested: ResultComparison) -> None:
    """Negative control: as if nothing were shared."""
    shifts = nested.shift(1)
    for name in ("zero_point", "modulus[Q07]"):
        assert shifts.loc[name, "independent"] > 1.5 * shifts.loc[name, "error"], name


def test_disjoint_stars_share_the_anchor_alone() -> None:
    """Two halves: slopes differ by both errors, zero points without the anchor's."""
    table = stars(2)
    half = np.arange(len(table)) % 2 == 0
    one, two = fitted(table[half]), fitted(table[~half], seed=2)
    found = compare_results({"one": one, "two": two}, resamples=200)
    both = np.hypot(one.sd("slope"), two.sd("slope"))
    assert errors(found)["slope"] == pytest.approx(both, rel=0.25)
    own = [np.sqrt(each.sd("zero_point") ** 2 - 0.03**2) for each in (one, two)]
    assert errors(found)["zero_point"] == pytest.approx(np.hypot(*own), rel=0.25)
    assert found.shared["cepheids"] == ((60, 60), 0)


def test_the_same_data_do_not_shift() -> None:
    table = stars(3)
    found = compare_results({"one": fitted(table), "two": fitted(table, seed=2)}, resamples=30)
    shifts = found.shift(1)
    assert not found.differences
    for name in ("slope", "zero_point"):
        noise = found.results[0].sd(name)
        assert shifts.loc[name, "error"] < 0.01 * noise
        assert abs(shifts.loc[name, "shift"]) < 5.0 * shifts.loc[name, "mcse"]
    assert "less than the Monte Carlo error" in comparison_text(found)


@pytest.mark.full
def test_shifts_of_simulated_surveys_spread_as_said(in_full: bool) -> None:
    """Overlapping period ranges: the spread over surveys is the error from one survey."""
    count = 200 if in_full else 30
    moved, said = [], []
    for seed in range(count):
        whole = fitted(stars(500 + seed, 30), draws=1000).ladder
        ladders = [whole.change({"cepheids.periods": cut}) for cut in ([1, 25], [9, 100])]
        pair = [draw(each, seed=seed, draws=1000) for each in ladders]
        moved.append([pair[1].mean(n) - pair[0].mean(n) for n in ("slope", "zero_point")])
        if seed < (40 if in_full else 6):
            found = compare_results({"short": pair[0], "long": pair[1]}, resamples=40)
            said.append([errors(found)[n] for n in ("slope", "zero_point")])
    spread, mean = np.std(moved, axis=0, ddof=1), np.mean(said, axis=0)
    tolerance = 3.0 * np.hypot(1.0 / np.sqrt(2 * count), 0.15 / np.sqrt(len(said))) + 0.03
    np.testing.assert_allclose(spread / mean, 1.0, atol=tolerance)


# --- resampling -------------------------------------------------------------------------------


def test_shared_objects_come_as_often_in_each() -> None:
    whole = small_ladder("all rungs")
    part = whole.change({"cepheids.periods": [8.0, 100.0]})
    results = [draw(each, seed=1, draws=200) for each in (whole, part)]
    ready = resample_together(results)
    assert isinstance(ready, Together)
    one, two = ready.resampled(np.random.default_rng(3))
    short = {(h, n) for h, n in _names(whole)} - {(h, n) for h, n in _names(part)}
    assert short
    counts = [pd.Series(_names(each)).value_counts() for each in (one, two)]
    for name, count in counts[1].items():
        assert counts[0][name] == count
    assert not short & set(counts[1].index)
    assert sum(counts[0]) == len(whole.cepheids or ())
    assert one.geometric == two.geometric != whole.geometric
    assert [str(n) for n in one.flow.name] == [str(n) for n in two.flow.name]  # type: ignore[union-attr]
    assert list(one.hosts) == list(whole.hosts)


def _names(ladder: Ladder) -> list[tuple[str, str]]:
    stars = ladder.cepheids
    assert stars is not None
    return [(ladder.hosts[h], str(s)) for h, s in zip(stars.host, stars.star, strict=True)]


def test_stars_without_names_are_known_by_their_rows() -> None:
    plain = {**CHOICES, "cepheids": {**CHOICES["cepheids"]}}
    plain["cepheids"]["columns"] = {"host": "Galaxy", "period": "P"}
    one, two = (build_ladder(plain, {"cepheids": stars(seed)}) for seed in (1, 2))
    first, again, other = (objects_of(x, "cepheids") for x in (one, one, two))
    assert first is not None
    assert again is not None
    assert other is not None
    assert set(first.units) == set(again.units)
    assert not set(first.units) & set(other.units)


def test_samples_are_cut_and_joined_row_by_row() -> None:
    sample = small_ladder("all rungs").cepheids
    assert sample is not None
    rows = np.array([3, 3, 0])
    cut = taken(sample, rows)
    np.testing.assert_array_equal(cut.star, sample.star[rows])
    np.testing.assert_array_equal(cut.magnitude, sample.magnitude[rows])
    both = joined(sample, cut)
    np.testing.assert_array_equal(taken(both, np.arange(len(sample))).variance, sample.variance)
    assert len(both) == len(sample) + 3


def correlated(count: int) -> Result:
    """Supernovae in the expansion with a covariance, the last left out or not."""
    rng = np.random.default_rng(6)
    z = rng.uniform(0.03, 0.1, 24)
    flow = pd.DataFrame({"SN": [f"F{i}" for i in range(24)], "z": z})
    flow["m"] = -19.3 + 25.0 + 5.0 * np.log10(299_792.458 * z / 70.0) + 0.1 * rng.normal(size=24)
    matrix = np.full((24, 24), 0.001) + np.diag(np.full(24, 0.01))
    choices = {
        "expansion": {
            "columns": {"name": "SN", "redshift": "z", "peak": "m"},
            "covariance": {},
            "set_aside": [{"name": f"F{i}", "reason": "test"} for i in range(count, 24)],
        },
        "priors": {"peak_magnitude": {"normal": [-19.3, 0.05]}},
    }
    ladder = build_ladder(choices, {"expansion": flow, "expansion.covariance": matrix})
    return draw(ladder, seed=1, draws=600)


def test_correlated_supernovae_are_thrown_together_or_not_at_all() -> None:
    whole, less = correlated(24), correlated(20)
    same = compare_results({"one": whole, "two": whole}, resamples=20)
    assert not same.reason
    other = compare_results({"one": whole, "two": less}, resamples=20)
    assert "supernovae with a covariance" in other.reason
    assert other.shift(1)["error"].isna().all()
    assert "lies between the difference and the sum" in comparison_text(other)
    assert "0.0" in comparison_text(other)


def test_results_without_their_tables_are_not_resampled() -> None:
    whole = fitted(stars(1), draws=400)
    alone = Result(whole.choices, whole.draws, whole.diagnostics)
    found = compare_results({"one": whole, "old": alone}, resamples=20)
    assert "the tables behind old are missing" in found.reason
    assert found.resamples == 0


def test_one_result_is_not_enough() -> None:
    with pytest.raises(InputError, match="two or more"):
        compare_results({"one": fitted(stars(1), draws=200)})


# --- what differs, words and files ---------------------------------------------------------------


def test_choices_that_differ_are_listed(nested: ResultComparison, tmp_path: Path) -> None:
    assert nested.differences == {"cepheids.periods": ([0.0, float("inf")], [9.0, 100.0])}
    other = fitted(stars(9), draws=400)
    found = compare_results({"one": nested.results[0], "two": other}, resamples=0)
    assert list(found.differences) == ["cepheids (contents, SHA-256)"]
    assert found.reason == "not asked for"
    text = comparison_text(nested)
    for words in ("cepheids.periods", "Shift from all to long", "200 joint resamples"):
        assert words in text
    write_comparison(nested, tmp_path)
    assert (tmp_path / "shifts_1.tex").is_file()
    assert (tmp_path / "choices.csv").is_file()
    assert len(shift_table(nested, 1)) == len(nested.shift(1))
    assert list(nested.table().columns) == ["all: mean", "all: sd", "long: mean", "long: sd"]


def test_the_command(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    from ladderfit.ladder_file import write_choices

    stars(1, 20).to_csv(tmp_path / "stars.csv", index=False)
    plain = {**CHOICES, "cepheids": {"table": "stars.csv", **CHOICES["cepheids"]}}
    write_choices(build_ladder(plain, {}, tmp_path).choices, tmp_path / "my.toml")
    ladder = read_ladder(tmp_path / "my.toml")
    for name, changes in (("a", {}), ("b", {"relation.pivot": 12.0})):
        (tmp_path / name).mkdir()
        write_result(draw(ladder.change(changes), seed=1, draws=400), tmp_path / name)
    folders = [str(tmp_path / name) for name in "ab"]
    assert main(["compare", *folders, "--resamples", "20", "--out", str(tmp_path / "c")]) == 0
    said = capsys.readouterr().out
    assert "relation.pivot" in said
    assert "20 joint resamples" in said
    assert (tmp_path / "c" / "shifts_1.ecsv").is_file()
    assert main(["compare", *folders, "--resamples", "20", "--out", str(tmp_path / "c")]) == 2
    assert main(["compare", folders[0], str(tmp_path / "none")]) == 2
    assert "Traceback" not in capsys.readouterr().err
