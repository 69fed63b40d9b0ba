"""A small good ladder in every format, for the mutations to spoil."""

from __future__ import annotations

import copy
import gzip
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
import tomlkit
from astropy import units as u
from astropy.io import fits
from astropy.table import Table
from builders import choices, tables

import ladderfit as lf
from ladderfit.store import write_result

TABLES = ("csv", "ecsv", "fits", "vot", "parquet")
MATRICES = ("txt", "fits", "npy")
PACKED = ("csv", "ecsv", "fits", "vot")
RESULT = ("summary.json", "provenance.json", "ladder.toml", "posterior.nc")
_UNITS = {"P": u.d, "Hmag": u.mag, "Vmag": u.mag, "Imag": u.mag}

CLAIMS = """\
title = "Claims on the small ladder"

[[claim]]
quantity = "slope"
value    = -3.31
error    = 0.07

[[claim]]
quantity = "zero_point"
value    = -5.91
error    = 0.05
pivot    = 10.0

[method]
weights = "none"
"""


@dataclass(frozen=True)
class Case:
    """What is read, and the file of it that is spoilt.

    A `result` folder is read and applied to new objects; with `mended`, the recorded
    SHA-256 are made to fit what is spoilt, as whoever means harm would.
    """

    kind: str
    ladder: str
    spoilt: str
    claims: str | None = None
    result: str | None = None
    mended: bool = False


def write_corpus(folder: Path) -> list[Case]:
    """Write all files; the cases that use them."""
    samples = tables()
    for key, name in (
        ("anchors.parallaxes", "parallax_stars"),
        ("supernovae", "supernovae"),
        ("expansion", "flow"),
    ):
        samples[key].to_csv(folder / f"{name}.csv", index=False)
    cases = []
    for form in TABLES:
        _write_table(samples["cepheids"], folder / f"cepheids.{form}")
        plain = choices(tables=True)
        plain["cepheids"]["table"] = f"cepheids.{form}"
        (folder / f"{form}.toml").write_text(tomlkit.dumps(plain))
        cases.append(Case(f"table {form}", f"{form}.toml", f"cepheids.{form}"))
    for form in MATRICES:
        _write_matrix(samples, folder / f"matrix.{form}")
        plain = copy.deepcopy(choices(tables=True))
        plain["supernovae"]["covariance"] = {"file": f"matrix.{form}"}
        (folder / f"matrix-{form}.toml").write_text(tomlkit.dumps(plain))
        cases.append(Case(f"covariance {form}", f"matrix-{form}.toml", f"matrix.{form}"))
    for form in PACKED:
        packed = gzip.compress((folder / f"cepheids.{form}").read_bytes())
        (folder / f"cepheids.{form}.gz").write_bytes(packed)
        plain = choices(tables=True)
        plain["cepheids"]["table"] = f"cepheids.{form}.gz"
        (folder / f"{form}-gz.toml").write_text(tomlkit.dumps(plain))
        cases.append(Case(f"table {form}.gz", f"{form}-gz.toml", f"cepheids.{form}.gz"))
    packed = gzip.compress((folder / "matrix.txt").read_bytes())
    (folder / "matrix.txt.gz").write_bytes(packed)
    plain["supernovae"]["covariance"] = {"file": "matrix.txt.gz"}
    (folder / "matrix-gz.toml").write_text(tomlkit.dumps(plain))
    cases.append(Case("covariance txt.gz", "matrix-gz.toml", "matrix.txt.gz"))
    cases += _write_result(samples, folder)
    (folder / "claims.toml").write_text(CLAIMS)
    cases.append(Case("ladder", "csv.toml", "csv.toml"))
    cases.append(Case("ladder", "matrix-txt.toml", "matrix-txt.toml"))
    cases.append(Case("claims", "csv.toml", "claims.toml", "claims.toml"))
    return cases


def _write_result(samples: dict[str, pd.DataFrame], folder: Path) -> list[Case]:
    """A result folder, and a table of new Cepheids for it."""
    new = samples["cepheids"].head(12).assign(Galaxy="New")
    new["ID"] = [f"N{place}" for place in range(len(new))]
    new.to_csv(folder / "new.csv", index=False)
    (folder / "result").mkdir()
    result = lf.draw(lf.read_ladder(folder / "csv.toml"), seed=1, draws=200)
    write_result(result, folder / "result")
    return [
        Case("result", "csv.toml", f"result/{name}", result="result", mended=mended)
        for name in RESULT
        for mended in ((False, True) if name in RESULT[2:] else (False,))
    ]


def _write_table(frame: pd.DataFrame, path: Path) -> None:
    if path.suffix == ".csv":
        frame.to_csv(path, index=False)
        return
    if path.suffix == ".parquet":
        frame.to_parquet(path, index=False)
        return
    table = Table.from_pandas(frame)
    for name, unit in _UNITS.items():
        table[name].unit = unit
    if path.suffix == ".vot":
        table.write(path, format="votable", tabledata_format="binary")
    else:
        table.write(path, format={".ecsv": "ascii.ecsv", ".fits": "fits"}[path.suffix])


def _write_matrix(samples: dict[str, pd.DataFrame], path: Path) -> None:
    errors = np.concatenate([samples[key]["e_mB"] for key in ("supernovae", "expansion")])
    matrix = np.diag(errors**2) + 1e-4
    if path.suffix == ".txt":
        path.write_text("\n".join([str(len(matrix)), *map(str, matrix.ravel())]) + "\n")
    elif path.suffix == ".npy":
        np.save(path, matrix)
    else:
        fits.writeto(path, matrix)
