"""Simulated surveys of the sample's plan, with some hosts held out of the fit."""

from __future__ import annotations

import copy
import tomllib
from dataclasses import dataclass
from typing import Any

import numpy as np
from astropy.table import Table

from ladderfit.ladder import Ladder, build_ladder
from ladderfit.mock.scenario import PLAN
from ladderfit.mock.survey import simulate
from ladderfit.shipped import sample_ladder

HELD_OUT = ("Brelin", "Fenoru", "Kelmora", "Oltrave", "Vestow")  # near to far, 15 to 150 stars


@dataclass(frozen=True)
class Survey:
    """A ladder without some hosts, their tables, and their true moduli."""

    ladder: Ladder
    cepheids: Table
    supernovae: Table
    truth: dict[str, float]
    whole: Ladder


def choices(anchors: dict[str, tuple[float, float]]) -> dict[str, Any]:
    plain = copy.deepcopy(tomllib.loads(sample_ladder().read_text("utf-8")))
    for section in (
        plain["cepheids"],
        plain["anchors"]["parallaxes"],
        plain["supernovae"],
        plain["expansion"],
    ):
        del section["table"]
    del plain["cepheids"]["set_aside"], plain["alternatives"]
    plain["anchors"]["geometric"] = {
        host: {"modulus": modulus, "error": error} for host, (modulus, error) in anchors.items()
    }
    return plain


def survey(seed: int, held_out: tuple[str, ...] = HELD_OUT) -> Survey:
    """One survey; the same seed gives the same tables."""
    mock = simulate(PLAN, np.random.default_rng([20261201, seed]))
    out = np.isin(mock.cepheids["Galaxy"], held_out)
    out_peaks = np.isin(mock.supernovae["Galaxy"], held_out)
    plain = choices(mock.anchors)
    others = {"anchors.parallaxes": mock.parallax_stars, "expansion": mock.flow}
    kept = {"cepheids": mock.cepheids[~out], "supernovae": mock.supernovae[~out_peaks]}
    whole = {"cepheids": mock.cepheids, "supernovae": mock.supernovae}
    return Survey(
        build_ladder(plain, {**kept, **others}),
        mock.cepheids[out],
        mock.supernovae[out_peaks],
        {host: mock.truth[f"modulus[{host}]"] for host in held_out},
        build_ladder(plain, {**whole, **others}),
    )
