"""Residuals against sums done by hand, and against data made without noise."""

from __future__ import annotations

from dataclasses import replace

import builders
import handmade
import numpy as np
import pytest

from ladderfit.checks import residuals
from ladderfit.ladder import build_ladder
from ladderfit.result import Diagnostics, Result


@pytest.fixture(scope="module")
def whole() -> Result:
    return handmade.result(handmade.ladder())


def test_one_cepheid_by_hand(whole: Result) -> None:
    table = builders.tables()["cepheids"]
    found = residuals.cepheid_residuals(whole)
    assert found is not None
    row = table[table["ID"] == found.name[0]].iloc[0]
    index = row["Hmag"] - 0.386 * (row["Vmag"] - row["Imag"])
    absolute = index - handmade.MODULI[row["Galaxy"]][0] + 0.2 * (row["OH"] - 8.69)
    line = -5.9 - 3.3 * (np.log10(row["P"]) - 1.0)
    assert found.data[0] == pytest.approx(absolute, abs=1e-10)
    assert found.model[0] == pytest.approx(line, abs=1e-10)
    assert found.residual[0] == pytest.approx(absolute - line, abs=1e-10)
    variance = 0.05**2 + 0.386**2 * 2 * 0.02**2 + 0.07**2
    assert found.sd[0] == pytest.approx(np.sqrt(variance), rel=1e-10)
    assert found.x[0] == pytest.approx(np.log10(row["P"]))


def test_cepheids_scatter_as_they_were_made(whole: Result) -> None:
    found = residuals.cepheid_residuals(whole)
    assert found is not None
    # Made with a scatter of 0.07 mag and no noise, 36 stars.
    assert np.std(found.residual) == pytest.approx(0.07, rel=0.35)
    assert abs(np.mean(found.residual)) < 4 * 0.07 / np.sqrt(len(found))


def test_one_parallax_star_by_hand(whole: Result) -> None:
    table = builders.tables()["anchors.parallaxes"]
    found = residuals.parallax_residuals(whole)
    assert found is not None
    row = table[table["ID"] == found.name[2]].iloc[0]
    index = row["Hmag"] - 0.386 * (row["Vmag"] - row["Imag"])
    absolute = -5.9 - 3.3 * (np.log10(row["P"]) - 1.0) - 0.2 * (row["OH"] - 8.69)
    photometric = 10.0 ** ((10.0 - index + absolute) / 5.0)  # 1 mas at a modulus of 10 mag
    assert found.model[2] == pytest.approx(photometric - 0.01, rel=1e-10)
    assert found.data[2] == row["plx"]
    variance = 0.05**2 + 0.386**2 * 2 * 0.02**2 + 0.07**2
    from_magnitude = np.log(10.0) / 5.0 * photometric * np.sqrt(variance)
    assert found.sd[2] == pytest.approx(np.hypot(0.02, from_magnitude), rel=1e-10)


def test_magnitudes_of_parallaxes_leave_out_the_weak_ones(whole: Result) -> None:
    found = residuals.parallax_magnitudes(whole, least_signal=5.0)
    everything = residuals.parallax_residuals(whole)
    strict = residuals.parallax_magnitudes(whole, least_signal=40.0)
    assert found is not None
    assert everything is not None
    assert strict is not None
    stars, below, above = found
    assert len(strict[0]) < len(stars) <= len(everything)
    assert np.all(below > above)  # a smaller parallax moves a star further than a larger one
    assert np.all(above > 0.0)
    corrected = everything.data[list(everything.name).index(stars.name[0])] + 0.01
    assert below[0] == pytest.approx(5.0 * np.log10(corrected / (corrected - 0.02)))
    # Both ways of looking agree to first order in what is left over.
    parallax = everything.residual[np.isin(everything.name, stars.name)]
    predicted = everything.model[np.isin(everything.name, stars.name)] + 0.01
    assert stars.residual == pytest.approx(5.0 * np.log10(1.0 + parallax / predicted), abs=1e-9)


