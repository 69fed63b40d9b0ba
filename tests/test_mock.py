"""The simulator: what it promises of its tables, and that the sample is what it makes.

Statistical tolerances are five standard errors of the quantity compared, so
that a right simulator fails about once in two million seeds; seeds are fixed.
"""

from __future__ import annotations

import dataclasses
import subprocess
import sys
import tomllib
from pathlib import Path

import numpy as np
import pytest
from astropy.cosmology import FlatLambdaCDM
from astropy.table import Table
from scipy import stats

from ladderfit.choices import Choices
from ladderfit.mock import PLAN, SEED, Host, Plan, simulate, write_sample
from ladderfit.mock.peaks import LIGHT, host_supernovae, luminosity_distance
from ladderfit.mock.scenario import sample_files
from ladderfit.mock.stars import (
    BANDS,
    absolute_index,
    host_stars,
    milky_way_stars,
    photometry,
    shine,
)
from ladderfit.mock.tables import ecsv, number_column, text_column, truth_toml
from ladderfit.names import parameter
from ladderfit.shipped import sample_ladder

CROWD = Host("Crowd", 18.5, 20_000, 3.0, 0.3, 8.8, 0.4, overtones=0.3)
BIG = Plan(hosts=(CROWD,), parallax_stars=20_000)


def within(values: np.ndarray, expected: float, errors: float = 5.0) -> bool:
    """Whether a mean agrees with what is expected."""
    return bool(abs(values.mean() - expected) < errors * values.std() / np.sqrt(len(values)))


def spread_is(values: np.ndarray, expected: float, errors: float = 5.0) -> bool:
    """Whether a standard deviation of normal values agrees with what is expected."""
    return bool(abs(values.std() / expected - 1.0) < errors / np.sqrt(2.0 * len(values)))


def index(magnitudes: dict[str, np.ndarray], ratio: float) -> np.ndarray:
    return magnitudes["H"] - ratio * (magnitudes["V"] - magnitudes["I"])


def seen_index(table: Table, ratio: float) -> np.ndarray:
    seen = table["Hmag"] - ratio * (table["Vmag"] - table["Imag"])
    return np.ma.filled(np.ma.asarray(seen, dtype=float), np.nan)


# --- stars ---------------------------------------------------------------------------------


def test_the_index_knows_neither_dust_nor_colour() -> None:
    period, metals, modulus = np.full(500, 12.0), np.full(500, 8.7), np.full(500, 20.0)
    clear, dusty = (
        shine(PLAN, np.random.default_rng(4), period, metals, modulus, reddening)
        for reddening in (0.0, 0.8)
    )
    assert np.ptp(dusty["V"] - clear["V"]) > 1.0
    np.testing.assert_allclose(index(dusty, PLAN.ratio), index(clear, PLAN.ratio), atol=1e-12)
    wrong = index(dusty, 0.5) - index(clear, 0.5)
    assert np.ptp(wrong) > 0.1


def test_colour_excess_and_absorption() -> None:
    period, metals, modulus = np.full(20_000, 12.0), np.full(20_000, 8.7), np.zeros(20_000)
    clear, dusty = (
        shine(PLAN, np.random.default_rng(5), period, metals, modulus, reddening)
        for reddening in (0.0, 0.4)
    )
    absorbed = {band: dusty[band] - clear[band] for band in BANDS}
    excess = absorbed["V"] - absorbed["I"]
    assert (excess >= 0.0).all()
    assert within(excess, 0.4)
    np.testing.assert_allclose(absorbed["H"], PLAN.ratio * excess, atol=1e-12)
    assert (absorbed["V"] >= absorbed["I"]).all()


def test_stars_scatter_about_the_relation() -> None:
    stars = host_stars(BIG, np.random.default_rng(6), CROWD)
    mean = CROWD.modulus + absolute_index(BIG, stars.fundamental, stars.metallicity)
    deviation = index(stars.magnitudes, BIG.ratio) - mean
    assert within(deviation, 0.0)
    assert spread_is(deviation, BIG.scatter)
    for cause in (np.log10(stars.fundamental), stars.metallicity):
        line = stats.linregress(cause, deviation)
        assert abs(line.slope) < 5.0 * line.stderr


