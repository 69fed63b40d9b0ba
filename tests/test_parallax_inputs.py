"""Sky positions, and the zero-point recipe applied on reading."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import astropy.units as u
import numpy as np
import pandas as pd
import pytest
from astropy.coordinates import Angle, SkyCoord
from test_parallax_terms import SECTION, ladder, table

from ladderfit.choices import Choices
from ladderfit.errors import InputError
from ladderfit.ladder import read_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.physics.sky import ecliptic_latitude, galactic, separations
from ladderfit.physics.zero_point import parallax_zero_point
from ladderfit.sampling.run import draw
from ladderfit.wording import summary_text

RECIPE = {
    "g_magnitude": "G",
    "nu_eff": "nu",
    "pseudocolour": "pc",
    "astrometric_params_solved": "params",
    "ecliptic_latitude": "beta",
}


def catalogue(n: int = 14) -> pd.DataFrame:
    rng = np.random.default_rng(4)
    six = np.arange(n) % 3 == 0
    return (
        table(n)
        .assign(
            nu=np.where(six, np.nan, rng.uniform(1.2, 1.7, n)),
            pc=np.where(six, rng.uniform(1.3, 1.6, n), np.nan),
            params=np.where(six, 95, 31),
            ra=rng.uniform(0.0, 360.0, n),
            dec=rng.uniform(-60.0, 60.0, n),
        )
        .assign(beta=lambda t: ecliptic_latitude(t["ra"], t["dec"]))
    )


def zero_points(stars: pd.DataFrame) -> np.ndarray:
    colour = np.where(stars["params"] == 95, stars["pc"], stars["nu"])
    return parallax_zero_point(stars["G"], colour, stars["beta"], stars["params"]).value


def test_sky_agrees_with_astropy() -> None:
    rng = np.random.default_rng(1)
    ra, dec = rng.uniform(0.0, 360.0, 50), np.rad2deg(np.arcsin(rng.uniform(-1.0, 1.0, 50)))
    there = SkyCoord(ra * u.deg, dec * u.deg)
    longitude, latitude = galactic(ra, dec)
    apart = Angle((longitude - there.galactic.l.deg) * u.deg).wrap_at(180 * u.deg).deg
    np.testing.assert_allclose(apart, 0.0, atol=1e-4)
    np.testing.assert_allclose(latitude, there.galactic.b.deg, atol=1e-4)
    ecliptic = there.barycentricmeanecliptic.lat.deg
    np.testing.assert_allclose(ecliptic_latitude(ra, dec), ecliptic, atol=1e-4)
    exact = there[:, None].separation(there[None, :]).deg
    np.testing.assert_allclose(separations(longitude, latitude), exact, atol=2e-4)


def test_the_recipe_is_applied_once() -> None:
    stars = catalogue()
    section: dict[str, Any] = {"corrected": False, "columns": RECIPE}
    read = ladder(stars, section).parallax_stars
    np.testing.assert_allclose(read.parallax, stars["plx"] - zero_points(stars), rtol=1e-12)
    as_it_is = ladder(stars, section | {"corrected": True}).parallax_stars
    np.testing.assert_array_equal(as_it_is.parallax, stars["plx"])
    back = ladder(stars, section | {"corrected": True}).change({f"{SECTION}.corrected": False})
    np.testing.assert_array_equal(back.parallax_stars.parallax, read.parallax)


def test_the_latitude_may_come_from_the_position() -> None:
    stars = catalogue()
    by_position = {role: name for role, name in RECIPE.items() if role != "ecliptic_latitude"}
    columns = by_position | {"ra": "ra", "dec": "dec"}
    read = ladder(stars, {"corrected": False, "columns": columns}).parallax_stars
    np.testing.assert_allclose(read.parallax, stars["plx"] - zero_points(stars), rtol=1e-12)


def test_stars_outside_the_recipe_are_named() -> None:
    stars = catalogue()
    stars.loc[1, "nu"] = 1.05
    stars.loc[[2, 4], "G"] = 5.5
    notes = ladder(stars, {"corrected": False, "columns": RECIPE}).notes
    assert notes == (
        "parallax stars: S02, S04: G outside the range of the zero-point recipe "
        "(6 to 21 mag); extrapolated",
        "parallax stars: S01: nu or pc outside the range of the zero-point recipe "
        "(1.1 to 1.9 for five parameters, 1.24 to 1.72 for six parameters); extrapolated",
    )
    assert not ladder(stars, {"columns": RECIPE}).notes


FAULTS = {
    "a kind of solution": ("params", 7, "found 7; expected 31 (five parameters) or 95 (six)"),
    "a latitude": ("beta", 123.0, "found 123; expected -90 to 90 degrees"),
}


@pytest.mark.parametrize(("column", "value", "words"), FAULTS.values(), ids=FAULTS)
def test_impossible_cells(column: str, value: float, words: str) -> None:
    stars = catalogue()
    stars.loc[2, column] = value
    with pytest.raises(InputError) as caught:
        ladder(stars, {"corrected": False, "columns": RECIPE})
    assert words in str(caught.value)
    assert "row 3" in str(caught.value)


def test_a_missing_colour_leaves_a_star_out() -> None:
    stars = catalogue()
    stars.loc[0, "pc"] = np.nan
    built = ladder(stars, {"corrected": False, "columns": RECIPE})
    assert built.kept[SECTION].reasons == {"missing nu_eff or pseudocolour": 1}


EVERY = {
    "columns": RECIPE | {"cluster": "cl", "l": "glon", "b": "glat", "extinction": "A_V"},
    "corrected": False,
    "distance_prior": {"disc": {"length": 2.5, "height": 0.1}},
    "offset_slope": True,
    "correlation": {"amplitude": 0.01, "length": 90.0},
    "selection": {"band": "V", "limit": 12.0, "softness": 0.1, "parallax_min": 0.05},
    "clusters": {"A": {"parallax": 0.7, "error": 0.05}},
    "extinction_max": 3.0,
    "min_signal": 1.0,
}


def test_every_choice_is_written_and_read_again(tmp_path: Path) -> None:
    """Through a ladder file, and one key at a time."""
    built = ladder(catalogue(), EVERY)
    again = Choices.from_mapping(built.choices.to_mapping())
    assert again == built.choices
    stars = tmp_path / "stars.csv"
    catalogue().to_csv(stars, index=False)
    named = built.choices.change({f"{SECTION}.table": "stars.csv"})
    write_choices(named, tmp_path / "ladder.toml")
    read = read_ladder(tmp_path / "ladder.toml")
    assert read.choices == named
    np.testing.assert_array_equal(read.parallax_stars.parallax, built.parallax_stars.parallax)
    changed = built.change({f"{SECTION}.distance_prior": {"exponential": 2.0}})
    assert changed.choices.value(f"{SECTION}.distance_prior.exponential") == 2.0
    assert "exponential" in changed.difference(built)


def test_a_ladder_with_every_treatment_is_drawn() -> None:
    changes = {
        f"{SECTION}.min_signal": None,
        f"{SECTION}.selection.parallax_min": None,  # dear; see test_parallax_terms
        "priors.parallax_error_scale": {"log_normal": [1.0, 0.3]},
        "priors.distance_length": {"log_normal": [2.0, 1.0]},
        f"{SECTION}.distance_prior": {"exponential": 2.0},
    }
    two_fields = catalogue()
    two_fields["glon"], two_fields["glat"] = np.where(np.arange(14) < 7, 30.0, 200.0), 1.0
    result = draw(ladder(two_fields, EVERY).change(changes), seed=1, draws=300)
    expected = {"parallax_offset_slope", "parallax_error_scale", "distance_length"}
    assert expected < set(result.headline)
    fields = [name for name in result.draws if name.startswith("parallax_field")]
    assert fields == ["parallax_field[1]", "parallax_field[2]"]
    assert not any(name.startswith("parallax_field") for name in result.headline)
    assert not any("parallax_field" in note for note in result.diagnostics.notes)
    assert all(np.isfinite(values).all() for values in result.draws.values())
    assert "exponentially decreasing density" in summary_text(result)
