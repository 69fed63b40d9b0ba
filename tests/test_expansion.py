"""The expansion series against exact distances, and the peculiar velocities' variance."""

from __future__ import annotations

import numpy as np
import pytest
from astropy.cosmology import FlatLambdaCDM
from hypothesis import given
from hypothesis import strategies as st

from ladderfit.physics.expansion import distance_term, peculiar_variance, series
from ladderfit.units import LIGHT_SPEED

Z = np.linspace(0.001, 0.15, 60)


def relative_error(matter: float) -> float:
    exact = FlatLambdaCDM(H0=70.0, Om0=matter).luminosity_distance(Z).value
    modulus = distance_term(Z, Z, q0=1.5 * matter - 1.0, j0=1.0) - 5.0 * np.log10(70.0)
    return float(np.max(np.abs(10.0 ** (0.2 * (modulus - 25.0)) / exact - 1.0)))


@pytest.mark.parametrize("matter", [0.16, 0.2, 0.25, 0.3, 0.33])
def test_series_is_good_to_one_part_in_ten_thousand(matter: float) -> None:
    assert relative_error(matter) < 1e-4


@pytest.mark.parametrize("matter", [0.1, 0.4, 0.7, 1.0])
def test_series_is_good_to_seven_parts_in_ten_thousand(matter: float) -> None:
    assert 1e-4 < relative_error(matter) < 7e-4


def test_a_wrong_deceleration_is_noticed() -> None:
    exact = FlatLambdaCDM(H0=70.0, Om0=0.3).luminosity_distance(Z).value
    wrong = LIGHT_SPEED * Z / 70.0 * series(Z, q0=0.5, j0=1.0)
    assert np.max(np.abs(wrong / exact - 1.0)) > 0.05


def test_series_by_hand() -> None:
    # 1 + 1.55 x 0.1 / 2 - (1 + 0.55 - 3 x 0.3025 + 1) x 0.01 / 6
    assert series(0.1, -0.55, 1.0) == pytest.approx(1.0775 - 1.6425 * 0.01 / 6.0, rel=1e-14)


def test_nearby_limit_is_the_linear_law() -> None:
    # At z -> 0 a galaxy at c z = 700 km/s and H0 = 70 km/s/Mpc is 10 Mpc away: 30 mag.
    z = 1e-9
    shift = 5.0 * np.log10(700.0 / LIGHT_SPEED / z)
    term = distance_term(z, z) + shift - 5.0 * np.log10(70.0)
    assert term == pytest.approx(30.0, abs=1e-7)


@given(st.floats(0.01, 0.2), st.floats(-0.002, 0.002), st.floats(-1.0, 0.5), st.floats(0.0, 2.0))
def test_the_heliocentric_redshift_only_dims(z: float, dz: float, q0: float, j0: float) -> None:
    difference = distance_term(z, z + dz, q0, j0) - distance_term(z, z, q0, j0)
    assert difference == pytest.approx(5.0 * np.log10((1 + z + dz) / (1 + z)), abs=1e-12)


def test_peculiar_variance_against_the_complete_first_order() -> None:
    cosmology = FlatLambdaCDM(H0=70.0, Om0=0.3)
    reach = cosmology.H(Z).value * cosmology.luminosity_distance(Z).value
    complete = 5.0 / np.log(10.0) * ((1.0 + Z) ** 2 * LIGHT_SPEED / reach - 1.0)
    complete *= 250.0 / LIGHT_SPEED
    ratio = complete / np.sqrt(peculiar_variance(Z, 250.0))
    assert np.all((ratio > 0.95) & (ratio < 1.0))
    assert ratio[Z < 0.05].min() > 0.985


def test_peculiar_variance_scales() -> None:
    assert peculiar_variance(0.05, 0.0) == 0.0
    assert peculiar_variance(0.1, 500.0) == pytest.approx(float(peculiar_variance(0.05, 250.0)))