def test_the_relation_at_pivot_and_reference() -> None:
    at_pivot = absolute_index(PLAN, np.array([10.0]), np.array([PLAN.reference]))
    longer = absolute_index(PLAN, np.array([100.0]), np.array([PLAN.reference]))
    richer = absolute_index(PLAN, np.array([10.0]), np.array([PLAN.reference + 1.0]))
    assert at_pivot[0] == PLAN.zero_point
    assert longer[0] - at_pivot[0] == pytest.approx(PLAN.slope)
    assert richer[0] - at_pivot[0] == pytest.approx(PLAN.metallicity)


def test_periods_decline_within_bounds_and_metals_fall_outwards() -> None:
    stars = host_stars(BIG, np.random.default_rng(7), CROWD)
    log_period = np.log10(stars.fundamental)
    assert log_period.min() >= np.log10(CROWD.shortest)
    assert log_period.max() <= np.log10(BIG.longest)
    counts, _ = np.histogram(log_period, bins=5)
    assert (np.diff(counts) < 0).all()
    assert within(stars.metallicity, CROWD.metallicity - 0.5 * CROWD.gradient)


def test_overtones_are_short_and_bright_at_their_period() -> None:
    stars = host_stars(BIG, np.random.default_rng(8), CROWD)
    over = stars.overtone
    assert 0.1 < over[stars.fundamental < BIG.overtone_limit].mean() < 0.5
    assert stars.fundamental[over].max() < BIG.overtone_limit
    assert (stars.period[~over] == stars.fundamental[~over]).all()
    ratio = stars.period[over] / stars.fundamental[over]
    assert 0.68 < ratio.min() < ratio.max() < 0.72
    excess = index(stars.magnitudes, BIG.ratio) - CROWD.modulus
    excess -= absolute_index(BIG, stars.period, stars.metallicity)
    assert excess[over].mean() == pytest.approx(-0.51, abs=0.05)
    assert abs(excess[~over].mean()) < 0.005


def test_photometric_errors_are_what_they_say_and_grow_with_faintness() -> None:
    stars = host_stars(BIG, np.random.default_rng(9), CROWD)
    far = dataclasses.replace(CROWD, modulus=31.0)
    faint = host_stars(BIG, np.random.default_rng(9), far)
    for sample, limits in ((stars, (0.01, 0.04)), (faint, (0.1, 0.7))):
        seen = photometry(sample, np.random.default_rng(10))
        for band in BANDS:
            pull = (seen[band] - sample.magnitudes[band]) / seen[f"e_{band}"]
            assert within(np.asarray(pull), 0.0)
            assert abs(np.asarray(pull).std() - 1.0) < 0.03
        assert limits[0] < np.median(np.asarray(seen["e_H"])) < limits[1]


def test_parallaxes_follow_the_true_moduli() -> None:
    _, modulus = milky_way_stars(BIG, np.random.default_rng(11))
    low, high = BIG.parallax_moduli
    assert stats.kstest(modulus, stats.uniform(low, high - low).cdf).pvalue > 1e-4
    rng = np.random.default_rng(12)
    of_stars = np.random.default_rng(12).spawn(5)[1]
    table = simulate(BIG, rng).parallax_stars
    _, modulus = milky_way_stars(BIG, of_stars)
    kept = ~table["plx"].mask
    pull = (table["plx"] - BIG.parallax_offset - 1.0 / 10.0 ** (0.2 * modulus - 2.0))[kept]
    pull = np.asarray(pull / table["e_plx"][kept])
    assert within(pull, 0.0)
    assert spread_is(pull, 1.0)


# --- supernovae and anchors ----------------------------------------------------------------


def test_peaks_scatter_about_the_standard() -> None:
    hosts = tuple(dataclasses.replace(CROWD, modulus=mu, supernovae=4000) for mu in (30.0, 32.0))
    table = host_supernovae(dataclasses.replace(BIG, hosts=hosts), np.random.default_rng(13))
    modulus = np.repeat([30.0, 32.0], 4000)
    pull = np.asarray(table["mB"]) - modulus - PLAN.peak_magnitude
    pull /= np.hypot(PLAN.peak_scatter, np.asarray(table["e_mB"]))
    assert within(pull, 0.0)
    assert spread_is(pull, 1.0)


