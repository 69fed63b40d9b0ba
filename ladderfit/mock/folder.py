"""A folder of simulated data made after a ladder file."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from ladderfit import schema
from ladderfit.assembly import MATRICES
from ladderfit.choices import Choices
from ladderfit.errors import InputError, Problem
from ladderfit.files import new_folder
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.mock.redraw import Redrawn, absolute, needed, redraw
from ladderfit.mock.tables import ecsv, truth_toml
from ladderfit.names import base_name, with_group

_FILES = {
    "cepheids": "cepheids.ecsv",
    "anchors.parallaxes": "parallax_stars.ecsv",
    "supernovae": "supernovae.ecsv",
    "expansion": "expansion.ecsv",
}


def plain_truth(ladder: Ladder) -> dict[str, float]:
    """A truth near the data: the centre of each prior, and the moduli that follow.

    A geometric anchor in use is as far away as stated.  Any other host is where
    the mean of its stars puts it, rounded to 0.01 mag.
    """
    choices = ladder.choices
    truth = {
        name: choices.prior(name).centre for name in needed(ladder) if base_name(name) != "modulus"
    }
    anchors = {anchor.name: anchor.modulus for anchor in ladder.geometric}
    moduli: dict[str, float] = {}
    if ladder.cepheids is not None:
        bare = ladder.cepheids.magnitude - absolute(ladder, ladder.cepheids, truth)
        for number in np.unique(ladder.cepheids.host):
            mean = float(np.mean(bare[ladder.cepheids.host == number]))
            moduli[ladder.hosts[number]] = round(mean, 2)
    known = moduli | anchors
    return truth | {with_group("modulus", host): known[host] for host in ladder.hosts}


def write_mock(
    path: str | Path, out: str | Path, seed: int, truth: Mapping[str, float] | None = None
) -> Path:
    """Simulate data for a ladder file; write them with the truth into a new folder.

    Parameters
    ----------
    path : path
        The ladder file.
    out : path
        Folder to make; it appears whole or not at all.
    seed : int
        Seed of the simulation.
    truth : mapping of str to float, optional
        True values that differ from those of `plain_truth`.

    Returns
    -------
    Path
        The new ladder file, ``ladder.toml``, beside its tables and ``truth.toml``.

    Raises
    ------
    InputError
        If the ladder file cannot be used, `out` exists, or `truth` names no parameter.
    """
    ladder = read_ladder(path)
    true = plain_truth(ladder)
    strangers = [name for name in truth or {} if name not in true]
    if strangers:
        raise InputError(
            Problem(f"a true value for {name}", f"one of {', '.join(true)}", "correct the name")
            for name in strangers
        )
    true |= truth or {}
    drawn = redraw(ladder, true, np.random.default_rng(seed))
    choices = Choices.from_mapping(_with_files(drawn))
    remark = "Simulated after the ladder file beside this one."
    with new_folder(out) as folder:
        for section, table in drawn.tables.items():
            if section in MATRICES:
                np.savetxt(folder / _matrix_file(section), table)
            else:
                (folder / _FILES[section]).write_text(ecsv(table), encoding="utf-8")
        (folder / "truth.toml").write_text(truth_toml(true, seed, remark), encoding="utf-8")
        write_choices(choices, folder / "ladder.toml")
        read_ladder(folder / "ladder.toml")
    return Path(out) / "ladder.toml"


def _with_files(drawn: Redrawn) -> dict[str, Any]:
    """The choices with the name of each table's and each matrix's file."""
    plain = dict(drawn.choices)
    for section in drawn.tables:
        if section in MATRICES:
            plain = schema.with_value(plain, section, {"file": _matrix_file(section)})
        else:
            plain = schema.with_value(plain, f"{section}.table", _FILES[section])
    return plain


def _matrix_file(key: str) -> str:
    return f"{key.replace('.', '_')}.txt"
