"""`ladderfit distances`: a saved calibration on new objects."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path
from typing import Any

from ladderfit.commands.terminal import Add, say, seed


def add(add_parser: Add) -> None:
    """Add the command and its options."""
    words = "apply a saved calibration to new Cepheids or supernovae"
    command = add_parser(
        "distances",
        help=words,
        description=f"{words[0].upper()}{words[1:]}: joint distance moduli with their covariance, "
        "the same as if the new objects had been in the fit without an anchor.",
    )
    command.add_argument("result", metavar="RESULT", help="the folder of a calibration")
    command.add_argument(
        "tables",
        nargs="+",
        metavar="TABLE",
        help="a table of Cepheids, of supernovae, or one of each",
    )
    command.add_argument("--out", metavar="DIR", help="a folder to make for tables and draws")
    command.add_argument(
        "--set",
        dest="changes",
        action="append",
        default=[],
        metavar="KEY=VALUE",
        help="where the new table differs, as in a ladder file: cepheids.columns.host=Galaxy, "
        "cepheids.magnitude.bands.V=F555W, cepheids.periods=[1,100], supernovae.columns.peak=m",
    )
    command.add_argument(
        "--seed", type=seed, metavar="N", help="seed in place of the calibration's"
    )
    command.set_defaults(run=_distances)


def _distances(chosen: argparse.Namespace) -> int:
    from ladderfit.distances.files import distances_text, write_distances
    from ladderfit.distances.moduli import distances_of
    from ladderfit.files import new_folder
    from ladderfit.store import read_ranges, read_result

    result = read_result(chosen.result)
    found = distances_of(
        result,
        [Path(name) for name in chosen.tables],
        changes=dict(_change(text) for text in chosen.changes),
        ranges=read_ranges(chosen.result),
        seed=chosen.seed,
    )
    text = distances_text(found)
    if chosen.out is not None:
        with new_folder(chosen.out) as temporary:
            write_distances(found, result, temporary)
        text = f"{text}\n\nWritten to {chosen.out}"
    say(text, sys.stdout)
    return 0


def _change(text: str) -> tuple[str, Any]:
    """KEY=VALUE, the value as TOML, or else as plain text."""
    import tomllib

    from ladderfit.errors import InputError, Problem

    key, equals, value = text.partition("=")
    if not equals or not key.strip():
        raise InputError(
            Problem(found=repr(text), expected="--set KEY=VALUE", remedy="add the value")
        )
    try:
        return key.strip(), tomllib.loads(f"value = {value}")["value"]
    except tomllib.TOMLDecodeError:
        return key.strip(), value.strip()
