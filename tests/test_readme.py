"""README's Python example runs as it stands."""

from __future__ import annotations

import re
from pathlib import Path

import pandas as pd
import pytest


def test_the_example_runs(
    repository: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    text = (repository / "README.md").read_text(encoding="utf-8")
    (example,) = re.findall(r"```python\n(.*?)```", text, re.DOTALL)
    monkeypatch.chdir(repository)
    names: dict[str, object] = {}
    exec(compile(example, "README.md", "exec"), names)
    shown = capsys.readouterr().out
    assert "hubble_constant" in shown
    assert "cepheids.periods: [5, 100] -> [10, 100]" in shown
    summary = names["base"].summary()  # type: ignore[attr-defined]
    assert isinstance(summary, pd.DataFrame)
    assert summary.loc["slope", "mean"] == pytest.approx(-3.28, abs=0.1)