def test_one_supernova_in_a_host_by_hand(whole: Result) -> None:
    found = residuals.peak_residuals(whole)
    assert found is not None
    place = list(found.name).index("2093c")
    assert found.x[place] == pytest.approx(31.0)
    assert found.residual[place] == pytest.approx(11.75 - 31.0 + 19.3, abs=1e-9)
    assert found.sd[place] == pytest.approx(np.hypot(0.12, 0.1), rel=1e-9)


def test_flow_by_hand(whole: Result) -> None:
    found = residuals.flow_residuals(whole)
    assert found is not None
    z = found.x[0]
    velocity = 299_792.458 * z * (1 + 1.55 / 2 * z - (1.55 - 3 * 0.3025 + 1) / 6 * z**2)
    five_log = np.mean(5.0 * np.log10(whole.draws["hubble_constant"]))
    expected = -19.3 + 25.0 + 5.0 * np.log10(velocity) - five_log
    assert found.model[0] == pytest.approx(expected, abs=1e-9)
    assert residuals.flow_model(whole, [z])[0] == pytest.approx(expected, abs=1e-9)
    peculiar = 5.0 / np.log(10.0) * 250.0 / (299_792.458 * z)
    assert found.sd[0] == pytest.approx(np.sqrt(0.1**2 + 0.1**2 + peculiar**2), rel=1e-9)


@pytest.mark.parametrize("constant", [False, True])
def test_velocities_by_hand(constant: bool) -> None:
    result = handmade.result(handmade.velocity_ladder(constant=constant))
    found = residuals.velocity_residuals(result)
    assert found is not None
    assert found.residual[1] == pytest.approx(650.0 - 470.0 * 0.9 - 20.0 * constant)
    assert found.sd == pytest.approx(180.0)
    assert found.standardised == pytest.approx(found.residual / 180.0)


def test_line_draws_follow_every_draw(whole: Result) -> None:
    lines = residuals.line_draws(whole, [1.0, 2.0])
    assert lines[:, 0] == pytest.approx(whole.draws["zero_point"])
    assert lines[:, 1] - lines[:, 0] == pytest.approx(whole.draws["slope"])


def test_without_a_metallicity_term_none_is_taken_off() -> None:
    choices = builders.choices()
    choices["relation"] = {"pivot": 10.0}
    result = handmade.result(build_ladder(choices, builders.tables()))
    plain = residuals.cepheid_residuals(result)
    assert plain is not None
    assert np.all(np.isfinite(plain.residual))
    stars = result.ladder.cepheids
    assert stars is not None
    assert plain.data == pytest.approx(stars.magnitude - residuals.moduli(result)[stars.host])


@pytest.mark.parametrize(
    ("rung", "present"),
    [
        ("whole", {"cepheid", "parallax", "peak", "flow"}),
        ("no expansion", {"cepheid", "parallax", "peak"}),
        ("relation and distances", {"cepheid", "parallax"}),
        ("relation and parallaxes", {"parallax"}),
        ("supernovae and anchors", {"peak", "flow"}),
        ("supernovae in anchors", {"peak"}),
    ],
)
def test_absent_rungs_give_nothing(rung: str, present: set[str]) -> None:
    result = handmade.result(handmade.ladder(rung))
    for kind in ("cepheid", "parallax", "peak", "flow", "velocity"):
        found = getattr(residuals, f"{kind}_residuals")(result)
        assert (found is not None) == (kind in present), kind
        if found is not None:
            assert np.all(np.isfinite(found.standardised))