def test_the_flow_follows_the_expansion() -> None:
    plan = dataclasses.replace(BIG, flow=20_000, flow_outside=500, parallax_stars=10)
    flow = simulate(plan, np.random.default_rng(14)).flow
    z, heliocentric = np.asarray(flow["zcmb"]), np.asarray(flow["zhel"])
    low, high = plan.flow_redshifts
    inside = (z >= low) & (z <= high)
    assert inside.sum() == plan.flow
    assert (z < low).any()
    assert (z > high).any()
    assert np.abs(heliocentric - z).max() < 1.2 * 369.0 / LIGHT
    distance = luminosity_distance(z, plan.hubble_constant, plan.q0, plan.j0)
    distance *= (1.0 + heliocentric) / (1.0 + z)
    mean = plan.peak_magnitude + 25.0 + 5.0 * np.log10(distance)
    peculiar = 5.0 / np.log(10.0) * plan.peculiar_velocity / (LIGHT * z)
    sd = np.sqrt(plan.peak_scatter**2 + np.asarray(flow["e_mB"]) ** 2 + peculiar**2)
    pull = ((np.asarray(flow["mB"]) - mean) / sd)[inside]
    assert within(pull, 0.0)
    assert spread_is(pull, 1.0)


def test_the_distance_series_agrees_with_an_integral() -> None:
    z = np.array([0.01, 0.05, 0.1, 0.15])
    exact = FlatLambdaCDM(H0=71.3, Om0=0.3, Tcmb0=0.0).luminosity_distance(z).to_value("Mpc")
    series = luminosity_distance(z, 71.3, q0=-0.55, j0=1.0)
    np.testing.assert_allclose(series, exact, rtol=3e-4)
    assert np.abs(luminosity_distance(z, 71.3, q0=0.5, j0=1.0) / exact - 1.0)[-1] > 0.05


def test_anchor_moduli_scatter_by_their_errors() -> None:
    host = Host("Anchor", 18.5, 2, geometric_error=0.025)
    plan = Plan(hosts=(host, Host("Other", 20.0, 2)), parallax_stars=2, flow=2, flow_outside=0)
    anchors = [simulate(plan, np.random.default_rng(seed)).anchors for seed in range(200)]
    assert all(set(found) == {"Anchor"} for found in anchors)
    pull = np.array([(found["Anchor"][0] - 18.5) / found["Anchor"][1] for found in anchors])
    assert within(pull, 0.0)
    assert spread_is(pull, 1.0)


# --- seeds, tables and the sample ----------------------------------------------------------


def test_same_seed_same_survey_other_seed_other() -> None:
    one, again, other = (
        simulate(PLAN, np.random.default_rng(seed)) for seed in (SEED, SEED, SEED + 1)
    )
    for name in ("cepheids", "parallax_stars", "supernovae", "flow"):
        assert ecsv(getattr(one, name)) == ecsv(getattr(again, name))
        assert ecsv(getattr(one, name)) != ecsv(getattr(other, name))
    assert one.anchors == again.anchors
    assert one.truth == other.truth


def test_each_table_has_its_own_randomness() -> None:
    shorter = dataclasses.replace(PLAN, flow=20, parallax_stars=12)
    one, other = (simulate(plan, np.random.default_rng(1)) for plan in (PLAN, shorter))
    assert ecsv(one.cepheids) == ecsv(other.cepheids)
    assert ecsv(one.supernovae) == ecsv(other.supernovae)


def test_the_shipped_sample_is_what_the_seed_makes(tmp_path: Path) -> None:
    write_sample(tmp_path / "again")
    made = {path.name: path.read_bytes() for path in (tmp_path / "again").iterdir()}
    shipped = {path.name: path.read_bytes() for path in sample_ladder().parent.iterdir()}
    assert made == {name: shipped.get(name) for name in made}
    assert set(shipped) - set(made) == {"claims.toml"}  # written by hand


def test_the_sample_from_the_command_line(tmp_path: Path) -> None:
    command = [sys.executable, "-m", "ladderfit.mock"]
    subprocess.run([*command, str(tmp_path / "new")], check=True)
    made = {path.name: path.read_text("utf-8") for path in (tmp_path / "new").iterdir()}
    assert made == sample_files()
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 1
    assert "usage" in done.stderr


