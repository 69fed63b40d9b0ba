"""Magnitude limits of hosts: integrals and densities against grids, draws, refusals."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd
import pytest
from photometry_ladders import MODULI, choices, ladder, points, tables
from scipy.special import log_ndtr
from scipy.stats import kstest, norm

from ladderfit.errors import InputError
from ladderfit.kernels.truncation import truncated_hosts
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.posterior.joint import posterior

LIMITS = {"Orrel": 18.6, "Q07": 19.2}


def limited(band: str = "W", softness: float = 0.0, **more: Any) -> Ladder:
    """Two hosts with limits in the index itself or in H; supernovae in both, and one elsewhere."""
    made = tables(4, 12)
    table = made["cepheids"]
    table["W"] = table["H"] - 0.386 * (table["V"] - table["I"])
    table["e_W"] = 0.08
    plain = choices()
    plain["cepheids"]["magnitude"] = {"band": "W", "bands": {"W": "W"}, "errors": {"W": "e_W"}}
    plain["cepheids"]["completeness"] = {"band": band, "limits": LIMITS, "softness": softness}
    plain["supernovae"] = {
        "columns": {"name": "SN", "host": "Galaxy", "peak": "mB", "peak_error": "e_mB"}
    }
    peaks = pd.DataFrame(
        {"SN": ["a", "b", "c"], "Galaxy": list(MODULI), "mB": [-0.7, 4.7, 5.9], "e_mB": 0.1}
    )
    return build_ladder(plain, made | {"supernovae": peaks}).change(more)


def on_a_grid(found: Ladder, value: Mapping[str, float]) -> float:
    """Log density given phi: every host's modulus integrated on a dense grid, stars truncated."""
    stars, total = found.cepheids, 0.0
    mean = value["zero_point"] + value["slope"] * (stars.log_period - 1.0)
    mean = mean + value["metallicity"] * (stars.metallicity - 8.69)
    sd = np.sqrt(stars.variance + value["scatter"] ** 2)
    softness = found.choices.cepheids.completeness.softness
    for place, host in enumerate(found.hosts):
        mu = np.linspace(MODULI[host] - 2.0, MODULI[host] + 2.0, 40_001)
        value_at = np.full(len(mu), -np.log(50.0))
        for i in np.flatnonzero(stars.host == place):
            value_at += norm.logpdf(stars.magnitude[i], mu + mean[i], sd[i])
            if np.isfinite(stars.headroom[i]):
                limit = stars.magnitude[i] + stars.headroom[i]
                width = np.hypot(sd[i], softness)
                value_at -= log_ndtr((limit - mu - mean[i]) / width)
        for anchor in found.geometric:
            if anchor.host == place:
                value_at += norm.logpdf(anchor.modulus, mu, anchor.error)
        for j in np.flatnonzero(found.peaks.host == place):
            width = np.sqrt(found.peaks.variance[j] + value["peak_scatter"] ** 2)
            peak = found.peaks.magnitude[j]
            value_at += norm.logpdf(peak, mu + value["peak_magnitude"], width)
        top = value_at.max()
        total += top + np.log(np.trapezoid(np.exp(value_at - top), mu))
    return total


def places_of(found: Ladder) -> list[dict[str, float]]:
    rng = np.random.default_rng(8)
    names = posterior(found).split.phi_names
    usual = {"zero_point": -5.9, "slope": -3.3, "metallicity": -0.2, "scatter": 0.1}
    usual |= {"peak_magnitude": -19.2, "peak_scatter": 0.1}
    return [{n: usual[n] + 0.03 * rng.normal() for n in names} for _ in range(4)]


@pytest.mark.parametrize("softness", [0.0, 0.3])
@pytest.mark.parametrize("band", ["W", "H"])
def test_density_is_the_one_on_a_grid(band: str, softness: float) -> None:
    found = limited(band, softness)
    assert (found.kept["cepheids"].kept < 36) == (softness == 0.0)
    joint = posterior(found)
    z = np.stack([joint.coordinates(place) for place in places_of(found)])
    fast = joint.log_density(z) - joint.split.log_prior(z)
    slow = np.array([on_a_grid(found, place) for place in places_of(found)])
    np.testing.assert_allclose(fast, slow, rtol=1e-8)
    without = posterior(found.change({"cepheids.completeness": None, "priors": {}}))
    assert set(joint.split.phi_names) > set(without.split.phi_names)


def test_limits_matter_in_that_comparison() -> None:
    """Negative control: limits 0.02 mag fainter are told apart."""
    found = limited("W", 0.3)
    other = found.change(
        {"cepheids.completeness.limits": {name: m + 0.02 for name, m in LIMITS.items()}}
    )
    joint, place = posterior(found), places_of(found)[0]
    z = joint.coordinates(place)[None]
    fast = joint.log_density(z) - joint.split.log_prior(z)
    assert abs(fast[0] - on_a_grid(other, place)) > 0.01


def cases() -> list[tuple[float, float, np.ndarray, np.ndarray]]:
    """Hosts of 1 to 200 stars, from hardly touched to nearly all cut away."""
    rng, found = np.random.default_rng(1), []
    for n in (1, 3, 20, 200):
        for depth in (-1.5, -0.5, 0.5, 2.0, 4.0):
            v = rng.uniform(0.05, 0.5, n) ** 2
            lead = depth * np.sqrt(v) + rng.uniform(0.0, 1.0, n)
            centre = min(0.0, float(np.min(lead)) - 0.02)  # stars lie before the limit
            found.append((centre, float((1.0 / v).sum()) * 1.001, lead, np.sqrt(v)))
    return found


