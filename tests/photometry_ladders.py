"""Small ladders in V, I and H, and their densities written out with one covariance.

Every band has its own noise, so that a band that stands in magnitude and colour
correlates the two.  `dense` knows no index: it writes the joint covariance of all
measured magnitudes and colours at given values of phi.
"""

from __future__ import annotations

import copy
from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd
from oracles import dense_log_evidence

from ladderfit.ladder import Ladder, build_ladder
from ladderfit.posterior.joint import posterior

MODULI = {"Tavin": 18.5, "Orrel": 24.0, "Q07": 25.1}
TRUTH = {
    "zero_point": -5.9,
    "slope": -3.3,
    "metallicity": -0.2,
    "scatter": 0.08,
    "reddening_ratio": 0.386,
    "intrinsic_colour_slope": 0.26,
    "intrinsic_colour_scatter": 0.08,
    "intrinsic_colour_term": 0.2,
    "reddening_spread": 0.15,
    "parallax_colour": 1.2,
    "parallax_reddening_spread": 0.3,
    "shared_photometry[sky]": 0.1,
    "parallax_offset": -0.01,
    "metallicity_spread": 0.12,
    "parallax_metallicity": 0.05,
}
WIDTH = {"intrinsic_colour_scatter": 0.01, "scatter": 0.02, "shared_photometry[sky]": 0.03}
BANDS = {"V": "V", "I": "I", "H": "H"}
ERRORS = {"V": "e_V", "I": "e_I", "H": "e_H"}
INDICES = {
    "apart": {"band": "H", "colour": ["V", "I"], "ratio": 0.386},
    "band in the colour": {"band": "I", "colour": ["V", "I"], "ratio": 1.55},
    "blue band": {"band": "V", "colour": ["V", "I"], "ratio": 2.55},
    "a colour column": {"band": "H", "colour": "VI", "ratio": 0.386},
}
FARTHEST = 50.0  # mag
REFERENCE, PIVOT = 8.69, 10.0


def tables(seed: int, stars: int = 7, parallaxes: int = 0) -> dict[str, pd.DataFrame]:
    rng = np.random.default_rng(seed)
    host = np.repeat(list(MODULI), stars)
    found = {"cepheids": _stars(rng, np.array([MODULI[name] for name in host]))}
    found["cepheids"].insert(1, "Galaxy", host)
    if parallaxes:
        modulus = rng.uniform(8.0, 13.0, parallaxes)
        table = _stars(rng, modulus)
        error = 10.0 ** (2.0 - 0.2 * modulus) / rng.uniform(3.0, 40.0, parallaxes)
        table["plx"] = 10.0 ** (2.0 - 0.2 * modulus) + error * rng.normal(size=parallaxes)
        table["e_plx"] = error
        found["anchors.parallaxes"] = table
    return found


def _stars(rng: np.random.Generator, modulus: np.ndarray) -> pd.DataFrame:
    n, value = len(modulus), TRUTH
    x, metals = rng.uniform(-0.3, 0.7, n), rng.normal(8.7, 0.15, n)
    deviation = value["intrinsic_colour_scatter"] * rng.normal(size=n)
    colour = 0.75 + value["intrinsic_colour_slope"] * x + deviation
    colour = colour + rng.normal(0.3, value["reddening_spread"], n)
    index = value["zero_point"] + value["slope"] * x + value["metallicity"] * (metals - REFERENCE)
    index = index + value["scatter"] * rng.normal(size=n) + modulus
    bands = {"H": index + value["reddening_ratio"] * colour + 0.2 * deviation}
    bands["I"] = bands["H"] + 1.0
    bands["V"] = bands["I"] + colour
    columns: dict[str, Any] = {"ID": [f"S{i:03d}" for i in range(n)], "P": 10.0 ** (1.0 + x)}
    columns["OH"], columns["e_OH"] = metals, rng.uniform(0.03, 0.15, n)
    columns["e_P"] = columns["P"] * rng.uniform(0.005, 0.05, n)
    for band, true in bands.items():
        columns[f"e_{band}"] = rng.uniform(0.03, 0.12, n)
        columns[band] = true + columns[f"e_{band}"] * rng.normal(size=n)
    columns["VI"] = columns["V"] - columns["I"]
    columns["e_VI"] = np.hypot(columns["e_V"], columns["e_I"])
    columns["sky"] = rng.uniform(0.0, 2.0, n)
    return pd.DataFrame(columns)


def choices(index: str = "apart", *, parallaxes: bool = False) -> dict[str, Any]:
    star = {"star": "ID", "period": "P", "metallicity": "OH"}
    magnitude = {
        "wesenheit": INDICES[index],
        "bands": {**BANDS, "VI": "VI"},
        "errors": {**ERRORS, "VI": "e_VI"},
    }
    found: dict[str, Any] = {
        "cepheids": {"columns": {**star, "host": "Galaxy"}, "magnitude": magnitude},
        "relation": {"metallicity": {"reference": REFERENCE, "scale": "12+log(O/H)"}},
        "anchors": {"geometric": {"Tavin": {"modulus": 18.49, "error": 0.03}}},
    }
    if parallaxes:
        columns = {**star, "parallax": "plx", "parallax_error": "e_plx"}
        found["anchors"]["parallaxes"] = {"columns": columns}
    return copy.deepcopy(found)


