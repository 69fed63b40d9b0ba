"""Style and types are tests, so that one line runs everything."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest


def run(repository: Path, *arguments: str) -> tuple[int, str]:
    done = subprocess.run(
        [sys.executable, "-m", *arguments],
        cwd=repository,
        capture_output=True,
        text=True,
        check=False,
    )
    return done.returncode, done.stdout + done.stderr


@pytest.mark.parametrize(
    "arguments",
    [("ruff", "check", "."), ("ruff", "format", "--check", ".")],
    ids=["ruff check", "ruff format"],
)
def test_clean(repository: Path, arguments: tuple[str, ...]) -> None:
    code, output = run(repository, *arguments)
    assert code == 0, output


def test_types(repository: Path) -> None:
    """Against the running Python, as what NumPy says of its types is written for that."""
    if np.lib.NumpyVersion(np.__version__) < "2.4.0":
        pytest.skip(f"NumPy {np.__version__} does not say the types of all that is used")
    version = f"{sys.version_info.major}.{sys.version_info.minor}"
    code, output = run(repository, "mypy", "--python-version", version)
    assert code == 0, output


def test_type_errors_are_found(repository: Path, tmp_path: Path) -> None:
    """A negative control: the configuration in force rejects an untyped function."""
    wrong = tmp_path / "wrong.py"
    wrong.write_text("def double(x):\n    return 2 * x\n")
    code, output = run(repository, "mypy", "--config-file", "pyproject.toml", str(wrong))
    assert code == 1
    assert "no-untyped-def" in output


def test_style_errors_are_found(repository: Path, tmp_path: Path) -> None:
    """A negative control: an undocumented public function and a relative import."""
    wrong = tmp_path / "wrong.py"
    wrong.write_text("from .other import thing\n\n\ndef public():\n    return thing\n")
    code, output = run(
        repository, "ruff", "check", "--config", "pyproject.toml", "--no-cache", str(wrong)
    )
    assert code == 1
    assert "D103" in output
    assert "TID252" in output
