"""A result on disk: summary.json, summary.ecsv, posterior.nc, ladder.toml, provenance.json.

``posterior.nc`` is NetCDF-4 with the groups of the InferenceData convention:
``posterior`` (dimensions chain, draw, and host for the moduli) and
``sample_stats``.  This is the one file that knows xarray.
"""

from __future__ import annotations

import io
import json
import os
import platform
import shutil
from collections.abc import Mapping
from datetime import UTC, datetime
from importlib import metadata
from pathlib import Path
from typing import Any

import h5netcdf
import numpy as np
import numpy.typing as npt
import xarray as xr
from astropy.table import Table
from xarray.backends import H5NetCDFStore

from ladderfit.assembly import PATHS
from ladderfit.choices import Choices
from ladderfit.errors import InputError, Problem, raise_if
from ladderfit.files import sha256_of
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.ladder_file import read_choices, write_choices
from ladderfit.names import base_name, group_of, parameter, with_group
from ladderfit.ranges import Ranges, calibrated_ranges
from ladderfit.result import Diagnostics, Result, ordered
from ladderfit.result_files import (
    changed_files,
    check_draws,
    check_provenance,
    check_stored,
    diagnostics_of,
)

FloatArray = npt.NDArray[np.float64]

_RECORDED = ("ladderfit", "numpy", "scipy", "astropy", "pandas", "emcee", "numba", "xarray")


def write_result(result: Result, folder: Path, ladder_file: Path | None = None) -> None:
    """Write a result's files into an existing folder.

    Meant to be used inside `ladderfit.files.new_folder`, which moves the folder
    into place once everything in it is written.  A `ladder_file` is copied as it
    is; without one the choices are written, with paths as seen from beside the folder.
    """
    if ladder_file is None:
        write_choices(_relocated(result, folder), folder / "ladder.toml")
    else:
        shutil.copyfile(ladder_file, folder / "ladder.toml")
    write_netcdf(result, folder / "posterior.nc")
    provenance = provenance_of(result) | {
        "ladder_sha256": sha256_of(folder / "ladder.toml"),
        "posterior_sha256": sha256_of(folder / "posterior.nc"),
    }
    summary = {**summary_of(result), "provenance": provenance}
    _write_json(folder / "summary.json", summary)
    _write_json(folder / "provenance.json", provenance)
    write_ecsv(result, folder / "summary.ecsv")


def read_result(folder: str | Path) -> Result:
    """Read a result back; its ladder comes along if its tables are unchanged.

    Raises
    ------
    InputError
        If the folder holds no readable result, or the draws or the ladder file are not
        those that were written.
    """
    folder = Path(folder)
    for name in ("posterior.nc", "summary.json", "ladder.toml"):
        if not (folder / name).is_file():
            raise InputError(
                Problem(
                    found=f"no {name}",
                    expected="a folder written by ladderfit calibrate",
                    remedy="name a result folder",
                    file=str(folder),
                )
            )
    choices = read_choices(folder / "ladder.toml")
    summary = _read_json(folder / "summary.json")
    draws = read_netcdf(folder / "posterior.nc")
    try:
        diagnostics = diagnostics_of(summary["diagnostics"])
        check_provenance(summary["provenance"])
        raise_if(list(changed_files(folder, summary["provenance"])))
        source = _ladder_if_unchanged(folder, summary["provenance"]["inputs"])
    except (KeyError, TypeError, ValueError, AttributeError) as error:
        raise _unreadable(folder / "summary.json", error) from None
    return Result(choices, draws, diagnostics, source)


def read_ranges(folder: str | Path) -> Ranges | None:
    """What a saved calibration covers; None where its provenance does not say.

    Raises
    ------
    InputError
        If the provenance cannot be read.
    """
    path = Path(folder) / "provenance.json"
    if not path.is_file():
        return None
    covered = _read_json(path).get("calibrated")
    try:
        return None if covered is None else Ranges.read(covered)
    except (TypeError, ValueError, AttributeError) as error:
        raise _unreadable(path, error) from None


def provenance_of(result: Result) -> dict[str, Any]:
    """What a repeat needs: inputs with their hashes, versions, seed, time."""
    inputs = {}
    if result.source is not None:
        for key, source in result.source.sources.items():
            inputs[key] = {"table": source.path, "sha256": source.sha256, "rows": source.rows}
    covered = {} if result.source is None else calibrated_ranges(result.source).written()
    versions = {name: metadata.version(name) for name in _RECORDED}
    return {
        "title": result.choices.title,
        "inputs": inputs,
        "calibrated": covered,
        "seed": result.diagnostics.seed,
        "sampler": result.diagnostics.sampler,
        "draws": result.size,
        "versions": {"python": platform.python_version(), **versions},
        "written": datetime.now(UTC).isoformat(timespec="seconds"),
    }


def write_ecsv(result: Result, path: Path) -> None:
    """Write the summary as ECSV, units in the last column."""
    summary = result.summary()
    table = Table({"parameter": list(summary.index)})
    for column in summary.columns:
        table[column] = list(summary[column])
    table.meta["title"] = result.choices.title
    table.write(path, format="ascii.ecsv")


