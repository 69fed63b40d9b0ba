"""The comparison of numbers from two environments notices what differs.

The numbers themselves take a minute in each: tests/benchmarks/versions.py.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from benchmarks.versions import DRAWN, LOGARITHMS, PLACES, WIDTHS, apart, compare

NUMBERS: dict[str, dict[str, Any]] = {
    "log densities": {"sample": [187.0, -3.0, float("-inf")]},
    LOGARITHMS: {"sample: host": [1e-4, -2.0]},
    PLACES: {"sample": [-5.9, 0.07]},
    WIDTHS: {"sample": [0.05, 0.01]},
    DRAWN: {"sample: mean": [71.0, 0.0]},
}


def written(path: Path, kind: str = "", name: str = "", numbers: list[float] | None = None) -> Path:
    """A file of `NUMBERS`, one list exchanged."""
    changed = {**NUMBERS, kind: {name: numbers}} if numbers is not None else NUMBERS
    path.write_text(json.dumps({"versions": {}, "numbers": changed}), encoding="utf-8")
    return path


@pytest.mark.parametrize(
    ("kind", "name", "numbers", "code"),
    [
        ("log densities", "sample", [187.0 + 1e-8, -3.0, float("-inf")], 0),
        ("log densities", "sample", [187.0 + 1e-6, -3.0, float("-inf")], 1),
        ("log densities", "sample", [187.0, -3.0, 0.0], 1),
        ("log densities", "sample", [187.0, -3.0], 1),
        ("log densities", "peak terms", [187.0], 1),
        (LOGARITHMS, "sample: host", [1e-4 + 5e-10, -2.0], 0),
        (LOGARITHMS, "sample: host", [1e-4 + 5e-9, -2.0], 1),
        (PLACES, "sample", [-5.9 + 1e-5, 0.07], 0),
        (PLACES, "sample", [-5.9 + 1e-4, 0.07], 1),
        (DRAWN, "sample: mean", [72.0, 0.0], 0),
    ],
)
def test_what_differs_is_told(
    kind: str, name: str, numbers: list[float], code: int, tmp_path: Path
) -> None:
    one = written(tmp_path / "one.json")
    assert compare(one, one) == 0
    assert compare(one, written(tmp_path / "other.json", kind, name, numbers)) == code


def test_differences_are_relative() -> None:
    assert apart([2.0, 0.0], [2.0, 0.0]) == 0.0
    assert apart([4.0, 1.0], [2.0, 1.0]) == pytest.approx(0.5)
    assert apart([1000.0, 1e-9], [1000.0, 2e-9]) == pytest.approx(1e-9)  # of a thousandth
    assert apart([1.0], [float("nan")]) == float("inf")
