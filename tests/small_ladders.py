"""Small ladders in memory, one for each combination of rungs and priors worth proving.

Galaxies are invented and the data are drawn from `TRUTH`.  `SMALL` names every
ladder; `small_ladder` builds one, the same on every call.
"""

from __future__ import annotations

import copy
import functools
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import pandas as pd

from ladderfit.ladder import Ladder, build_ladder

TRUTH = {
    "slope": -3.28,
    "zero_point": -5.93,
    "metallicity": -0.21,
    "scatter": 0.08,
    "parallax_offset": -0.01,
    "peak_magnitude": -19.27,
    "peak_scatter": 0.11,
    "hubble_constant": 71.0,
    "velocity_constant": -60.0,
    "velocity_scatter": 150.0,
}
MODULI = {"Tavin": 18.5, "Orrel": 29.4, "Q07": 30.6, "Bresk": 31.2, "Meril": 30.1}
ANCHORS = {"Tavin": 0.025, "Orrel": 0.035, "Meril": 0.05}  # errors of the geometric moduli
LIGHT = 299_792.458  # km/s

Options = Mapping[str, Any]
Made = tuple[dict[str, Any], dict[str, pd.DataFrame]]
Make = Callable[[np.random.Generator, Options], Made]
Tables = dict[str, pd.DataFrame]

_MAGNITUDE = {"band": "W", "bands": {"W": "W"}, "errors": {"W": "e_W"}}
_STAR = {"star": "ID", "period": "P", "metallicity": "OH"}
_PEAK = {"peak": "mB", "peak_error": "e_mB"}
_METALS = {"reference": 8.69, "scale": "12+log(O/H)"}


@functools.cache
def small_ladder(name: str, seed: int = 0) -> Ladder:
    """One of `SMALL`, built once."""
    make, options = SMALL[name]
    choices, tables = make(np.random.default_rng(701 + seed), TRUTH | options.get("truth", {}))
    choices["priors"] = {**choices.get("priors", {}), **options.get("priors", {})}
    return build_ladder(choices, tables).change(options.get("change", {}))


def stars(rng: np.random.Generator, modulus: np.ndarray, truth: Options) -> pd.DataFrame:
    """Stars at true moduli, shape (n,); observed index W with errors of 0.04 to 0.12 mag."""
    n = len(modulus)
    log_period, metals = rng.uniform(0.75, 1.75, n), rng.normal(8.7, 0.2, n)
    error = rng.uniform(0.04, 0.12, n)
    index = truth["zero_point"] + truth["slope"] * (log_period - 1.0)
    index += truth["metallicity"] * (metals - 8.69) + truth["scatter"] * rng.normal(size=n)
    return pd.DataFrame(
        {
            "ID": [f"S{i:03d}" for i in range(n)],
            "P": 10.0**log_period,
            "OH": metals,
            "W": modulus + index + error * rng.normal(size=n),
            "e_W": error,
        }
    )


def parallax_stars(
    rng: np.random.Generator, signal: np.ndarray, truth: Options, nearest: float = 7.0
) -> pd.DataFrame:
    """Stars of a given true parallax over its error, shape (n,); moduli up to 6 mag farther."""
    modulus = rng.uniform(nearest, nearest + 6.0, len(signal))
    table = stars(rng, modulus, truth)
    parallax = 10.0 ** (2.0 - 0.2 * modulus)
    error = parallax / signal
    table["plx"] = parallax + truth["parallax_offset"] + error * rng.normal(size=len(signal))
    table["e_plx"] = error
    return table


def _cepheids(rng: np.random.Generator, counts: Mapping[str, int], truth: Options) -> pd.DataFrame:
    host = np.repeat(list(counts), list(counts.values()))
    table = stars(rng, np.array([MODULI[name] for name in host]), truth)
    table.insert(1, "Galaxy", host)
    return table


def _peaks(rng: np.random.Generator, where: tuple[str, ...], truth: Options) -> pd.DataFrame:
    error = rng.uniform(0.05, 0.12, len(where))
    width = np.hypot(error, truth["peak_scatter"])
    mean = np.array([MODULI[name] for name in where]) + truth["peak_magnitude"]
    return pd.DataFrame(
        {
            "SN": [f"P{i}" for i in range(len(where))],
            "Galaxy": where,
            "mB": mean + width * rng.normal(size=len(where)),
            "e_mB": error,
        }
    )


def _flow(rng: np.random.Generator, n: int, truth: Options) -> pd.DataFrame:
    z = rng.uniform(0.025, 0.14, n)
    heliocentric = z + rng.uniform(-1e-3, 1e-3, n)
    error = rng.uniform(0.06, 0.12, n)
    width = np.sqrt(error**2 + truth["peak_scatter"] ** 2 + (2.17 * 250.0 / LIGHT / z) ** 2)
    distance = LIGHT * z * (1.0 + 0.775 * z) * (1.0 + heliocentric) / (1.0 + z)
    mean = truth["peak_magnitude"] + 25.0 + 5.0 * np.log10(distance / truth["hubble_constant"])
    return pd.DataFrame(
        {
            "SN": [f"F{i}" for i in range(n)],
            "zcmb": z,
            "zhel": heliocentric,
            "mB": mean + width * rng.normal(size=n),
            "e_mB": error,
        }
    )


