"""Breakages of the simulator: each does to the data what it says, and nothing else."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from ladderfit.mock import PLAN, Mock, simulate
from ladderfit.mock.breakages import Breakage
from ladderfit.mock.light_curves import LightCurves

RATIO = PLAN.ratio


def survey(breakage: Breakage, light: LightCurves | None = None) -> Mock:
    plan = replace(PLAN, breakage=breakage, light_curves=light, missing_cepheids=0)
    return simulate(plan, np.random.default_rng(8))


def changes(breakage: Breakage) -> tuple[np.ndarray, Mock]:
    """Change of the index H - R (V-I) of each Cepheid; noise and dust are the same draws."""
    tables = [survey(each) for each in (breakage, Breakage())]
    index = [t.cepheids["Hmag"] - RATIO * (t.cepheids["Vmag"] - t.cepheids["Imag"]) for t in tables]
    return np.asarray(index[0] - index[1]), tables[1]


def test_the_slope_changes_in_anchors_alone() -> None:
    change, mock = changes(Breakage(slope_in_anchors=0.3))
    stars = mock.cepheids
    anchor = np.isin(stars["Galaxy"], list(mock.anchors))
    plain = np.asarray(stars["Mode"]) == "F"
    expected = 0.3 * np.log10(np.asarray(stars["P"]) / PLAN.pivot)
    both = anchor & plain
    np.testing.assert_allclose(change[both], expected[both], atol=0.05)  # errors follow brightness
    assert not np.any(np.abs(change[~anchor]) > 1e-9)


def test_crowding_grows_with_the_distance_squared() -> None:
    change, mock = changes(Breakage(crowding=0.1))
    near, far = (np.median(change[mock.cepheids["Galaxy"] == h]) for h in ("Tavin", "Vestow"))
    moduli = {host.name: host.modulus for host in PLAN.hosts}
    assert near == pytest.approx(0.0, abs=1e-3)
    assert far == pytest.approx(-0.1 * 10.0 ** (0.4 * (moduli["Vestow"] - 32.0)), abs=0.02)


def test_dust_of_another_ratio_dims_by_its_excess() -> None:
    """The mean excess E(V-I) of a host times the change of the ratio."""
    change, mock = changes(Breakage(dust_ratio=0.2))
    host = PLAN.hosts[0]
    mean = float(np.mean(change[mock.cepheids["Galaxy"] == host.name]))
    error = 0.2 * host.reddening / np.sqrt(host.cepheids)  # of an exponential's mean
    assert abs(mean - 0.2 * host.reddening) < 4.0 * error


def test_red_supernovae_are_missing_from_the_expansion_alone() -> None:
    light = LightCurves()
    whole, cut = survey(Breakage(), light), survey(Breakage(reddest=0.05), light)
    red = np.asarray(whole.flow["c"]) > 0.05
    assert 0 < red.sum() < len(red)
    assert len(cut.flow) == len(red) - red.sum()
    assert len(cut.supernovae) == len(whole.supernovae)
