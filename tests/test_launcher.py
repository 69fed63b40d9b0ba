"""Starting the workbench, and the notebooks that come along."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import nbformat
import pytest
from nbclient import NotebookClient

from ladderfit.cli import main
from ladderfit.errors import InputError
from ladderfit.launcher import (
    FIRST,
    command,
    default_folder,
    environment,
    prepare,
    sockets_fit,
    with_file,
)
from ladderfit.shipped import sample_ladder, shipped

NOTEBOOKS = sorted(path.name for path in shipped("notebooks").glob("*.ipynb"))


def test_notebooks_are_numbered() -> None:
    assert NOTEBOOKS[0] == FIRST
    numbers = [int(name[:2]) for name in NOTEBOOKS]
    assert numbers == sorted(set(numbers))
    assert {"02_anchors.ipynb", "04_peak_magnitudes.ipynb"} <= set(NOTEBOOKS)


@pytest.mark.parametrize("name", NOTEBOOKS)
def test_notebooks_are_stripped_and_say_how_to_run(name: str) -> None:
    notebook = nbformat.read(shipped("notebooks") / name, as_version=4)
    nbformat.validate(notebook)
    assert "widgets" not in notebook.metadata
    first = notebook.cells[0].source.splitlines()[0]
    assert first == "To run all cells: menu **Run**, then **Run All Cells**."
    for cell in notebook.cells:
        if cell.cell_type == "code":
            assert cell.outputs == []
            assert cell.execution_count is None
    words = "".join(cell.source for cell in notebook.cells)
    assert "compiles for 5 to 15 seconds" in words
    assert "lf.draw(" in words


@pytest.mark.filterwarnings("ignore")  # of the libraries that run notebooks
@pytest.mark.parametrize("name", NOTEBOOKS)
def test_notebooks_run_to_the_end(name: str, tmp_path: Path) -> None:
    prepare(tmp_path)
    notebook = nbformat.read(tmp_path / name, as_version=4)
    NotebookClient(notebook, timeout=240, resources={"metadata": {"path": str(tmp_path)}}).execute()
    outputs = [out for cell in notebook.cells if cell.cell_type == "code" for out in cell.outputs]
    kinds = {kind for out in outputs for kind in out.get("data", {})}
    assert "application/vnd.jupyter.widget-view+json" in kinds
    assert not [out for out in outputs if out.output_type == "error"]
    assert not [out for out in outputs if out.get("name") == "stderr"]


def test_copies_are_made_once(tmp_path: Path) -> None:
    folder = tmp_path / "mine"
    assert prepare(folder) == folder / FIRST
    (folder / FIRST).write_text("edited")
    (folder / NOTEBOOKS[1]).unlink()
    prepare(folder)
    assert (folder / FIRST).read_text() == "edited"
    assert (folder / NOTEBOOKS[1]).exists()


def test_copies_name_the_ladder_file(tmp_path: Path) -> None:
    file = tmp_path / 'a "quoted" name.toml'
    prepare(tmp_path / "mine", file)
    for name in NOTEBOOKS:
        text = (tmp_path / "mine" / name).read_text(encoding="utf-8")
        sources = "".join("".join(cell["source"]) for cell in json.loads(text)["cells"])
        assert f"FILE = {json.dumps('../' + file.name)}" in sources
    with pytest.raises(ValueError, match="found 0 lines"):
        with_file('{"cells": []}', "x.toml")


def test_a_file_is_no_folder(tmp_path: Path) -> None:
    (tmp_path / "mine").write_text("")
    with pytest.raises(InputError, match="found a file"):
        prepare(tmp_path / "mine")


def test_names_of_folders() -> None:
    assert default_folder() == Path("workbench-sample")
    assert default_folder(Path("/x/my.toml")) == Path("workbench-my")


def test_the_command_stays_on_this_machine(tmp_path: Path) -> None:
    words = command(tmp_path, port=8901, browser=False)
    assert "--ServerApp.ip=127.0.0.1" in words
    assert "--LabApp.extension_manager=readonly" in words
    assert not any("token" in word.lower() for word in words)  # Jupyter makes one of its own
    settings = Path(environment()["JUPYTER_CONFIG_PATH"].split(":")[0])
    overrides = json.loads((settings / "labconfig/default_setting_overrides.json").read_text())
    assert overrides["@jupyterlab/apputils-extension:notification"]["fetchNews"] == "false"


def test_sockets_need_short_names() -> None:
    assert sockets_fit(Path("/home/somebody/.local/share/jupyter/runtime"))
    assert not sockets_fit(Path("/" + 70 * "x"))


def test_bad_ladder_file_stops_before_the_server(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    assert main(["workbench", "nowhere.toml"]) == 2
    assert "no such file" in capsys.readouterr().err
    assert list(tmp_path.iterdir()) == []


def test_the_launcher_imports_no_widget() -> None:
    probe = (
        "import sys, ladderfit.launcher; heavy = {'ipywidgets', 'anywidget', 'ipympl', "
        "'matplotlib', 'jupyterlab'} & set(sys.modules); sys.exit(' '.join(sorted(heavy)) or 0)"
    )
    done = subprocess.run(
        [sys.executable, "-c", probe], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr


def test_the_sample_is_where_the_notebooks_expect_it() -> None:
    assert sample_ladder().is_file()
