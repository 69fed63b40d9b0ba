"""The result: its summary, and the way to disk and back."""

from __future__ import annotations

import dataclasses
import json
import shutil
from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray as xr
from astropy.table import Table
from small_ladders import small_ladder

from ladderfit.errors import InputError, LadderfitError
from ladderfit.files import sha256_of
from ladderfit.ladder import Ladder, build_ladder, read_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.names import parameter
from ladderfit.result import COLUMNS, Result
from ladderfit.sampling.run import draw
from ladderfit.store import read_result, write_result

FILES = {"summary.json", "summary.ecsv", "posterior.nc", "ladder.toml", "provenance.json"}


@pytest.fixture(scope="module")
def result() -> Result:
    return draw(small_ladder("fixed slope"), seed=3, draws=500)


@pytest.fixture
def folder(result: Result, tmp_path: Path) -> Path:
    place = tmp_path / "result"
    place.mkdir()
    write_result(result, place)
    return place


def on_disk(folder: Path) -> Ladder:
    """A ladder whose choices and table lie in a folder."""
    rng = np.random.default_rng(2)
    period = rng.uniform(6.0, 50.0, 20)
    table = Table(
        {
            "ID": [f"S{i}" for i in range(20)],
            "Galaxy": ["Tavin"] * 20,
            "P": period,
            "W": 12.6 - 3.3 * (np.log10(period) - 1.0) + 0.08 * rng.normal(size=20),
            "e": np.full(20, 0.05),
        }
    )
    table["P"].unit = "d"
    choices = {
        "title": "Ladder on disk",
        "cepheids": {
            "table": "stars.ecsv",
            "columns": {"star": "ID", "host": "Galaxy", "period": "P"},
            "magnitude": {"band": "W", "bands": {"W": "W"}, "errors": {"W": "e"}},
        },
        "anchors": {"geometric": {"Tavin": {"modulus": 18.5, "error": 0.03}}},
    }
    table.write(folder / "stars.ecsv", format="ascii.ecsv")
    write_choices(build_ladder(choices, {}, folder).choices, folder / "ladder.toml")
    return read_ladder(folder / "ladder.toml")


# --- the summary -------------------------------------------------------------------------


def test_the_summary_is_that_of_the_draws(result: Result) -> None:
    summary = result.summary()
    assert tuple(summary.columns) == COLUMNS
    assert tuple(summary.index) == tuple(result.draws)
    for name, draws in result.draws.items():
        row = summary.loc[name]
        assert row["mean"] == pytest.approx(np.mean(draws), rel=1e-12)
        assert row["unit"] == parameter(name).unit
        if name == "slope":
            continue
        assert row["sd"] == pytest.approx(np.std(draws, ddof=1), rel=1e-12)
        assert row["q16"] == np.quantile(draws, 0.16)
        assert row["q50"] == np.quantile(draws, 0.5)
        assert row["q84"] == np.quantile(draws, 0.84)
        assert row["ess"] == result.diagnostics.ess[name]
        assert row["mcse"] == pytest.approx(row["sd"] / np.sqrt(row["ess"]), rel=1e-12)


def test_a_fixed_parameter_is_listed_without_an_error(result: Result) -> None:
    row = result.summary().loc["slope"]
    assert (row["mean"], row["sd"], row["mcse"]) == (-3.3, 0.0, 0.0)
    assert np.isnan(row["ess"])


def test_parameters_come_in_one_order_with_moduli_last(result: Result) -> None:
    assert result.parameters == (
        "slope",
        "zero_point",
        "metallicity",
        "scatter",
        "parallax_offset",
        "modulus[Q07]",
        "modulus[Tavin]",
        "modulus[Orrel]",
    )
    assert result.headline == result.parameters[:5]
    assert result.size == 500


def test_a_shift_is_in_errors_of_the_base() -> None:
    base = draw(small_ladder("anchors"), seed=1, draws=500)
    moved = draw(small_ladder("anchors").change({"relation.pivot": 20.0}), seed=1, draws=500)
    shift = moved.shift_from(base)
    change = moved.mean("zero_point") - base.mean("zero_point")
    assert shift.loc["zero_point", "change"] == pytest.approx(change, rel=1e-12)
    assert change == pytest.approx(base.mean("slope") * np.log10(2.0), abs=0.02)
    expected = change / base.sd("zero_point")
    assert shift.loc["zero_point", "in_errors"] == pytest.approx(expected, rel=1e-12)


