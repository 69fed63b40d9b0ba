"""Small ladders in memory, from an invented scenario, for tests to build on."""

from __future__ import annotations

import copy
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

HOSTS = ("Tavin", "Orrel", "Q07")

CHOICES: dict[str, Any] = {
    "title": "Small ladder",
    "cepheids": {
        "columns": {
            "star": "ID",
            "host": "Galaxy",
            "period": "P",
            "metallicity": "OH",
            "mode": "Mode",
        },
        "periods": [5.0, 100.0],
        "magnitude": {
            "wesenheit": {"band": "H", "colour": ["V", "I"], "ratio": 0.386},
            "bands": {"H": "Hmag", "V": "Vmag", "I": "Imag"},
            "errors": {"H": "e_H", "V": "e_V", "I": "e_I"},
        },
    },
    "relation": {
        "pivot": 10.0,
        "metallicity": {"reference": 8.69, "scale": "12+log(O/H)"},
    },
    "anchors": {
        "geometric": {
            "Tavin": {"modulus": 18.49, "error": 0.025},
            "Orrel": {"modulus": 29.4, "error": 0.03, "use": False},
        },
        "parallaxes": {
            "columns": {
                "star": "ID",
                "period": "P",
                "metallicity": "OH",
                "mode": "Mode",
                "parallax": "plx",
                "parallax_error": "e_plx",
            },
        },
    },
    "supernovae": {
        "columns": {"name": "SN", "host": "Galaxy", "peak": "mB", "peak_error": "e_mB"},
    },
    "expansion": {
        "columns": {"name": "SN", "redshift": "zcmb", "peak": "mB", "peak_error": "e_mB"},
    },
}


def choices(*, tables: bool = False) -> dict[str, Any]:
    """A copy of the choices; with the names of the files that `write_tables` writes if asked."""
    plain = copy.deepcopy(CHOICES)
    if tables:
        plain["cepheids"] = {"table": "cepheids.csv", **plain["cepheids"]}
        stars = plain["anchors"]["parallaxes"]
        plain["anchors"]["parallaxes"] = {"table": "parallax_stars.csv", **stars}
        plain["supernovae"] = {"table": "supernovae.csv", **plain["supernovae"]}
        plain["expansion"] = {"table": "flow.csv", **plain["expansion"]}
    return plain


def _stars(rng: np.random.Generator, count: int) -> pd.DataFrame:
    log_period = rng.uniform(0.8, 1.8, count)
    metallicity = rng.normal(8.7, 0.15, count)
    index = -5.9 - 3.3 * (log_period - 1.0) - 0.2 * (metallicity - 8.69)
    index += rng.normal(0.0, 0.07, count)
    colour = 0.9 + rng.normal(0.0, 0.1, count)
    return pd.DataFrame(
        {
            "P": 10.0**log_period,
            "OH": metallicity,
            "Mode": ["F"] * count,
            "Hmag": index + 0.386 * colour,
            "Vmag": index + 1.0 + colour,
            "Imag": index + 1.0,
            "e_H": np.full(count, 0.05),
            "e_V": np.full(count, 0.02),
            "e_I": np.full(count, 0.02),
        }
    )


def tables(seed: int = 5) -> dict[str, pd.DataFrame]:
    """Tables by section: 3 hosts of 12 Cepheids, 8 parallax stars, 3 supernovae, 20 in the flow."""
    rng = np.random.default_rng(seed)
    cepheids = _stars(rng, 36)
    host = np.repeat(HOSTS, 12)
    modulus = np.repeat([18.49, 29.4, 31.0], 12)
    for band in ("Hmag", "Vmag", "Imag"):
        cepheids[band] += modulus
    cepheids.insert(0, "ID", [f"{name}-{i:03d}" for i, name in enumerate(host, start=1)])
    cepheids.insert(1, "Galaxy", host)
    stars = _stars(rng, 8)
    distance = rng.uniform(0.5, 3.0, 8)
    for band in ("Hmag", "Vmag", "Imag"):
        stars[band] += 10.0 + 5.0 * np.log10(distance)
    stars.insert(0, "ID", [f"S{i:02d}" for i in range(1, 9)])
    stars["plx"] = 1.0 / distance + rng.normal(0.0, 0.02, 8)
    stars["e_plx"] = np.full(8, 0.02)
    supernovae = pd.DataFrame(
        {
            "SN": ["2091a", "2091b", "2093c"],
            "Galaxy": ["Orrel", "Q07", "Q07"],
            "mB": [10.1, 11.7, 11.75],
            "e_mB": [0.1, 0.1, 0.12],
        }
    )
    redshift = rng.uniform(0.025, 0.14, 20)
    flow = pd.DataFrame(
        {
            "SN": [f"F{i:02d}" for i in range(20)],
            "zcmb": redshift,
            "mB": -19.3 + 25.0 + 5.0 * np.log10(299_792.458 * redshift / 70.0),
            "e_mB": np.full(20, 0.1),
        }
    )
    return {
        "cepheids": cepheids,
        "anchors.parallaxes": stars,
        "supernovae": supernovae,
        "expansion": flow,
    }


def write_tables(folder: Path, given: dict[str, pd.DataFrame] | None = None) -> None:
    """Write the tables as CSV under the names that `choices(tables=True)` uses."""
    names = ("cepheids", "parallax_stars", "supernovae", "flow")
    for name, table in zip(names, (given or tables()).values(), strict=True):
        table.to_csv(folder / f"{name}.csv", index=False)
