"""What has to hold before the files of a result folder are believed."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import numpy.typing as npt

from ladderfit.errors import Problem
from ladderfit.files import sha256_of
from ladderfit.names import PARAMETERS, base_name
from ladderfit.result import Diagnostics

FloatArray = npt.NDArray[np.float64]

_MAPPINGS = ("ess", "rhat", "informed")
_SINGLE = ("pareto_k", "efficiency", "log_evidence", "log_evidence_error")
_KINDS = {
    "title": str,
    "sampler": str,
    "written": str,
    "ladder_sha256": str,
    "posterior_sha256": str,
    "seed": int,
    "draws": int,
    "inputs": dict,
    "versions": dict,
}
_WORDS = {str: "text", int: "whole number", dict: "object"}
_HASHED = {"posterior_sha256": "posterior.nc", "ladder_sha256": "ladder.toml"}


def changed_files(folder: Path, provenance: Mapping[str, Any]) -> Iterator[Problem]:
    """One problem for each file whose contents are not those of the recorded SHA-256."""
    for key, name in _HASHED.items():
        known = provenance.get(key)
        if known is None:
            continue
        found = sha256_of(folder / name)
        if found != known:
            yield Problem(
                found=f"SHA-256 {found[:12]}...",
                expected=f"{str(known)[:12]}..., the contents that the result was written with",
                remedy="restore the file, or calibrate anew",
                file=str(folder / name),
            )


def check_provenance(content: Mapping[str, Any]) -> None:
    """Refuse a provenance in which something is of the wrong kind; what is absent passes.

    Raises
    ------
    ValueError
        Saying what is wrong.
    """
    for name, kind in _KINDS.items():
        if name in content and type(content[name]) is not kind:
            raise ValueError(f"{name} is no {_WORDS[kind]}")
    if content.get("draws", 1) < 1:
        raise ValueError(f"{content['draws']} draws")
    if not all(isinstance(value, str) for value in content.get("versions", {}).values()):
        raise ValueError("a version that is no text")
    for section, entry in content.get("inputs", {}).items():
        kinds = {"table": str, "sha256": str, "rows": int}
        if not isinstance(entry, dict) or any(
            type(entry.get(k)) is not v for k, v in kinds.items()
        ):
            raise ValueError(f"the input {section!r} lacks its table, SHA-256 or rows")


def check_stored(path: Path) -> None:
    """Refuse a NetCDF file whose draws do not lie in it: links, other files, blown-up shapes.

    Raises
    ------
    ValueError
        Saying what is wrong.
    OSError, KeyError
        If it is not such a file.
    """
    with h5py.File(path, "r") as file:
        if not isinstance(file.get("posterior", getlink=True), h5py.HardLink):
            raise ValueError("no group of draws of its own")
        group = file["posterior"]
        if not isinstance(group, h5py.Group):
            raise ValueError("no group of draws")
        size = 0
        for name in group:
            if not isinstance(group.get(name, getlink=True), h5py.HardLink):
                raise ValueError(f"a link in place of {name!r}")
            data = group[name]
            if not isinstance(data, h5py.Dataset):
                raise ValueError(f"{name!r} is no array")
            if data.external or data.is_virtual:
                raise ValueError(f"{name!r} lies in another file")
            size += data.nbytes
    if size > path.stat().st_size:
        raise ValueError("arrays larger than the file")


def check_draws(draws: Mapping[str, FloatArray]) -> None:
    """Refuse draws that are none.

    Raises
    ------
    ValueError
        Saying what is wrong.
    """
    if not draws:
        raise ValueError("no draws")
    for name, values in draws.items():
        if base_name(name) not in PARAMETERS:
            raise ValueError(f"draws of an unknown parameter {name!r}")
        if values.ndim != 1:
            raise ValueError(f"draws of {name!r} with {values.ndim} dimensions")
        if not np.isfinite(values).all():
            raise ValueError(f"draws of {name!r} that are not finite")
    sizes = {len(values) for values in draws.values()}
    if len(sizes) > 1 or 0 in sizes:
        raise ValueError("not one draw of each parameter")


def diagnostics_of(content: Mapping[str, Any]) -> Diagnostics:
    """Diagnostics as ``summary.json`` has them, every value of its kind.

    Raises
    ------
    TypeError, ValueError, KeyError, AttributeError
        If one is not.
    """
    if not isinstance(content["sampler"], str) or type(content["seed"]) is not int:
        raise TypeError("a sampler or a seed that is none")
    notes = content["notes"]
    if not isinstance(notes, list) or not all(isinstance(note, str) for note in notes):
        raise TypeError("notes that are no sentences")
    ess, rhat, informed = (_numbers(content.get(name, {})) for name in _MAPPINGS)
    single = [None if content.get(name) is None else _number(content[name]) for name in _SINGLE]
    strange = set(content) - {"sampler", "seed", "notes", *_MAPPINGS, *_SINGLE}
    if strange:
        raise KeyError(min(strange))
    k, efficiency, evidence, evidence_error = single
    return Diagnostics(
        sampler=content["sampler"],
        seed=content["seed"],
        ess=ess,
        pareto_k=k,
        efficiency=efficiency,
        rhat=rhat,
        log_evidence=evidence,
        log_evidence_error=evidence_error,
        informed=informed,
        notes=tuple(notes),
    )


def _numbers(content: Mapping[str, Any]) -> dict[str, float]:
    return {name: math.nan if v is None else _number(v) for name, v in content.items()}


def _number(value: Any) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise TypeError(f"{str(value)[:40]!r} where a number has to be")
    return float(value)
