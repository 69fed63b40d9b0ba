"""Facts of the trade: common practice, no source.

Round numbers that everyone in the field knows.  The exact constants beside them
are those of the IAU, as astropy carries them (read).
"""

from __future__ import annotations

import numpy as np
import pytest
from astropy import constants
from astropy import units as u

from ladderfit import units

PARSEC = 1e-6  # Mpc, the unit of distance throughout ladderfit.units


def light_years(megaparsecs: float) -> float:
    return megaparsecs * 1e6 * units.LIGHT_YEARS_PER_PARSEC


def digits(value: float, count: int) -> float:
    """Rounded to that many significant digits."""
    return float(f"{value:.{count - 1}e}")


def test_constants() -> None:
    # au: IAU 2012 Resolution B2, exact; parsec: 648000/pi au, IAU 2015 Resolution B2 (read);
    # light year: a Julian year of light (computed).
    assert units.METRES_PER_AU == 149_597_870_700 == constants.au.value
    assert pytest.approx(3.085677581491367e16, rel=1e-15) == units.METRES_PER_PARSEC
    assert pytest.approx(constants.pc.value, rel=1e-15) == units.METRES_PER_PARSEC
    assert pytest.approx(9_460_730_472_580_800, rel=1e-15) == units.METRES_PER_LIGHT_YEAR
    assert pytest.approx(u.lyr.to(u.m), rel=1e-15) == units.METRES_PER_LIGHT_YEAR
    assert pytest.approx(3.2615637771674333, rel=1e-15) == units.LIGHT_YEARS_PER_PARSEC
    assert constants.c.to_value(u.km / u.s) == units.LIGHT_SPEED


def test_a_parsec() -> None:
    # Common practice, no source: 3.26 light years, about 3.09e16 m.
    assert digits(light_years(PARSEC), 3) == 3.26
    assert digits(units.METRES_PER_PARSEC, 3) == 3.09e16


def test_an_astronomical_unit() -> None:
    # Common practice, no source: about 1.5e11 m.
    assert digits(units.METRES_PER_AU, 2) == 1.5e11


@pytest.mark.parametrize(("arcsec", "parsecs"), [(1.0, 1.0), (0.5, 2.0), (0.1, 10.0)])
def test_parallaxes_and_distances(arcsec: float, parsecs: float) -> None:
    # Common practice, no source: parallaxes of 1, 0.5 and 0.1 arcsec mean 1, 2 and 10 pc.
    modulus = units.modulus_from_parallax(1e3 * arcsec)
    assert units.distance_from_modulus(modulus) == pytest.approx(parsecs * PARSEC, rel=1e-13)
    assert units.parallax_from_distance(parsecs * PARSEC) == pytest.approx(1e3 * arcsec, rel=1e-13)


def test_a_parsec_by_geometry() -> None:
    # Common practice, no source: one au seen from 1 pc spans 1 arcsec.
    angle = units.METRES_PER_AU / units.METRES_PER_PARSEC
    assert np.degrees(angle) * 3600.0 == pytest.approx(1.0, rel=1e-13)


def test_ten_parsecs_have_the_modulus_zero() -> None:
    # Common practice, no source: absolute magnitudes are for 10 pc.
    assert units.modulus_from_distance(10.0 * PARSEC) == pytest.approx(0.0, abs=1e-13)


def test_the_nearest_star() -> None:
    # Common practice, no source: at about 4.25 light years, so beyond 1 pc: its parallax, the
    # largest there is, stays under 1 arcsec.
    distance = 4.25 * PARSEC / units.LIGHT_YEARS_PER_PARSEC
    assert distance > PARSEC
    assert units.parallax_from_distance(distance) < 1e3


def test_thirty_megaparsecs() -> None:
    # Common practice, no source: about 100 million light years.
    assert digits(light_years(30.0), 1) == 1e8
    assert light_years(30.0) == pytest.approx(1e8, rel=0.03)