def write_netcdf(result: Result, path: Path) -> None:
    """Write the draws as NetCDF groups, one chain."""
    hosts = [name for name in result.draws if base_name(name) == "modulus"]
    variables: dict[str, Any] = {}
    for name, draws in result.draws.items():
        if name not in hosts:
            variables[name] = (("chain", "draw"), draws[None, :], {"units": parameter(name).unit})
    coordinates: dict[str, Any] = {"chain": [0], "draw": np.arange(result.size)}
    if hosts:
        moduli = np.stack([result.draws[name] for name in hosts], axis=1)
        variables["modulus"] = (("chain", "draw", "host"), moduli[None], {"units": "mag"})
        coordinates["host"] = [str(group_of(name)) for name in hosts]
    posterior = xr.Dataset(variables, coordinates)
    posterior.attrs.update(inference_library="ladderfit", sampler=result.diagnostics.sampler)
    stats = xr.Dataset(attrs=_numbers(result.diagnostics))
    content = io.BytesIO()  # HDF5 itself may crash the process where the disk is full
    with h5netcdf.File(content, "w") as file:
        posterior.dump_to_store(H5NetCDFStore(file, group="posterior"))
        stats.dump_to_store(H5NetCDFStore(file, group="sample_stats"))
    path.write_bytes(content.getbuffer())


def read_netcdf(path: Path) -> dict[str, FloatArray]:
    """Read the draws back, chains one after the other.

    Raises
    ------
    InputError
        If the file is not such a NetCDF file.
    """
    draws: dict[str, FloatArray] = {}
    try:
        check_stored(path)
        with xr.open_dataset(path, group="posterior", engine="h5netcdf", decode_cf=False) as data:
            for name, variable in data.data_vars.items():
                values = np.asarray(variable.values, dtype=float)
                flat = values.reshape(-1, *values.shape[2:])
                if "host" in variable.dims:
                    for place, host in enumerate(data["host"].values):
                        draws[with_group("modulus", str(host))] = flat[:, place].copy()
                else:
                    draws[str(name)] = flat
        check_draws(draws)
        return ordered(draws)
    except Exception as error:  # the libraries raise anything on damaged files
        raise _unreadable(path, error) from None


def _numbers(diagnostics: Diagnostics) -> dict[str, float]:
    found = {
        "pareto_k": diagnostics.pareto_k,
        "efficiency": diagnostics.efficiency,
        "log_evidence": diagnostics.log_evidence,
        "log_evidence_error": diagnostics.log_evidence_error,
    }
    return {name: value for name, value in found.items() if value is not None}


def summary_of(result: Result) -> dict[str, Any]:
    """What ``summary.json`` holds of a result, without its provenance."""
    table = result.summary()
    entries = {
        str(name): {column: _plain(row[column]) for column in table.columns}
        for name, row in table.iterrows()
    }
    moduli = {
        str(group_of(name)): entry
        for name, entry in entries.items()
        if base_name(name) == "modulus"
    }
    found = result.diagnostics
    return {
        "parameters": {n: e for n, e in entries.items() if base_name(n) != "modulus"},
        "moduli": moduli,
        "diagnostics": {
            "sampler": found.sampler,
            "seed": found.seed,
            "ess": {name: _plain(value) for name, value in found.ess.items()},
            "pareto_k": found.pareto_k,
            "efficiency": found.efficiency,
            "rhat": dict(found.rhat),
            "log_evidence": found.log_evidence,
            "log_evidence_error": found.log_evidence_error,
            "informed": dict(found.informed),
            "notes": list(found.notes),
        },
    }


def _plain(value: Any) -> Any:
    if isinstance(value, str):
        return value
    return float(value) if np.isfinite(value) else None


def _relocated(result: Result, folder: Path) -> Choices:
    """The resolved choices, with paths of inputs as seen from the folder's final place."""
    if result.source is None or result.source.path is None:
        return result.choices
    base = result.source.path.parent.resolve()
    changes = {}
    for key in PATHS:
        try:
            written = result.choices.value(key)
        except KeyError:
            continue
        seen = os.path.relpath(base / written, folder.parent.resolve() / "_")
        changes[key] = Path(seen).as_posix()
    return result.choices.change(changes)


def _ladder_if_unchanged(folder: Path, inputs: Mapping[str, Any]) -> Ladder | None:
    try:
        ladder = read_ladder(folder / "ladder.toml")
    except InputError:
        return None
    same = all(
        key in ladder.sources and ladder.sources[key].sha256 == known["sha256"]
        for key, known in inputs.items()
    )
    return ladder if same else None


def _unreadable(path: Path, error: Exception) -> InputError:
    return InputError(
        Problem(
            found=f"a file that cannot be read ({' '.join(str(error).split())[:120]})",
            expected="a file written by ladderfit calibrate",
            remedy="repeat the calibration",
            file=str(path),
        )
    )


def _write_json(path: Path, content: Mapping[str, Any]) -> None:
    text = json.dumps(content, indent=2, ensure_ascii=False, allow_nan=False)
    path.write_text(text + "\n", encoding="utf-8")


def _read_json(path: Path) -> dict[str, Any]:
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError) as error:
        raise _unreadable(path, error) from None
    if not isinstance(content, dict):
        raise _unreadable(path, TypeError("no object at the top"))
    return content
