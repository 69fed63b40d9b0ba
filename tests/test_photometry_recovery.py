"""Truths of simulated photometry are recovered by the right treatment, and not by naive ones.

What only priors tell (the weight of intrinsic colour, its scatter) is drawn from
them, so that pulls of the right treatment average to zero.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pytest
from photometry_ladders import MODULI, TRUTH, choices, ladder, tables

from ladderfit.errors import InputError
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.mock import mock_from_ladder
from ladderfit.sampling.run import draw

KNOWN = TRUTH | {f"modulus[{host}]": mu for host, mu in MODULI.items()}
FREE = {"relation.reddening": {"colours": "intrinsic relation"}}
NAMES = ("reddening_ratio", "zero_point", "slope")


def pulls(
    base: Ladder, fits: Mapping[str, Mapping[str, Any]], repeats: int, names: tuple[str, ...]
) -> dict[str, dict[str, np.ndarray]]:
    """(mean - truth) / sd by fit and parameter, one per simulation."""
    found: dict[str, dict[str, list[float]]] = {fit: {n: [] for n in names} for fit in fits}
    for seed in range(repeats):
        rng = np.random.default_rng([11, seed])
        truth = KNOWN | {
            "intrinsic_colour_term": 0.3 * rng.normal(),
            "intrinsic_colour_scatter": 0.08 * 10.0 ** (0.1 * rng.normal()),
        }
        if base.cepheids is None:
            truth["scatter"] = abs(0.1 * rng.normal())
        mock = mock_from_ladder(base, truth, rng)
        for fit, changes in fits.items():
            result = draw(mock.change(changes), seed=seed, draws=600)
            for name in names:
                if name in result.draws and result.sd(name) > 0.0:
                    pull = (result.mean(name) - truth[name]) / result.sd(name)
                    found[fit][name].append(pull)
    return {fit: {n: np.array(v) for n, v in by.items() if v} for fit, by in found.items()}


def centred(values: np.ndarray, *, full: bool) -> bool:
    """Mean under 0.2 in full; otherwise as far as so few can tell."""
    return bool(abs(values.mean()) < (0.2 if full else 0.2 + 2.5 / np.sqrt(len(values))))


@pytest.mark.full
def test_ratio_and_zero_point_of_hosts(in_full: bool) -> None:
    """Three hosts of 100 stars; control: the colours' errors in the variance alone."""
    base = ladder(3, {**FREE, "priors.reddening_ratio": {"normal": [0.386, 0.2]}}, stars=100)
    naive = {"relation.reddening.colours": "in the variance"}
    one = {"relation.reddening.colours": "one population"}
    repeats = 100 if in_full else 8
    found = pulls(base, {"right": {}, "one population": one, "naive": naive}, repeats, NAMES)
    for name in NAMES:
        assert centred(found["right"][name], full=in_full), (name, found["right"][name].mean())
    assert found["naive"]["reddening_ratio"].mean() < -2.0
    assert found["naive"]["zero_point"].mean() > 1.2
    if in_full:
        spread = {fit: by["reddening_ratio"].std() for fit, by in found.items()}
        assert spread["right"] < 1.2
        assert spread["one population"] > 1.3  # right on average, and far too sure


@pytest.mark.full
def test_ratio_and_zero_point_of_parallax_stars(in_full: bool) -> None:
    """Eighty stars with parallaxes of 3 to 40 errors, and nothing else."""
    made, plain = tables(3, 5, 80), choices(parallaxes=True)
    section = plain["anchors"]["parallaxes"]
    section["magnitude"] = plain.pop("cepheids")["magnitude"]
    del plain["anchors"]["geometric"], made["cepheids"]
    base = build_ladder(plain, made).change({**FREE, "priors.scatter": {"half_normal": 0.1}})
    repeats = 150 if in_full else 6
    found = pulls(
        base,
        {"right": {}, "naive": {"relation.reddening.colours": "in the variance"}},
        repeats,
        NAMES[:2],
    )
    for name in NAMES[:2]:
        assert centred(found["right"][name], full=in_full), (name, found["right"][name].mean())
    if in_full:
        assert found["naive"]["reddening_ratio"].mean() < -0.4
        assert found["naive"]["zero_point"].mean() > 0.3


@pytest.mark.full
def test_shared_errors(in_full: bool) -> None:
    """Control: without the shared term errors are far too small."""
    base = ladder(3, {"cepheids.shared": {"sky": {"loading": "sky", "error": 0.1}}}, stars=80)
    names = ("zero_point", "modulus[Orrel]", "modulus[Q07]")
    found = pulls(
        base, {"right": {}, "naive": {"cepheids.shared": {}}}, 100 if in_full else 30, names
    )
    for name in names:
        assert centred(found["right"][name], full=in_full), name
        assert found["right"][name].std() < 1.45
        assert found["naive"][name].std() > 2.0


def test_a_free_width_of_shared_errors_is_found() -> None:
    """Its mean over simulations; three hosts say little of it, so the truth is well inside."""
    base, depth = ladder(3, {"cepheids.shared": {"sky": {"loading": "sky"}}}, stars=60), []
    for seed in range(20):
        truth = KNOWN | {"shared_photometry[sky]": abs(0.1 * np.random.default_rng(seed).normal())}
        mock = mock_from_ladder(base, truth, np.random.default_rng([2, seed]))
        draws = draw(mock, seed=seed, draws=500).draws["shared_photometry[sky]"]
        depth.append(np.mean(draws < truth["shared_photometry[sky]"]))
    assert 0.3 < np.mean(depth) < 0.7
    assert np.std(depth) > 0.15


def test_what_the_simulator_does_not_know() -> None:
    found = ladder(3, {"relation.reddening": {"colours": "in the variance"}}, stars=8)
    with pytest.raises(InputError, match="colours with a population"):
        mock_from_ladder(found, KNOWN, np.random.default_rng(1))
    volume = {**FREE, "anchors.parallaxes.distance_prior": "uniform in volume"}
    found = ladder(3, volume, stars=8, parallaxes=5)
    with pytest.raises(InputError, match="a prior flat in modulus"):
        mock_from_ladder(found, KNOWN, np.random.default_rng(1))
    hopeless = {"cepheids.completeness": {"band": "H", "limits": {"Q07": 14.0}, "softness": 0.1}}
    with pytest.raises(InputError, match="hardly ever let in"):
        mock_from_ladder(ladder(3, hopeless, stars=8), KNOWN, np.random.default_rng(1))


@pytest.mark.parametrize("index", ["apart", "band in the colour", "blue band", "a colour column"])
def test_bands_are_simulated_so_that_errors_stay(index: str) -> None:
    """Stated variances and covariances of magnitude and colour come back from the new bands."""
    found = ladder(3, FREE, stars=8, index=index)
    again = mock_from_ladder(found, KNOWN, np.random.default_rng(1))
    for part in ("band_variance", "colour_variance", "covariance"):
        one, two = (getattr(each.cepheids.photometry, part) for each in (found, again))
        np.testing.assert_allclose(one, two, rtol=1e-6, atol=1e-12)
