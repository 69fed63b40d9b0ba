"""A small good ladder in every format, for the mutations to spoil."""

from __future__ import annotations

import copy
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
import tomlkit
from astropy import units as u
from astropy.io import fits
from astropy.table import Table
from builders import choices, tables

TABLES = ("csv", "ecsv", "fits", "vot", "parquet")
MATRICES = ("txt", "fits", "npy")
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
    """What is read, and the file of it that is spoilt."""

    kind: str
    ladder: str
    spoilt: str
    claims: str | None = None


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
    (folder / "claims.toml").write_text(CLAIMS)
    cases.append(Case("ladder", "csv.toml", "csv.toml"))
    cases.append(Case("ladder", "matrix-txt.toml", "matrix-txt.toml"))
    cases.append(Case("claims", "csv.toml", "claims.toml", "claims.toml"))
    return cases


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