def test_a_shift_of_what_is_fixed_has_no_unit_of_error(result: Result) -> None:
    shift = result.shift_from(result)
    assert np.isnan(shift.loc["slope", "in_errors"])
    assert shift.loc["zero_point", "in_errors"] == 0.0


def test_monte_carlo_errors_are_those_of_repeats() -> None:
    """Means of repeated draws scatter as the summary says."""
    ladder, repeats = small_ladder("anchors"), 60
    summaries = [draw(ladder, seed=seed, draws=300).summary() for seed in range(repeats)]
    for name in ("zero_point", "scatter", "modulus[Q07]"):
        spread = np.std([summary.loc[name, "mean"] for summary in summaries], ddof=1)
        stated = np.mean([summary.loc[name, "mcse"] for summary in summaries])
        assert spread / stated == pytest.approx(1.0, abs=4.0 / np.sqrt(2.0 * repeats))


def test_same_seed_same_draws_other_seed_other_draws() -> None:
    ladder = small_ladder("all rungs")
    first, again, other = (draw(ladder, seed=seed, draws=300).draws for seed in (4, 4, 5))
    for name in first:
        np.testing.assert_array_equal(first[name], again[name])
        assert not np.array_equal(first[name], other[name])


# --- to disk and back --------------------------------------------------------------------


def test_what_is_written(folder: Path, result: Result) -> None:
    assert {path.name for path in folder.iterdir()} == FILES
    summary = json.loads((folder / "summary.json").read_text(encoding="utf-8"))
    assert set(summary) == {"parameters", "moduli", "diagnostics", "provenance"}
    assert list(summary["parameters"]) == list(result.headline)
    assert list(summary["moduli"]) == ["Q07", "Tavin", "Orrel"]
    entry, table = summary["parameters"]["zero_point"], result.summary()
    assert set(entry) == set(COLUMNS)
    assert entry["mean"] == table.loc["zero_point", "mean"]
    assert entry["unit"] == "mag"
    assert summary["parameters"]["slope"]["ess"] is None
    ecsv = Table.read(folder / "summary.ecsv", format="ascii.ecsv")
    assert list(ecsv["parameter"]) == list(table.index)
    np.testing.assert_array_equal(ecsv["mean"], table["mean"])


def test_read_back_equal(folder: Path, result: Result) -> None:
    back = read_result(folder)
    assert list(back.draws) == list(result.draws)
    for name, draws in result.draws.items():
        np.testing.assert_array_equal(back.draws[name], draws)
    assert back.diagnostics == dataclasses.replace(
        result.diagnostics, ess=dict(result.diagnostics.ess)
    )
    assert back.choices == result.choices
    assert back.summary().equals(result.summary())


def test_the_file_is_inference_data(folder: Path, result: Result) -> None:
    with xr.open_dataset(folder / "posterior.nc", group="posterior", engine="h5netcdf") as data:
        assert data["zero_point"].dims == ("chain", "draw")
        assert data["zero_point"].attrs["units"] == "mag"
        assert data["modulus"].dims == ("chain", "draw", "host")
        orrel = data["modulus"].sel(host="Orrel", chain=0).values
        np.testing.assert_array_equal(orrel, result.draws["modulus[Orrel]"])
    with xr.open_dataset(folder / "posterior.nc", group="sample_stats", engine="h5netcdf") as data:
        assert data.attrs["pareto_k"] == result.diagnostics.pareto_k


def test_names_of_hosts_survive(result: Result, tmp_path: Path) -> None:
    names = ["Å-12 [b]", "M 31/a", "x.y"]
    draws = {name: values for name, values in result.draws.items() if "modulus" not in name}
    draws |= {f"modulus[{name}]": np.arange(500.0) + i for i, name in enumerate(names)}
    odd = dataclasses.replace(result, draws=draws)
    write_result(odd, tmp_path)
    back = read_result(tmp_path)
    assert list(back.draws) == list(draws)
    np.testing.assert_array_equal(back.draws["modulus[x.y]"], draws["modulus[x.y]"])