def _relation(*, metals: bool = True) -> dict[str, Any]:
    return {"pivot": 10.0, "metallicity": _METALS if metals else "none"}


def _geometric(rng: np.random.Generator, *hosts: str) -> dict[str, Any]:
    return {
        host: {"modulus": MODULI[host] + ANCHORS[host] * rng.normal(), "error": ANCHORS[host]}
        for host in hosts
    }


def _with_cepheids(
    rng: np.random.Generator, truth: Options, counts: Mapping[str, int], *, metals: bool = True
) -> tuple[dict[str, Any], Tables]:
    anchors = [host for host in counts if host in ANCHORS]
    choices: dict[str, Any] = {
        "cepheids": {"columns": {**_STAR, "host": "Galaxy"}, "magnitude": _MAGNITUDE},
        "relation": _relation(metals=metals),
        "anchors": {"geometric": _geometric(rng, *anchors)},
    }
    return choices, {"cepheids": _cepheids(rng, counts, truth)}


def _add_parallaxes(
    choices: dict[str, Any],
    tables: Tables,
    rng: np.random.Generator,
    truth: Options,
    signal: np.ndarray | None = None,
) -> None:
    signal = np.geomspace(60.0, 4.0, 12) if signal is None else signal
    section = {"columns": {**_STAR, "parallax": "plx", "parallax_error": "e_plx"}}
    if "cepheids" not in choices:
        section["magnitude"] = copy.deepcopy(_MAGNITUDE)
    choices.setdefault("anchors", {})["parallaxes"] = section
    tables["anchors.parallaxes"] = parallax_stars(rng, signal, truth)


def _add_peaks(
    choices: dict[str, Any],
    tables: Tables,
    rng: np.random.Generator,
    truth: Options,
    where: tuple[str, ...],
) -> None:
    choices["supernovae"] = {"columns": {"name": "SN", "host": "Galaxy", **_PEAK}}
    tables["supernovae"] = _peaks(rng, where, truth)


def _add_flow(
    choices: dict[str, Any], tables: Tables, rng: np.random.Generator, truth: Options
) -> None:
    columns = {"name": "SN", "redshift": "zcmb", "redshift_heliocentric": "zhel", **_PEAK}
    choices["expansion"] = {"columns": columns}
    tables["expansion"] = _flow(rng, 24, truth)


def _parallaxes(rng: np.random.Generator, truth: Options) -> Made:
    choices: dict[str, Any] = {"relation": _relation()}
    tables: Tables = {}
    _add_parallaxes(choices, tables, rng, truth)
    return choices, tables


def _faint_parallaxes(rng: np.random.Generator, truth: Options) -> Made:
    """Measured at 200 sigma to 0.5 sigma, and two that are negative."""
    choices: dict[str, Any] = {"relation": _relation()}
    tables: Tables = {}
    _add_parallaxes(choices, tables, rng, truth, np.geomspace(200.0, 0.5, 12))
    table = tables["anchors.parallaxes"]
    rows, signal = [0, 8, 10, 11], np.array([200.0, -1.0, 0.5, -2.5])
    table.loc[rows, "plx"] = signal * table["e_plx"].to_numpy()[rows]
    return choices, tables


def _one_anchor(rng: np.random.Generator, truth: Options) -> Made:
    return _with_cepheids(rng, truth, {"Tavin": 25}, metals=False)


def _anchors(rng: np.random.Generator, truth: Options) -> Made:
    return _with_cepheids(rng, truth, {"Q07": 12, "Tavin": 16, "Orrel": 14})


def _many_stars(rng: np.random.Generator, truth: Options) -> Made:
    """So many that the sums over stars are tabulated."""
    return _with_cepheids(rng, truth, {"Tavin": 90, "Orrel": 70, "Q07": 60})


def _anchors_and_parallaxes(rng: np.random.Generator, truth: Options) -> Made:
    choices, tables = _anchors(rng, truth)
    _add_parallaxes(choices, tables, rng, truth)
    return choices, tables


def _up_to_peaks(rng: np.random.Generator, truth: Options) -> Made:
    """One host has an anchor and a supernova and no Cepheid, one no supernova."""
    counts = {"Bresk": 8, "Tavin": 16, "Q07": 12, "Orrel": 14}
    choices, tables = _with_cepheids(rng, truth, counts)
    choices["anchors"]["geometric"] |= _geometric(rng, "Meril")
    _add_peaks(choices, tables, rng, truth, ("Q07", "Meril", "Bresk", "Orrel", "Q07"))
    return choices, tables