def truth(case: tuple[float, float, np.ndarray, np.ndarray]) -> tuple[np.ndarray, np.ndarray]:
    """A grid and the log integrand on it."""
    centre, precision, lead, width = case
    low, high = centre - 12.0 / np.sqrt(precision), centre + 6.0
    for _ in range(30):
        u = np.linspace(low, high, 2001)
        gap = (lead[None] - u[:, None]) / width
        value = norm.logpdf(u, centre, precision**-0.5) - log_ndtr(gap).sum(axis=1)
        inside = np.flatnonzero(value > value.max() - 60.0)
        if inside[-1] == 2000:
            high += high - low
            continue
        low, high = u[max(inside[0] - 1, 0)], u[inside[-1] + 1]
        if len(inside) > 1500:
            break
    u = np.linspace(low, high, 40_001)
    value = np.full(len(u), 0.0)
    for b, w in zip(lead, width, strict=True):
        value -= log_ndtr((b - u) / w)
    return u, value + norm.logpdf(u, centre, precision**-0.5)


@pytest.mark.parametrize("case", cases(), ids=lambda case: f"{len(case[2])} stars")
def test_integrals_and_quantiles(case: tuple[float, float, np.ndarray, np.ndarray]) -> None:
    centre, precision, lead, width = case
    u, value = truth(case)
    top = value.max()
    expected = top + np.log(np.trapezoid(np.exp(value - top), u))
    runs = np.array([[0, 0, len(lead)]])

    def arrays(size: int) -> tuple[np.ndarray, ...]:
        flat = np.full((size, 1), centre), np.full((size, 1), precision)
        return (*flat, np.tile(lead, (size, 1)), np.tile(width, (size, 1)))

    found = truncated_hosts(runs, *arrays(1))
    assert found[0, 0] == pytest.approx(expected, abs=1e-8 * max(1.0, abs(expected)))
    shares = np.linspace(0.001, 0.999, 500)
    places = truncated_hosts(runs, *arrays(500), shares[:, None])[:, 0]
    cumulative = np.concatenate(
        [[0.0], np.cumsum(0.5 * (np.exp(value - top)[1:] + np.exp(value - top)[:-1]))]
    )
    np.testing.assert_allclose(np.interp(places, u, cumulative / cumulative[-1]), shares, atol=3e-4)


def test_draws_of_moduli_follow_the_density() -> None:
    """Given phi, the modulus of a limited host against its density on a grid."""
    found = limited()
    joint, place = posterior(found), places_of(found)[0]
    z = np.tile(joint.coordinates(place), (4000, 1))
    drawn = joint.draw(z, np.random.default_rng(2))
    mu = np.linspace(22.0, 26.0, 20_001)
    stars, host = found.cepheids, found.hosts.index("Orrel")
    mean = place["zero_point"] + place["slope"] * (stars.log_period - 1.0)
    mean = mean + place["metallicity"] * (stars.metallicity - 8.69)
    sd = np.sqrt(stars.variance + place["scatter"] ** 2)
    log = norm.logpdf(
        found.peaks.magnitude[1],
        mu + place["peak_magnitude"],
        np.sqrt(found.peaks.variance[1] + place["peak_scatter"] ** 2),
    )
    plain = log.copy()
    for i in np.flatnonzero(stars.host == host):
        log += norm.logpdf(stars.magnitude[i], mu + mean[i], sd[i])
        plain += norm.logpdf(stars.magnitude[i], mu + mean[i], sd[i])
        log -= log_ndtr((LIMITS["Orrel"] - mu - mean[i]) / sd[i])
    pvalues = []
    for each in (log, plain):
        share = np.cumsum(np.exp(each - each.max()))
        rank = np.interp(drawn["modulus[Orrel]"], mu, share / share[-1])
        pvalues.append(kstest(rank, "uniform").pvalue)
    assert pvalues[0] > 1e-3
    assert pvalues[1] < 1e-6  # the density without limits is another


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"relation.reddening": {"colours": "one population"}}, 'colours = "in the variance"'),
        ({"cepheids.shared": {"sky": {"loading": "sky", "error": 0.1}}}, "cepheids.shared"),
        ({"cepheids.columns.metallicity_error": "e_OH"}, 'errors = "in the variance"'),
        ({"cepheids.completeness.limits": {"Q7": 20.0}}, "'Q07'"),
        ({"cepheids.completeness.limits": {}}, "hosts and limits"),
        ({"cepheids.completeness.softness": -0.1}, "0 mag or more"),
        ({"cepheids.completeness.band": "K"}, "column 'K'"),
    ],
)
def test_refusals_in_words(change: dict[str, Any], words: str) -> None:
    start = {"cepheids.completeness": {"band": "H", "limits": LIMITS}}
    with pytest.raises(InputError) as caught:
        ladder(3, start).change(change)
    assert len(caught.value.problems) == 1, str(caught.value)
    assert words in str(caught.value), str(caught.value)


def test_with_a_ratio_in_the_variance_and_period_errors() -> None:
    """What leaves a host one unknown goes together with limits."""
    found = ladder(
        3,
        {
            "cepheids.completeness": {"band": "H", "limits": LIMITS, "softness": 0.2},
            "relation.reddening": {"colours": "in the variance"},
            "cepheids.columns.period_error": "e_P",
        },
    )
    joint = posterior(found)
    z = np.stack([joint.coordinates(place) for place in points(found, 5)])
    assert np.isfinite(joint.log_density(z)).all()
