"""Launching the worker of a run, in a session of its own."""

from __future__ import annotations

import os
import subprocess
import sys
import threading
from pathlib import Path

from ladderfit.sampling.run_folder import RunFolder, Status

_ONE_THREAD = (  # a matrix product shared between threads may round differently
    "OMP_NUM_THREADS",
    "OPENBLAS_NUM_THREADS",
    "MKL_NUM_THREADS",
    "VECLIB_MAXIMUM_THREADS",
)
_PACKAGE = Path(__file__).resolve().parents[1]


def launch(folder: RunFolder) -> subprocess.Popen[bytes]:
    """Start the worker in a session of its own, so that no terminal's end is its end."""
    environment = dict(os.environ)
    if not {"site-packages", "dist-packages"} & set(_PACKAGE.parts):  # a checkout
        known = environment.get("PYTHONPATH")
        environment["PYTHONPATH"] = os.pathsep.join(filter(None, (str(_PACKAGE.parent), known)))
    environment.update(dict.fromkeys(_ONE_THREAD, "1"))
    folder.write_status(Status("starting", "", os.getpid()))
    with folder.log.open("ab") as log:
        log.truncate(0)
        worker = subprocess.Popen(
            [sys.executable, "-P", "-m", "ladderfit.sampling.worker", str(folder.path.resolve())],
            stdin=subprocess.DEVNULL,
            stdout=log,
            stderr=log,
            env=environment,
            start_new_session=True,
        )
    threading.Thread(target=worker.wait, daemon=True, name="ladderfit-worker").start()
    return worker


def last_words(folder: RunFolder) -> str:
    """The last line of the worker's log, where it has one."""
    try:
        lines = folder.log.read_text(encoding="utf-8", errors="replace").split("\n")
    except OSError:
        return ""
    said = [line.strip() for line in lines if line.strip()]
    return f"the process ended, saying: {said[-1][:300]}" if said else ""