def test_the_sample_is_as_large_as_described() -> None:
    folder = sample_ladder().parent
    cepheids = Table.read(folder / "cepheids.ecsv")
    galaxies, counts = np.unique(np.asarray(cepheids["Galaxy"]), return_counts=True)
    count = dict(zip(galaxies.tolist(), counts.tolist(), strict=True))
    anchors = {host.name for host in PLAN.hosts if host.geometric_error is not None}
    hosts = set(count) - anchors
    assert len(anchors) == 2
    assert len(hosts) == 20
    assert min(count[host] for host in hosts) == 15
    assert max(count[host] for host in hosts) == 150
    assert count["Tavin"] > 100
    assert set(np.asarray(cepheids["Mode"]).tolist()) == {"F", "1O"}
    assert len(Table.read(folder / "parallax_stars.ecsv")) == 70
    supernovae = Table.read(folder / "supernovae.ecsv")
    assert len(supernovae) == 25
    assert set(np.asarray(supernovae["Galaxy"]).tolist()) == hosts
    z = np.asarray(Table.read(folder / "flow.ecsv")["zcmb"])
    assert ((z >= 0.023) & (z <= 0.15)).sum() == 250
    assert len(z) > 250


def test_a_few_values_are_missing() -> None:
    folder = sample_ladder().parent
    for name, count in (("cepheids", 12), ("parallax_stars", 3), ("supernovae", 0)):
        table = Table.read(folder / f"{name}.ecsv")
        masked = sum(int(np.ma.getmaskarray(table[column]).sum()) for column in table.colnames)
        assert masked == count


def test_the_truth_is_recorded() -> None:
    record = tomllib.loads((sample_ladder().parent / "truth.toml").read_text("utf-8"))
    assert record["seed"] == SEED
    assert record["truth"] == PLAN.truth()
    for name in record["truth"]:
        assert parameter(name).name in name
    assert len(record["truth"]) == 8 + len(PLAN.hosts)


def test_the_ladder_file_holds_the_measured_anchors() -> None:
    choices = Choices.from_mapping(tomllib.loads(sample_ladder().read_text("utf-8")))
    mock = simulate(PLAN, np.random.default_rng(SEED))
    assert {
        name: (anchor.modulus, anchor.error) for name, anchor in choices.anchors.geometric.items()
    } == dict(mock.anchors)
    truths = [mock.truth[f"modulus[{name}]"] for name in mock.anchors]
    assert truths != [modulus for modulus, _ in mock.anchors.values()]


def test_tables_read_back_equal(tmp_path: Path) -> None:
    mock = simulate(PLAN, np.random.default_rng(3))
    for name in ("cepheids", "parallax_stars", "supernovae", "flow"):
        table = getattr(mock, name)
        path = tmp_path / f"{name}.ecsv"
        path.write_text(ecsv(table), encoding="utf-8")
        back = Table.read(path)
        assert back.colnames == table.colnames
        for column in table.colnames:
            assert back[column].unit == table[column].unit
            assert back[column].description == table[column].description
            mask = np.ma.getmaskarray(table[column])
            np.testing.assert_array_equal(np.ma.getmaskarray(back[column]), mask)
            np.testing.assert_array_equal(
                np.ma.getdata(back[column])[~mask], np.ma.getdata(table[column])[~mask]
            )


def test_awkward_text_and_missing_numbers_survive(tmp_path: Path) -> None:
    table = Table(
        [
            text_column("name", ["two words", "plain"], "a star's name"),
            number_column("value", [np.nan, -0.12345], 3, "mag", "rounded"),
        ]
    )
    path = tmp_path / "awkward.ecsv"
    path.write_text(ecsv(table), encoding="utf-8")
    back = Table.read(path)
    assert back["name"].tolist() == ["two words", "plain"]
    assert back["name"].description == "a star's name"
    assert back["value"].mask.tolist() == [True, False]
    assert back["value"][1] == -0.123


def test_truth_text_is_toml() -> None:
    text = truth_toml({"slope": -3.28, "modulus[A B]": 29.0}, 7, "Remark.")
    assert tomllib.loads(text) == {"seed": 7, "truth": {"slope": -3.28, "modulus[A B]": 29.0}}


def test_seen_index_of_the_sample_is_finite_where_nothing_is_missing() -> None:
    mock = simulate(PLAN, np.random.default_rng(SEED))
    seen = seen_index(mock.cepheids, PLAN.ratio)
    lacking = np.zeros(len(seen), bool)
    for band in BANDS:
        lacking |= mock.cepheids[f"{band}mag"].mask
    np.testing.assert_array_equal(np.isnan(seen), lacking)
