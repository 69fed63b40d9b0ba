"""Malformed files are refused in clear words, or fitted; never a traceback, a hang or a bomb."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

RUN = Path(__file__).parent / "fuzz" / "run.py"


@pytest.mark.full
@pytest.mark.timeout(10_800)
def test_spoilt_files(in_full: bool) -> None:
    """20,000 files in full; here the first 60, on one worker."""
    number, workers = ("20000", "2") if in_full else ("60", "1")
    done = subprocess.run(
        [sys.executable, str(RUN), "--cases", number, "--workers", workers],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
