"""Results repeated from their provenance."""

from __future__ import annotations

import dataclasses
import json
import shutil
from pathlib import Path

import numpy as np
import pytest
from builders import choices, write_tables
from samplers import by_ensemble

from ladderfit.choices import Choices
from ladderfit.cli import main
from ladderfit.errors import InputError
from ladderfit.files import new_folder
from ladderfit.jobs.repeat import compare, repeat
from ladderfit.ladder import read_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.result import Result
from ladderfit.sampling.convergence import Goal
from ladderfit.sampling.run import draw
from ladderfit.store import read_result, write_result


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A ladder in files without parallaxes, and its result by each sampler."""
    folder = tmp_path_factory.mktemp("made")
    plain = choices(tables=True)
    del plain["anchors"]["parallaxes"]
    write_tables(folder)
    write_choices(Choices.from_mapping(plain), folder / "small.toml")
    ladder = read_ladder(folder / "small.toml")
    with new_folder(folder / "direct") as temporary:
        write_result(draw(ladder, seed=7, draws=300), temporary)
    by_ensemble(ladder, folder / "ensemble", goal=Goal(total=1600), seed=8)
    return folder


@pytest.fixture
def copy(made: Path, tmp_path: Path) -> Path:
    """A copy that a test may spoil."""
    shutil.copytree(made, tmp_path / "copy")
    return tmp_path / "copy"


def test_a_direct_result_is_the_same_again(made: Path) -> None:
    before = sorted(made.iterdir())
    found = repeat(made / "direct")
    assert found.equal
    (line,) = found.lines
    assert line.startswith("Equal: all 300 draws of ")
    assert sorted(made.iterdir()) == before


def test_an_ensemble_result_is_the_same_again(made: Path) -> None:
    found = repeat(made / "ensemble")
    assert found.equal, found
    assert str(found).startswith("Equal: all 1,600 draws of ")


def test_a_repetition_can_be_kept(copy: Path) -> None:
    assert repeat(copy / "direct", copy / "again").equal
    again = read_result(copy / "again")
    for name, values in read_result(copy / "direct").draws.items():
        np.testing.assert_array_equal(again.draws[name], values)
    assert (copy / "again" / "figures").is_dir()
    with pytest.raises(InputError, match="a file or folder of that name"):
        repeat(copy / "direct", copy / "again")


@pytest.mark.parametrize("sampler", ["direct", "ensemble"])
@pytest.mark.parametrize(
    ("file", "key"),
    [("flow.csv", "expansion.table"), ("cepheids.csv", "cepheids.table")],
)
def test_a_changed_table_is_named(copy: Path, sampler: str, file: str, key: str) -> None:
    table = copy / file
    table.write_text(table.read_text() + "\n", encoding="utf-8")
    with pytest.raises(InputError) as caught:
        repeat(copy / sampler)
    (problem,) = caught.value.problems
    assert problem.file is not None
    assert problem.file.endswith(file)
    assert problem.key == key
    assert "the contents that the result was drawn from" in problem.expected


def test_a_missing_table_is_named(copy: Path) -> None:
    (copy / "flow.csv").unlink()
    with pytest.raises(InputError, match=r"flow\.csv, key expansion\.table: found no such file"):
        repeat(copy / "direct")


@pytest.mark.parametrize("sampler", ["direct", "ensemble"])
def test_a_changed_ladder_file_is_named(copy: Path, sampler: str) -> None:
    ladder = copy / sampler / "ladder.toml"
    ladder.write_text(ladder.read_text().replace("pivot = 10.0", "pivot = 12.0"), encoding="utf-8")
    with pytest.raises(InputError, match=r"ladder\.toml: found SHA-256"):
        repeat(copy / sampler)


@pytest.mark.parametrize(
    ("spoil", "words"),
    [
        (lambda text: "{", "found no readable contents"),
        (lambda text: text.replace('"seed"', '"sead"'), "found no seed"),
        (lambda text: text.replace('"direct"', '"oracle"'), "found the sampler 'oracle'"),
    ],
)
def test_a_provenance_that_does_not_do_is_named(copy: Path, spoil, words: str) -> None:
    path = copy / "direct" / "provenance.json"
    path.write_text(spoil(path.read_text()), encoding="utf-8")
    with pytest.raises(InputError, match=words):
        repeat(copy / "direct")


def altered(result: Result, name: str, change: float) -> Result:
    return dataclasses.replace(
        result, draws={**result.draws, name: result.draws[name] + change * result.sd(name)}
    )


def test_what_differs_is_said(made: Path) -> None:
    """Negative control of being equal: one parameter by a hair, and by half an error."""
    result = read_result(made / "direct")
    versions = json.loads((made / "direct" / "provenance.json").read_text())["versions"]
    assert compare(result, result, versions).equal
    found = compare(result, altered(result, "slope", 0.5), versions)
    assert not found.equal
    assert found.lines[0] == f"Differs: 1 of {len(result.draws)} parameters."
    assert "slope" in found.lines[1]
    assert found.lines[1].endswith("0.5 of its error.")
    assert found.lines[2] == "The versions are the same: another processor may round differently."
    assert not compare(result, altered(result, "slope", 1e-9), versions).equal
    older = {**versions, "numpy": "1.0"}
    assert "numpy 1.0 -> " in compare(result, altered(result, "slope", 0.5), older).lines[2]
    fewer = dataclasses.replace(result, draws={"slope": result.draws["slope"]})
    assert "now 300 draws of 1 parameters" in compare(result, fewer, versions).lines[0]


def test_the_command_says_equal_or_what_differs(
    copy: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["calibrate", "--again", str(copy / "direct")]) == 0
    assert capsys.readouterr().out.startswith("Equal: all 300 draws of ")
    path = copy / "direct" / "provenance.json"
    path.write_text(path.read_text().replace('"seed": 7', '"seed": 9'), encoding="utf-8")
    assert main(["calibrate", "--again", str(copy / "direct")]) == 1
    out, err = capsys.readouterr()
    assert out.startswith("Differs: ")
    assert err == ""


@pytest.mark.parametrize(
    ("besides", "words"),
    [
        (["small.toml"], "found FILE besides --again"),
        (["--seed", "4"], "found --seed besides --again"),
        (["--sampler", "direct"], "found --sampler besides --again"),
    ],
)
def test_what_the_folder_says_cannot_be_said_besides(
    made: Path, capsys: pytest.CaptureFixture[str], besides: list[str], words: str
) -> None:
    assert main(["calibrate", *besides, "--again", str(made / "direct")]) == 2
    assert words in capsys.readouterr().err


def test_only_a_run_can_be_resumed(made: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["calibrate", "--resume", str(made / "direct")]) == 2
    (line,) = capsys.readouterr().err.splitlines()
    assert "run.json: found no such file; expected the folder of an ensemble run" in line
    with pytest.raises(SystemExit):
        main(["calibrate", "--resume", "one", "--again", "other"])