def ladder(
    seed: int,
    changes: Mapping[str, Any],
    *,
    index: str = "apart",
    stars: int = 7,
    parallaxes: int = 0,
) -> Ladder:
    made = tables(seed, stars, parallaxes)
    return build_ladder(choices(index, parallaxes=parallaxes > 0), made).change(changes)


def points(found: Ladder, seed: int, count: int = 4) -> list[dict[str, float]]:
    """Values of phi near where they may be."""
    rng = np.random.default_rng(seed)
    names = posterior(found).split.phi_names
    return [
        {n: TRUTH[n] + WIDTH.get(n, 0.1 * abs(TRUTH[n])) * rng.normal() for n in names}
        for _ in range(count)
    ]


def dense(found: Ladder, value: Mapping[str, float]) -> float:
    """Log density of the Cepheids and anchors given phi, priors of phi left out."""
    stars, light = found.cepheids, found.cepheids.photometry
    n, hosts = len(stars), len(found.hosts)
    treatment = found.choices.relation.reddening
    population = treatment != "fixed" and treatment.population
    shared = found.choices.cepheids.shared
    x = stars.log_period - 1.0
    at_host = np.array([x[stars.host == h].mean() for h in range(hosts)])[stars.host]
    member = (stars.host[:, None] == np.arange(hosts)).astype(float)
    ratio = value.get("reddening_ratio", found.choices.cepheids.magnitude.wesenheit.ratio)
    ones = {"zero_point": np.ones(n), "slope": x, "metallicity": stars.metallicity - REFERENCE}
    split = posterior(found).split
    mean, sd, columns = [], [], []

    def add(prior: tuple[float, float], of_m: np.ndarray, of_c: np.ndarray) -> None:
        mean.append(prior[0]), sd.append(prior[1])
        columns.append(np.concatenate([of_m, of_c] if population else [of_m]))

    known = np.zeros(2 * n if population else n)
    for name, column in ones.items():
        if name in split.phi_names:
            known[:n] += value[name] * column
        else:
            prior = found.choices.prior(name)
            add((prior.mean, prior.deviation), column, np.zeros(n))
    if population:
        prior = found.choices.prior("intrinsic_colour_slope")
        if "intrinsic_colour_slope" in split.phi_names:
            slope = value["intrinsic_colour_slope"] * (x - at_host)
            known += np.concatenate([ratio * slope, slope])
        else:
            add((prior.mean, prior.deviation), ratio * (x - at_host), x - at_host)
        for h in range(hosts):
            add((1.0, 3.0), ratio * member[:, h], member[:, h])
    for place, name in enumerate(shared):
        for h in range(hosts):
            load = stars.loadings[:, place] * member[:, h]
            add((0.0, value[f"shared_photometry[{name}]"]), load, np.zeros(n))
    y = light.band if population else light.band - ratio * light.colour
    sums = _variance(found, value, ratio)
    covariance = np.diag(sums["mm"])
    if population:
        cross = np.diag(sums["mc"])
        covariance = np.block([[covariance, cross], [cross, np.diag(sums["cc"])]])
        y = np.concatenate([y, light.colour])
    data = len(y)
    host = np.full(data, -1)
    host[:n] = stars.host
    whole = np.array(columns).reshape(-1, data).T
    anchors = found.geometric
    host = np.concatenate([host, [a.host for a in anchors]]).astype(int)
    y = np.concatenate([y - known, [a.modulus for a in anchors]])
    whole = np.vstack([whole, np.zeros((len(anchors), whole.shape[1]))])
    full = np.zeros((len(y), len(y)))
    full[:data, :data] = covariance
    for place, anchor in enumerate(anchors, start=data):
        full[place, place] = anchor.error**2
    total = dense_log_evidence(host, whole, y, full, hosts, mean, sd)
    return total - hosts * np.log(FARTHEST)


def _variance(found: Ladder, value: Mapping[str, float], ratio: float) -> dict[str, np.ndarray]:
    """Variances and covariance of magnitude and colour (or of the index, without populations)."""
    stars, treatment = found.cepheids, found.choices.relation.reddening
    light, t2 = stars.photometry, value["scatter"] ** 2
    weights = found.choices.cepheids.magnitude.wesenheit
    if treatment == "fixed" or not treatment.population:
        noise = light.band_variance - 2.0 * ratio * light.covariance
        return {"mm": noise + ratio**2 * light.colour_variance + t2}
    del weights
    dust = value["reddening_spread"] ** 2
    tau2 = value["intrinsic_colour_scatter"] ** 2 if treatment.intrinsic else 0.0
    own = ratio + (value["intrinsic_colour_term"] if treatment.intrinsic else 0.0)
    return {
        "mm": light.band_variance + t2 + own**2 * tau2 + ratio**2 * dust,
        "mc": light.covariance + own * tau2 + ratio * dust,
        "cc": light.colour_variance + tau2 + dust,
    }
