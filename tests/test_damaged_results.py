"""Result folders that were cut, swapped, made by others, or meant to do harm: one clear line."""

from __future__ import annotations

import json
import shutil
from collections.abc import Callable
from pathlib import Path

import builders
import h5py
import numpy as np
import pytest
import xarray as xr
from killed_jobs import ladder_in_files
from test_faults import contents

from ladderfit.cli import main
from ladderfit.files import sha256_of
from ladderfit.report.write import write_report
from ladderfit.sampling.run import draw
from ladderfit.store import read_result, write_result


@pytest.fixture(scope="module")
def good(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Two results of one ladder, and a table of new Cepheids."""
    base = tmp_path_factory.mktemp("results")
    ladder = ladder_in_files(base / "data")
    for name, seed in (("one", 1), ("two", 2)):
        result = draw(ladder, seed=seed, draws=200)
        (base / name / "figures").mkdir(parents=True)
        write_result(result, base / name)
        write_report(result, base / name)
    new = builders.tables()["cepheids"].head(12).assign(Galaxy="New")
    new["ID"] = [f"N{place}" for place in range(12)]
    new.to_csv(base / "new.csv", index=False)
    return base


@pytest.fixture
def base(good: Path, tmp_path: Path) -> Path:
    return Path(shutil.copytree(good, tmp_path / "results"))


def mended(folder: Path) -> None:
    """Let the recorded SHA-256 fit, as whoever means harm would."""
    for name in ("summary.json", "provenance.json"):
        content = json.loads((folder / name).read_text())
        content.get("provenance", content)["posterior_sha256"] = sha256_of(folder / "posterior.nc")
        (folder / name).write_text(json.dumps(content))


def _cut(part: float) -> Callable[[Path], None]:
    def spoil(folder: Path) -> None:
        content = (folder / "posterior.nc").read_bytes()
        (folder / "posterior.nc").write_bytes(content[: int(part * len(content))])

    return spoil


def _one_bit(folder: Path) -> None:
    with h5py.File(folder / "posterior.nc") as file:
        place = file["posterior/slope"].id.get_offset()
    content = bytearray((folder / "posterior.nc").read_bytes())
    content[place + 5] ^= 4
    (folder / "posterior.nc").write_bytes(content)


def _of_another(folder: Path) -> None:
    shutil.copy(folder.parent / "two" / "posterior.nc", folder)


def _foreign(folder: Path) -> None:
    with h5py.File(folder / "posterior.nc", "w") as file:
        file["mcmc/chain"] = np.zeros((3, 4))
    mended(folder)


def _netcdf_of_others(folder: Path) -> None:
    data = xr.Dataset({"tas": (("time", "lat"), np.zeros((3, 4)))})
    data.to_netcdf(folder / "posterior.nc", engine="h5netcdf")
    mended(folder)


def _replaced(name: str, make: Callable[[h5py.Group, Path], None]) -> Callable[[Path], None]:
    def spoil(folder: Path) -> None:
        with h5py.File(folder / "posterior.nc", "r+") as file:
            del file["posterior"][name]
            make(file["posterior"], folder)
        mended(folder)

    return spoil


def _external_link(group: h5py.Group, folder: Path) -> None:
    group["slope"] = h5py.ExternalLink(folder.parent / "two" / "posterior.nc", "/posterior/slope")


def _external_data(group: h5py.Group, folder: Path) -> None:
    secret = folder.parent / "secret"
    secret.write_bytes(bytes(1600))
    group.create_dataset("slope", (1, 200), float, external=[(str(secret), 0, 1600)])


def _vast(group: h5py.Group, _: Path) -> None:
    group.create_dataset("slope", (1, 2**38), float, chunks=(1, 2**16), compression="gzip")


def _not_numbers(group: h5py.Group, _: Path) -> None:
    group["slope"] = np.full((1, 200), np.nan)


def _too_few(group: h5py.Group, _: Path) -> None:
    group["slope"] = np.ones((1, 7))


def _other_ladder(folder: Path) -> None:
    text = (folder / "ladder.toml").read_text()
    (folder / "ladder.toml").write_text(text.replace("pivot = 10.0", "pivot = 12.0"))


def _summary(old: str, new: str) -> Callable[[Path], None]:
    def spoil(folder: Path) -> None:
        text = (folder / "summary.json").read_text()
        assert old in text
        (folder / "summary.json").write_text(text.replace(old, new, 1))

    return spoil


SPOILT = {
    "cut by half": _cut(0.5),
    "cut by a byte": _cut(0.99999),
    "empty": _cut(0.0),
    "one bit": _one_bit,
    "draws of another result": _of_another,
    "foreign HDF5": _foreign,
    "foreign NetCDF": _netcdf_of_others,
    "a link to another file": _replaced("slope", _external_link),
    "data in another file": _replaced("slope", _external_data),
    "2 TB that are not there": _replaced("slope", _vast),
    "not numbers": _replaced("slope", _not_numbers),
    "too few": _replaced("slope", _too_few),
    "another ladder": _other_ladder,
    "a text for numbers": _summary('"ess": {', '"ess": "many", "x": {'),
    "a text for a number": _summary('"pareto_k": ', '"pareto_k": "0", "x": '),
    "inputs without hashes": _summary('"sha256"', '"sha"'),
}


@pytest.mark.parametrize("how", SPOILT)
def test_damage_is_named_by_every_command(
    base: Path, how: str, capsys: pytest.CaptureFixture[str]
) -> None:
    SPOILT[how](base / "one")
    before = contents(base)
    for arguments in (
        ["distances", str(base / "one"), str(base / "new.csv")],
        ["compare", str(base / "two"), str(base / "one"), "--resamples", "0"],
        ["report", str(base / "one")],
        ["calibrate", "--again", str(base / "one")],
    ):
        assert main(arguments) == 2, arguments
        out, err = capsys.readouterr()
        (line,) = err.splitlines()
        assert line.startswith(f"ladderfit: {base / 'one'}"), line
        assert "expected" in line
        assert out == ""
    assert contents(base) == before


def test_what_is_whole_is_read(base: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The control: the same commands on a good folder."""
    assert main(["distances", str(base / "one"), str(base / "new.csv")]) == 0
    assert main(["compare", str(base / "two"), str(base / "one"), "--resamples", "0"]) == 0
    assert main(["report", str(base / "one")]) == 0
    assert main(["calibrate", "--again", str(base / "one")]) == 0
    assert "Equal: all 200 draws" in capsys.readouterr().out
    assert read_result(base / "one").size == 200


@pytest.mark.parametrize("text", ["[]", '{"inputs": []}', '{"versions": {"numpy": 2}}', "{" * 9])
def test_a_provenance_of_the_wrong_kind(
    base: Path, text: str, capsys: pytest.CaptureFixture[str]
) -> None:
    (base / "one" / "provenance.json").write_text(text)
    for arguments in (["report", str(base / "one")], ["calibrate", "--again", str(base / "one")]):
        assert main(arguments) == 2
        (line,) = capsys.readouterr().err.splitlines()
        assert "provenance.json" in line
