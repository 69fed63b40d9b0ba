"""The zero point of Gaia parallaxes against reference values, and its behaviour round them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from published_lines import ZERO_POINTS

from ladderfit.physics.zero_point import (
    COEFFICIENTS,
    FIVE_PARAMETERS,
    SIX_PARAMETERS,
    ZeroPoint,
    parallax_zero_point,
)

TOLERANCE = 1e-6  # mas; the reference values are given to that digit

MAGNITUDE = st.floats(6.0, 21.0)
SOLVED = st.sampled_from([FIVE_PARAMETERS, SIX_PARAMETERS])


def of_table(table: pd.DataFrame) -> ZeroPoint:
    colour = table["nu_eff"].fillna(table["pseudocolour"])
    return parallax_zero_point(
        table["phot_g_mean_mag"],
        colour,
        table["ecl_lat_deg"],
        table["astrometric_params_solved"],
    )


def test_reference_values() -> None:
    # Lindegren et al. 2021: 42 values, both solutions in one call.
    assert len(ZERO_POINTS) == 42
    found = of_table(ZERO_POINTS).value
    np.testing.assert_allclose(found, ZERO_POINTS["zero_point_mas"], rtol=0.0, atol=TOLERANCE)


def test_the_two_solutions_differ() -> None:
    """A negative control: one solution's coefficients do not serve the other's stars."""
    swapped = ZERO_POINTS["astrometric_params_solved"].map({31: 95, 95: 31})
    found = of_table(ZERO_POINTS.assign(astrometric_params_solved=swapped)).value
    assert np.all(np.abs(found - ZERO_POINTS["zero_point_mas"]) > 10.0 * TOLERANCE)


@pytest.mark.parametrize("row", range(len(ZERO_POINTS)))
def test_one_star_at_a_time(row: int) -> None:
    star = ZERO_POINTS.iloc[row]
    colour = star["pseudocolour"] if np.isnan(star["nu_eff"]) else star["nu_eff"]
    solved = int(star["astrometric_params_solved"])
    found = parallax_zero_point(star["phot_g_mean_mag"], colour, star["ecl_lat_deg"], solved)
    assert found.value.shape == ()
    assert float(found.value) == pytest.approx(star["zero_point_mas"], abs=TOLERANCE)


def test_rows_outside_the_stated_range() -> None:
    found = of_table(ZERO_POINTS)
    assert not np.any(found.outside_magnitude)
    assert sorted(ZERO_POINTS["pseudocolour"][found.outside_colour]) == [1.15, 1.74]
    np.testing.assert_array_equal(found.outside, found.outside_colour)


def test_bounds_of_the_stated_range() -> None:
    # (G, colour, solution): just inside and just outside either end.
    inside = [(6.0, 1.1, 31), (21.0, 1.9, 31), (6.0, 1.24, 95), (21.0, 1.72, 95)]
    outside = [(5.99, 1.5, 31), (21.01, 1.5, 95), (12.0, 1.09, 31), (12.0, 1.91, 31)]
    outside += [(12.0, 1.23, 95), (12.0, 1.73, 95)]
    g, colour, solved = (np.array(column) for column in zip(*inside, *outside, strict=True))
    found = parallax_zero_point(g, colour, 0.0, solved)
    np.testing.assert_array_equal(found.outside, [False] * 4 + [True] * 6)
    assert np.all(np.isfinite(found.value))


@pytest.mark.parametrize("solved", [FIVE_PARAMETERS, SIX_PARAMETERS])
def test_beyond_the_magnitudes_the_nearer_end_holds(solved: int) -> None:
    found = parallax_zero_point([3.0, 6.0, 21.0, 22.0], 1.5, 20.0, solved)
    assert found.value[0] == found.value[1]
    assert found.value[2] == found.value[3]
    np.testing.assert_array_equal(found.outside_magnitude, [True, False, False, True])


@given(
    st.sampled_from(COEFFICIENTS[FIVE_PARAMETERS].magnitude.tolist()) | MAGNITUDE,
    st.sampled_from([1.24, 1.48, 1.72]) | st.floats(1.1, 1.9),
    SOLVED,
)
def test_continuous(g: float, colour: float, solved: int) -> None:
    """No step at a node or where the formula bends: a small change of the input stays small."""
    step = 1e-7
    near = [(g - step, colour), (g + step, colour), (g, colour - step), (g, colour + step)]
    g_near, colour_near = np.array(near).T
    change = (
        parallax_zero_point(g_near, colour_near, 40.0, solved).value
        - parallax_zero_point(g, colour, 40.0, solved).value
    )
    assert np.max(np.abs(change)) < 2.0 * step  # slopes stay below 0.4 mas per 1/micrometre


@given(MAGNITUDE, st.floats(1.1, 1.9), SOLVED)
def test_mean_over_the_sphere(g: float, colour: float, solved: int) -> None:
    """b_1 and b_2 average to zero over the sphere: what is left is the sum of q_j0 c_j."""
    sine, weight = np.polynomial.legendre.leggauss(4)
    latitude = np.rad2deg(np.arcsin(sine))
    mean = 0.5 * weight @ parallax_zero_point(g, colour, latitude, solved).value
    magic = float(np.rad2deg(np.arcsin(1.0 / np.sqrt(3.0))))  # b_2 = 0, b_1 odd
    pair = parallax_zero_point(g, colour, [-magic, magic], solved).value
    assert mean == pytest.approx(np.mean(pair), abs=1e-12)


@given(st.permutations(range(len(ZERO_POINTS))))
def test_rows_do_not_touch_one_another(order: list[int]) -> None:
    shuffled = ZERO_POINTS.iloc[order]
    np.testing.assert_array_equal(of_table(shuffled).value, of_table(ZERO_POINTS).value[order])


@pytest.mark.parametrize("column", ["phot_g_mean_mag", "nu_eff", "ecl_lat_deg"])
def test_missing_inputs(column: str) -> None:
    """A missing number leaves that star without a zero point, and no other."""
    table = ZERO_POINTS[ZERO_POINTS["nu_eff"].notna()].reset_index(drop=True)
    whole = of_table(table).value
    found = of_table(table.assign(**{column: table[column].mask(table.index == 3)}))
    assert np.isnan(found.value[3])
    assert not np.any(found.outside)
    rest = table.index != 3
    np.testing.assert_array_equal(found.value[rest], whole[rest])


@pytest.mark.parametrize("solved", [3, 5, 6])
def test_unknown_solution(solved: int) -> None:
    with pytest.raises(ValueError, match="must be 31 or 95"):
        parallax_zero_point([10.0, 11.0], 1.5, 0.0, [31, solved])


def test_impossible_latitude() -> None:
    with pytest.raises(ValueError, match="between -90 and 90"):
        parallax_zero_point(10.0, 1.5, [0.0, 90.5])


def test_no_rows() -> None:
    found = parallax_zero_point([], [], [])
    assert found.value.shape == found.outside.shape == (0,)


@pytest.mark.published
@pytest.mark.parametrize(("solved", "name"), [(31, "gaia_edr3_z5"), (95, "gaia_edr3_z6")])
def test_coefficients(solved: int, name: str, published_tables: Path) -> None:
    # Lindegren et al. 2021, the tables of the five- and the six-parameter solution.
    original = pd.read_csv(published_tables / f"{name}.csv")
    table = COEFFICIENTS[solved]
    assert list(original.columns) == ["G", *(f"q{j}{k}" for j, k in table.terms)]
    np.testing.assert_array_equal(table.magnitude, original["G"])
    np.testing.assert_array_equal(table.values, original.iloc[:, 1:])