def test_a_result_without_moduli(tmp_path: Path) -> None:
    result = draw(small_ladder("parallaxes"), seed=1, draws=200)
    write_result(result, tmp_path)
    assert list(read_result(tmp_path).draws) == list(result.draws)


# --- its tables --------------------------------------------------------------------------


def test_the_ladder_comes_along_while_its_tables_are_unchanged(tmp_path: Path) -> None:
    ladder = on_disk(tmp_path)
    result = draw(ladder, seed=1, draws=200)
    place = tmp_path / "out" / "result"
    place.mkdir(parents=True)
    write_result(result, place)
    provenance = json.loads((place / "provenance.json").read_text(encoding="utf-8"))
    table = tmp_path / "stars.ecsv"
    assert provenance["inputs"]["cepheids"]["sha256"] == sha256_of(table)
    assert provenance["seed"] == 1
    back = read_result(place)
    again = draw(back.ladder, seed=1, draws=200)
    for name, draws in result.draws.items():
        np.testing.assert_array_equal(again.draws[name], draws)
    table.write_text(table.read_text().replace("S3", "S3b"))
    with pytest.raises(LadderfitError, match="missing or changed"):
        _ = read_result(place).ladder
    table.unlink()
    changed = read_result(place)
    np.testing.assert_array_equal(changed.draws["slope"], result.draws["slope"])
    with pytest.raises(LadderfitError, match="missing or changed"):
        _ = changed.ladder


def test_a_ladder_in_memory_is_not_claimed_to_be_there(folder: Path) -> None:
    with pytest.raises(LadderfitError, match="only its numbers can be used"):
        _ = read_result(folder).ladder


# --- what is no result -------------------------------------------------------------------


def problem(folder: Path) -> str:
    """The one line said of a folder that is no result."""
    with pytest.raises(InputError) as caught:
        read_result(folder)
    assert len(caught.value.problems) == 1
    (line,) = str(caught.value).splitlines()
    return line


def test_no_such_folder(tmp_path: Path) -> None:
    line = problem(tmp_path / "nowhere")
    assert "nowhere" in line
    assert "a folder written by ladderfit calibrate" in line


@pytest.mark.parametrize("name", ["posterior.nc", "summary.json", "ladder.toml"])
def test_a_file_is_missing(folder: Path, name: str) -> None:
    (folder / name).unlink()
    assert f"found no {name}" in problem(folder)


@pytest.mark.parametrize("name", ["posterior.nc", "summary.json", "ladder.toml"])
@pytest.mark.parametrize("text", ["", "no such thing {", "\x00\x01"])
def test_a_file_is_something_else(folder: Path, name: str, text: str) -> None:
    (folder / name).write_text(text)
    assert str(folder / name) in problem(folder)


@pytest.mark.parametrize("text", ["[]", "{}", '{"diagnostics": {"notes": []}}', "3"])
def test_a_summary_lacks_what_it_should_hold(folder: Path, text: str) -> None:
    (folder / "summary.json").write_text(text)
    line = problem(folder)
    assert "summary.json" in line
    assert "repeat the calibration" in line


def test_a_truncated_file_of_draws(folder: Path) -> None:
    whole = (folder / "posterior.nc").read_bytes()
    (folder / "posterior.nc").write_bytes(whole[: len(whole) // 2])
    assert "posterior.nc" in problem(folder)


def test_another_hdf5_file(folder: Path) -> None:
    with h5py.File(folder / "posterior.nc", "w") as file:
        file["something"] = [1, 2, 3]
    assert "posterior.nc" in problem(folder)


def test_draws_of_an_unknown_parameter(folder: Path) -> None:
    data = xr.Dataset({"age": (("chain", "draw"), np.zeros((1, 5)))})
    data.to_netcdf(folder / "posterior.nc", mode="w", group="posterior", engine="h5netcdf")
    assert "posterior.nc" in problem(folder)


def test_a_folder_inside_is_no_file(folder: Path) -> None:
    (folder / "posterior.nc").unlink()
    shutil.copytree(folder, folder / "posterior.nc")
    assert "found no posterior.nc" in problem(folder)
