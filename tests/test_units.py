"""Conversions, against facts of the trade and against one another."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ladderfit import units

PARALLAXES_AND_PARSECS = [(1.0, 1.0), (0.5, 2.0), (0.1, 10.0)]  # arcsec, pc


def test_a_parsec_in_light_years_and_metres() -> None:
    # Common practice: 3.26 light years, about 3.09e16 m; the unit about 1.5e11 m.
    assert round(units.LIGHT_YEARS_PER_PARSEC, 2) == 3.26
    assert float(f"{units.METRES_PER_PARSEC:.2e}") == 3.09e16
    assert float(f"{units.METRES_PER_AU:.1e}") == 1.5e11


@pytest.mark.parametrize(("arcsec", "parsec"), PARALLAXES_AND_PARSECS)
def test_parallaxes_of_whole_parsecs(arcsec: float, parsec: float) -> None:
    # Common practice: parallaxes of 1, 0.5 and 0.1 arcsec mean 1, 2 and 10 pc.
    modulus = units.modulus_from_distance(parsec * 1e-6)
    assert units.parallax_from_modulus(modulus) == pytest.approx(arcsec * 1e3, rel=1e-12)
    assert units.parallax_from_distance(parsec * 1e-6) == pytest.approx(arcsec * 1e3, rel=1e-12)


def test_the_nearest_star_lies_beyond_a_parsec() -> None:
    # Common practice: at about 4.25 light years.
    assert 4.25 / units.LIGHT_YEARS_PER_PARSEC > 1.0


def test_thirty_megaparsecs_in_light_years() -> None:
    # Common practice: about 100 million light years.
    assert float(f"{30e6 * units.LIGHT_YEARS_PER_PARSEC:.0e}") == 1e8


def test_anchor_points_of_the_modulus() -> None:
    assert units.parallax_from_modulus(10.0) == 1.0  # 1 kpc
    assert units.modulus_from_distance(1e-5) == pytest.approx(0.0, abs=1e-12)  # 10 pc
    assert units.distance_from_modulus(25.0) == 1.0


def test_agrees_with_astropy() -> None:
    u = pytest.importorskip("astropy.units")
    assert pytest.approx((1 * u.pc).to_value(u.m), rel=1e-14) == units.METRES_PER_PARSEC
    assert pytest.approx((1 * u.lyr).to_value(u.m), rel=1e-14) == units.METRES_PER_LIGHT_YEAR


@given(st.floats(-5.0, 45.0))
def test_there_and_back(modulus: float) -> None:
    by_parallax = units.modulus_from_parallax(units.parallax_from_modulus(modulus))
    by_distance = units.modulus_from_distance(units.distance_from_modulus(modulus))
    assert by_parallax == pytest.approx(modulus, abs=1e-12)
    assert by_distance == pytest.approx(modulus, abs=1e-12)
    assert units.modulus_from_parallax(
        units.parallax_from_distance(units.distance_from_modulus(modulus))
    ) == pytest.approx(modulus, abs=1e-12)


@given(st.floats(1e-3, 1e4))
def test_period_there_and_back(period: float) -> None:
    assert units.period_from_log(units.log_period(period)) == pytest.approx(period, rel=1e-13)


def test_small_errors_of_modulus_are_relative_errors_of_distance() -> None:
    step = 1e-6
    near, far = units.distance_from_modulus(np.array([30.0, 30.0 + step]))
    assert units.relative_from_magnitudes(step) == pytest.approx((far - near) / near, rel=1e-5)


@pytest.mark.parametrize(
    "convert",
    [
        units.modulus_from_parallax,
        units.modulus_from_distance,
        units.parallax_from_distance,
        units.log_period,
    ],
)
@pytest.mark.parametrize("value", [0.0, -1.0, float("nan")])
def test_refuses_what_has_no_logarithm(convert, value: float) -> None:  # type: ignore[no-untyped-def]
    with pytest.raises(ValueError, match="above zero"):
        convert([1.0, value])
