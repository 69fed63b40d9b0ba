"""Ladders of any size for the benchmarks, from known truth, in memory."""

from __future__ import annotations

import copy
from typing import Any

import numpy as np
import pandas as pd

from ladderfit.ladder import Ladder, build_ladder
from ladderfit.physics.expansion import distance_term

TRUTH = {
    "slope": -3.28,
    "zero_point": -5.93,
    "metallicity": -0.21,
    "scatter": 0.08,
    "parallax_offset": -0.012,
    "peak_magnitude": -19.27,
    "peak_scatter": 0.11,
    "hubble_constant": 71.3,
}

CHOICES = {
    "cepheids": {
        "columns": {"star": "ID", "host": "Galaxy", "period": "P", "metallicity": "OH"},
        "magnitude": {"band": "W", "bands": {"W": "W"}, "errors": {"W": "e_W"}},
    },
    "relation": {"metallicity": {"reference": 8.69, "scale": "12+log(O/H)"}},
    "anchors": {
        "geometric": {
            "Host00": {"modulus": 18.49, "error": 0.025},
            "Host01": {"modulus": 29.4, "error": 0.032},
        },
        "parallaxes": {
            "columns": {
                "star": "ID",
                "period": "P",
                "metallicity": "OH",
                "parallax": "plx",
                "parallax_error": "e_plx",
            }
        },
    },
    "supernovae": {"columns": {"name": "SN", "host": "Galaxy", "peak": "mB", "peak_error": "e_mB"}},
    "expansion": {"columns": {"name": "SN", "redshift": "z", "peak": "mB", "peak_error": "e_mB"}},
}


def reference_tables(
    cepheids: int = 3040,
    hosts: int = 38,
    parallax_stars: int = 75,
    supernovae: int = 42,
    flow: int = 280,
    seed: int = 1,
) -> tuple[dict[str, Any], dict[str, Any]]:
    """Choices and tables of a whole ladder with the given numbers of objects."""
    rng = np.random.default_rng(seed)
    moduli = np.concatenate([[18.49, 29.4], np.linspace(29.0, 33.0, hosts - 2)])
    tables = {
        "cepheids": _stars(rng, np.sort(rng.integers(0, hosts, cepheids)), moduli),
        "anchors.parallaxes": _parallaxes(rng, parallax_stars),
        "supernovae": _peaks(rng, supernovae, moduli),
        "expansion": _flow(rng, flow),
    }
    return copy.deepcopy(CHOICES), tables


def reference_ladder(**numbers: int) -> Ladder:
    """The ladder of `reference_tables`."""
    return build_ladder(*reference_tables(**numbers))


def _photometry(
    rng: np.random.Generator, modulus: np.ndarray, smallest: float, largest: float
) -> dict[str, np.ndarray]:
    n = len(modulus)
    log_period, metals = rng.uniform(0.7, 1.9, n), rng.normal(8.7, 0.15, n)
    error = np.exp(rng.uniform(np.log(smallest), np.log(largest), n))
    magnitude = (
        modulus
        + TRUTH["zero_point"]
        + TRUTH["slope"] * (log_period - 1.0)
        + TRUTH["metallicity"] * (metals - 8.69)
        + rng.normal(size=n) * np.hypot(error, TRUTH["scatter"])
    )
    return {"P": 10.0**log_period, "OH": metals, "W": magnitude, "e_W": error}


def _stars(rng: np.random.Generator, host: np.ndarray, moduli: np.ndarray) -> pd.DataFrame:
    columns = _photometry(rng, moduli[host], 0.01, 0.5)
    names = {"ID": [f"C{i}" for i in range(len(host))], "Galaxy": [f"Host{h:02d}" for h in host]}
    return pd.DataFrame(names | columns)


def _parallaxes(rng: np.random.Generator, n: int) -> pd.DataFrame:
    modulus = rng.uniform(9.0, 13.0, n)
    columns = _photometry(rng, modulus, 0.01, 0.03)
    error = rng.uniform(0.015, 0.03, n)
    true = 10.0 ** (2.0 - 0.2 * modulus)
    columns["plx"] = true + TRUTH["parallax_offset"] + rng.normal(size=n) * error
    columns["e_plx"] = error
    return pd.DataFrame({"ID": [f"M{i}" for i in range(n)]} | columns)


def _peaks(rng: np.random.Generator, n: int, moduli: np.ndarray) -> pd.DataFrame:
    host = 2 + np.arange(n) % (len(moduli) - 2)
    error = rng.uniform(0.04, 0.12, n)
    peak = moduli[host] + TRUTH["peak_magnitude"]
    peak += rng.normal(size=n) * np.hypot(error, TRUTH["peak_scatter"])
    names = {"SN": [f"N{i}" for i in range(n)], "Galaxy": [f"Host{h:02d}" for h in host]}
    return pd.DataFrame(names | {"mB": peak, "e_mB": error})


def _flow(rng: np.random.Generator, n: int) -> pd.DataFrame:
    z = rng.uniform(0.025, 0.145, n)
    error = rng.uniform(0.04, 0.12, n)
    moved = 5.0 / np.log(10.0) * 250.0 / (299_792.458 * z)
    term = distance_term(z, z, -0.55, 1.0) - 5.0 * np.log10(TRUTH["hubble_constant"])
    scatter = np.sqrt(error**2 + moved**2 + TRUTH["peak_scatter"] ** 2)
    peak = term + TRUTH["peak_magnitude"] + rng.normal(size=n) * scatter
    return pd.DataFrame({"SN": [f"F{i}" for i in range(n)], "z": z, "mB": peak, "e_mB": error})