def _with_intercept(rng: np.random.Generator, truth: Options) -> Made:
    choices, tables = _up_to_peaks(rng, truth)
    value = np.log10(truth["hubble_constant"]) - 0.2 * truth["peak_magnitude"] - 5.0
    choices["expansion"] = {"intercept": {"value": value + 0.003 * rng.normal(), "error": 0.003}}
    return choices, tables


def _with_flow(rng: np.random.Generator, truth: Options) -> Made:
    choices, tables = _up_to_peaks(rng, truth)
    _add_flow(choices, tables, rng, truth)
    return choices, tables


def _all_rungs(rng: np.random.Generator, truth: Options) -> Made:
    choices, tables = _with_flow(rng, truth)
    _add_parallaxes(choices, tables, rng, truth)
    return choices, tables


def _without_cepheids(rng: np.random.Generator, truth: Options) -> Made:
    hosts = ("Orrel", "Meril", "Tavin")
    choices: dict[str, Any] = {"anchors": {"geometric": _geometric(rng, *hosts)}}
    tables: Tables = {}
    _add_peaks(choices, tables, rng, truth, ("Meril", "Orrel", "Meril", "Tavin"))
    _add_flow(choices, tables, rng, truth)
    return choices, tables


def _expansion_alone(rng: np.random.Generator, truth: Options) -> Made:
    choices: dict[str, Any] = {"priors": {"peak_magnitude": {"normal": [-19.25, 0.05]}}}
    tables: Tables = {}
    _add_flow(choices, tables, rng, truth)
    return choices, tables


def _velocities(rng: np.random.Generator, truth: Options) -> Made:
    distance = rng.uniform(2.0, 25.0, 20)
    mean = truth["velocity_constant"] + truth["hubble_constant"] * distance
    table = pd.DataFrame(
        {
            "name": [f"G{i}" for i in range(20)],
            "d": distance,
            "v": mean + truth["velocity_scatter"] * rng.normal(size=20),
        }
    )
    columns = {"name": "name", "distance": "d", "velocity": "v"}
    return {"expansion": {"columns": columns, "velocity_constant": True}}, {"expansion": table}


_VOLUME = {
    "hosts.distance_prior": "uniform in volume",
    "anchors.parallaxes.distance_prior": "uniform in volume",
}

SMALL: dict[str, tuple[Make, Options]] = {
    "parallaxes": (_parallaxes, {}),
    "faint parallaxes": (_faint_parallaxes, {}),
    "one anchor": (_one_anchor, {}),
    "anchors": (_anchors, {}),
    "many stars": (_many_stars, {}),
    "anchors and parallaxes": (_anchors_and_parallaxes, {}),
    "up to the peaks": (_up_to_peaks, {}),
    "intercept": (_with_intercept, {}),
    "flow": (_with_flow, {}),
    "all rungs": (_all_rungs, {}),
    "uniform in volume": (_all_rungs, {"change": _VOLUME}),
    "hosts in volume": (_anchors, {"change": {"hosts.distance_prior": "uniform in volume"}}),
    "no Cepheids": (_without_cepheids, {}),
    "expansion alone": (_expansion_alone, {}),
    "velocities": (_velocities, {}),
    "zero scatter": (_anchors, {"truth": {"scatter": 0.0}}),
    "zero scatters": (_all_rungs, {"truth": {"scatter": 0.0, "peak_scatter": 0.0}}),
    "uniform slope": (_anchors, {"priors": {"slope": {"uniform": [-3.45, -2.9]}}}),
    "slope at a bound": (_anchors, {"priors": {"slope": {"uniform": [-3.25, -2.9]}}}),
    "fixed slope": (_anchors_and_parallaxes, {"priors": {"slope": {"fixed": -3.3}}}),
    "fixed metallicity": (_with_flow, {"priors": {"metallicity": {"fixed": -0.2}}}),
    "fixed scatter": (_anchors, {"priors": {"scatter": {"fixed": 0.08}}}),
    "fixed scatter and offset": (
        _anchors_and_parallaxes,
        {"priors": {"scatter": {"fixed": 0.08}, "parallax_offset": {"fixed": 0.0}}},
    ),
    "uniform Hubble constant": (
        _with_flow,
        {"priors": {"hubble_constant": {"uniform": [60.0, 76.0]}}},
    ),
    "normal Hubble constant": (
        _with_intercept,
        {"priors": {"hubble_constant": {"normal": [70.0, 3.0]}}},
    ),
    "fixed Hubble constant": (_with_flow, {"priors": {"hubble_constant": {"fixed": 71.0}}}),
    "other scatter priors": (
        _all_rungs,
        {
            "priors": {
                "scatter": {"uniform": [0.0, 0.4]},
                "peak_scatter": {"log_normal": [0.1, 1.5]},
            }
        },
    ),
}
