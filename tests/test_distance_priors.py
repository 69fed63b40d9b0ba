"""Distance priors that fall off, and the chance of detection: kernels against dense grids."""

from __future__ import annotations

import numpy as np
import pytest
from oracle_detection import SUN, log_detection, log_prior
from oracles import log_parallax_integral as dense
from test_quadrature import draw_cases

from ladderfit.kernels import detection
from ladderfit.kernels.quadrature import log_parallax_integrals
from ladderfit.kernels.sightlines import VOLUME_TILT, log_falloff_integrals, sight_lines

DISC = {"length": 2.5, "height": 0.1, **SUN}
NO_SIGHT = np.empty((1, 0))


def sky(rng, n):
    """Sight lines close to the plane, among them the Galactic centre itself and the poles."""
    longitude = rng.uniform(0.0, 360.0, n)
    latitude = rng.normal(0.0, 4.0, n)
    longitude[: n // 10] = rng.normal(0.0, 3.0, n // 10)
    latitude[: n // 20] = 0.0
    longitude[0] = 0.0
    latitude[-n // 20 :] = rng.uniform(-90.0, 90.0, len(latitude[-n // 20 :]))
    return longitude, latitude


def compare(cases, found, priors):
    expected = np.array(
        [
            dense(*case, prior, points=20_001)
            for case, prior in zip(zip(*cases, strict=True), priors, strict=True)
        ]
    )
    assert np.isfinite(found).all()
    excess = np.abs(found - expected) / (1e-6 + 1e-12 * np.abs(expected))
    worst = int(np.argmax(excess))
    assert excess[worst] < 1.0, (excess[worst], [part[worst] for part in cases], found[worst])


@pytest.mark.parametrize("length", [0.3, 2.0, 10.0])
def test_exponential_agrees_with_a_dense_grid(length):
    """To 1e-6 + 1e-12 |log p|, from 200 sigma to negative parallaxes."""
    cases = draw_cases(np.random.default_rng(5), 300)
    a, v, p, s = (part[:, None] for part in cases)
    rate = np.full(300, 1.0 / length)
    found = log_falloff_integrals(a, v, p, s, rate, NO_SIGHT)[:, 0]
    compare(cases, found, [log_prior("exponential", length)] * 300)


@pytest.mark.parametrize("height", [0.05, 0.3])
def test_disc_agrees_with_a_dense_grid(height):
    n = 300
    rng = np.random.default_rng(6)
    cases, (longitude, latitude) = draw_cases(rng, n), sky(rng, n)
    disc = {**DISC, "height": height}
    sight = sight_lines(longitude, latitude, **disc)
    a, v, p, s = (part[None, :] for part in cases)
    found = log_falloff_integrals(a, v, p, s, np.zeros(1), sight)[0]
    places = zip(longitude, latitude, strict=True)
    compare(cases, found, [log_prior("disc", sky=place, disc=disc) for place in places])


def test_an_endless_exponential_is_uniform_in_volume():
    a, v, p, s = (part[None, :] for part in draw_cases(np.random.default_rng(7), 2000))
    found = log_falloff_integrals(a, v, p, s, np.zeros(1), np.empty((2000, 0)))
    expected = log_parallax_integrals(a, v, p, s, VOLUME_TILT) - 10.0 * VOLUME_TILT
    np.testing.assert_allclose(found, expected, atol=1e-6)


def detected(kind, magnitudes=(), parallaxes=(), rate=0.0, sight=None, flat=(0.0, 0.0)):
    """Log of D for one group of stars."""
    size = max(len(magnitudes), len(parallaxes))
    tables = np.empty((1, 0, 2)) if sight is None else detection.disc_tables(sight)

    def pair(items):
        return tuple(np.array([values]) for values in zip(*items, strict=True)) if items else None

    return detection.log_detection(
        np.array([0, size]),
        pair(magnitudes),
        pair(parallaxes),
        kind,
        np.array([rate]),
        NO_SIGHT if sight is None else sight,
        tables,
        flat,
    )[0, 0]


def limits(rng):
    """A magnitude limit and a parallax limit, sharp to broad, that act at like distances."""
    modulus = rng.uniform(8.0, 16.0)
    magnitude = (modulus, 10.0 ** rng.uniform(-1.7, 0.2))
    at = 10.0 ** (2.0 - 0.2 * (modulus + rng.normal(0.0, 1.5)))
    error = at * 10.0 ** rng.uniform(-2.0, 0.7)
    return magnitude, (at * rng.choice([1.0, 1.0, 0.3, 0.0, -1.0]), error)


CASES = [
    (kind, which)
    for kind in ("volume", "exponential", "disc", "flat")
    for which in ("magnitude", "parallax", "both")
    if (kind, which) != ("volume", "parallax")  # diverges, and is refused
]


@pytest.mark.parametrize(("kind", "which"), CASES)
def test_chance_of_detection_agrees_with_a_dense_grid(kind, which):
    rng = np.random.default_rng(8)
    for _ in range(12):
        magnitude, parallax = limits(rng)
        magnitudes = [] if which == "parallax" else [magnitude]
        parallaxes = [] if which == "magnitude" else [parallax]
        length, place = rng.uniform(0.5, 5.0), (rng.uniform(0.0, 360.0), rng.normal(0.0, 5.0))
        code, more, prior, grid = detection.VOLUME, {}, log_prior(kind), {}
        if kind == "exponential":
            code, more = detection.EXPONENTIAL, {"rate": 1.0 / length}
            prior = log_prior(kind, length)
        elif kind == "disc":
            sight = sight_lines(*(np.array([angle]) for angle in place), **DISC)
            code, more = detection.DISC, {"sight": sight}
            prior = log_prior(kind, sky=place, disc=DISC)
        elif kind == "flat":
            bounds = (rng.uniform(4.0, 9.0), rng.uniform(11.0, 20.0))
            code, more = detection.FLAT, {"flat": bounds}
            prior, grid = np.zeros_like, {"low": bounds[0], "high": bounds[1]}
        found = detected(code, magnitudes, parallaxes, **more)
        expected = log_detection(prior, magnitudes, parallaxes, **grid)
        case = (magnitudes, parallaxes, more, found, expected)
        assert found == pytest.approx(expected, abs=1e-6), case


def test_closed_form_agrees_with_quadrature():
    """A volume prior with a magnitude limit alone: to 1e-9."""
    c = 0.6 * np.log(10.0)
    for limit, width in [(12.0, 0.02), (9.0, 0.3), (14.0, 1.2)]:
        closed = detected(detection.VOLUME, [(limit, width)])
        assert closed == pytest.approx(
            c * (limit - 10.0) + 0.5 * (c * width) ** 2 - np.log(c), abs=1e-12
        )
        # a parallax limit that every star passes sends it the other way
        other = detected(detection.VOLUME, [(limit, width)], [(-1e3, 1.0)])
        assert other == pytest.approx(closed, abs=1e-9)
        far = detected(detection.EXPONENTIAL, [(limit, width)], rate=1e-9)
        assert far == pytest.approx(closed, abs=1e-7)


def test_without_limits_in_reach_detection_is_the_norm():
    length = 1.7
    norm = np.log(2.0 * length**3 / (0.2 * np.log(10.0)))
    assert detected(detection.EXPONENTIAL, [(40.0, 0.1)], rate=1 / length) == pytest.approx(norm)
    assert detected(detection.EXPONENTIAL, [], [(-9.0, 0.1)], rate=1 / length) == pytest.approx(
        norm
    )


@pytest.mark.parametrize("kind", ["volume", "exponential"])
def test_stars_of_a_cluster_are_detected_together(kind):
    rng = np.random.default_rng(9)
    for _ in range(8):
        pairs = [limits(rng) for _ in range(3)]
        magnitudes, parallaxes = [m for m, _ in pairs], [p for _, p in pairs]
        code = detection.VOLUME if kind == "volume" else detection.EXPONENTIAL
        more = {} if kind == "volume" else {"rate": 0.5}
        for limited in (parallaxes, []):
            found = detected(code, magnitudes, limited, **more)
            expected = log_detection(log_prior(kind, 2.0), magnitudes, limited)
            assert found == pytest.approx(expected, abs=1e-6)