def varied(period_error: float = 0.0, metallicity_error: float = 0.0) -> Result:
    """A broken line, a group with its own zero point and scatter, errors of the inputs [dex]."""
    choices, tables = builders.choices(), builders.tables()
    choices["groups"] = {"far": {"hosts": ["Q07"]}}
    choices["relation"] |= {
        "break": 20.0,
        "slope_metallicity": True,
        "zero_points": ["far"],
        "scatter": ["far"],
    }
    choices["anchors"].pop("parallaxes")
    tables.pop("anchors.parallaxes")
    found = build_ladder(choices, tables)
    stars = found.cepheids
    assert stars is not None
    if period_error:
        stars = replace(stars, log_period_error=np.full(len(stars), period_error))
    if metallicity_error:
        stars = replace(stars, metallicity_error=np.full(len(stars), metallicity_error))
    found = replace(found, cepheids=stars)
    numbers = {
        **handmade.NUMBERS,
        **{f"modulus[{host}]": value for host, value in handmade.MODULI.items()},
        "slope_beyond": (-2.9, 0.1),
        "slope_metallicity": (0.3, 0.1),
        "zero_point_offset[far]": (0.05, 0.01),
        "scatter[far]": (0.11, 0.01),
        "metallicity_spread": (0.15, 0.02),
    }
    noise = np.random.default_rng(2).normal(size=100)
    noise -= noise.mean()
    draws = {name: mean + sd * noise for name, (mean, sd) in numbers.items()}
    return Result(found.choices, draws, Diagnostics("direct", 1, {}), found)


def test_every_term_of_the_relation_by_hand() -> None:
    result = varied()
    stars = residuals.cepheid_residuals(result)
    assert stars is not None
    table = builders.tables()["cepheids"].set_index("ID")
    for place in np.flatnonzero(stars.host == result.ladder.hosts.index("Q07")):
        row = table.loc[stars.name[place]]
        x, metals = np.log10(row["P"] / 10.0), row["OH"] - 8.69
        broken = np.log10(2.0)
        line = -5.9 - 3.3 * min(x, broken) - 2.9 * max(x - broken, 0.0)
        terms = -0.2 * metals + 0.3 * x * metals + 0.05
        index = row["Hmag"] - 0.386 * (row["Vmag"] - row["Imag"])
        assert stars.model[place] == pytest.approx(line, abs=1e-9)
        assert stars.data[place] == pytest.approx(index - 31.0 - terms, abs=1e-9)
        measured = 0.05**2 + 0.386**2 * 2 * 0.02**2
        assert stars.sd[place] == pytest.approx(np.sqrt(measured + 0.11**2))
    short, long = residuals.line_draws(result, [0.9, 1.7]).mean(axis=0)
    assert short == pytest.approx(-5.9 + 0.33)
    assert long == pytest.approx(-5.9 - 3.3 * np.log10(2.0) - 2.9 * (0.7 - np.log10(2.0)))


def test_a_period_error_widens_by_the_local_slope() -> None:
    without, found = (residuals.cepheid_residuals(varied(error)) for error in (0.0, 0.02))
    assert without is not None
    assert found is not None
    assert found.residual == pytest.approx(without.residual)
    table = builders.tables()["cepheids"].set_index("ID").loc[found.name]
    slope = np.where(table["P"] > 20.0, -2.9, -3.3) + 0.3 * (table["OH"] - 8.69)
    expected = without.sd**2 + (slope * 0.02) ** 2
    assert found.sd**2 == pytest.approx(expected.to_numpy(), rel=1e-6)


def test_metallicity_errors_pull_towards_the_host() -> None:
    without = residuals.cepheid_residuals(varied())
    found = residuals.cepheid_residuals(varied(metallicity_error=0.15))
    assert without is not None
    assert found is not None
    table = builders.tables()["cepheids"].set_index("ID").loc[found.name]
    slope = -0.2 + 0.3 * np.log10(table["P"] / 10.0)
    off = table["OH"] - table.groupby("Galaxy")["OH"].transform("mean")
    # Errors as large as the spread: half of every deviation is real.
    expected = without.residual + (0.5 * slope * off).to_numpy()
    assert found.residual == pytest.approx(expected, abs=1e-7)
    added = 0.5 * slope**2 * 0.15**2
    assert found.sd**2 == pytest.approx(without.sd**2 + added.to_numpy(), rel=1e-6)
