"""Simulating after an existing ladder: what stays, what is drawn again, and the folder written."""

from __future__ import annotations

import dataclasses
import re
import tomllib
from pathlib import Path

import numpy as np
import pytest
from scipy import stats

from ladderfit.errors import InputError
from ladderfit.ladder import Ladder, build_ladder, read_ladder
from ladderfit.mock import PLAN, mock_from_ladder, plain_truth, write_mock
from ladderfit.mock.redraw import absolute, needed, redraw
from ladderfit.mock.tables import ecsv
from ladderfit.shipped import sample_ladder

TRUTH = PLAN.truth()


@pytest.fixture(scope="module")
def sample() -> Ladder:
    return read_ladder(sample_ladder())


def pulls(ladder: Ladder, seed: int) -> dict[str, np.ndarray]:
    """Deviations from the truth over what the model expects, for one simulation."""
    mock = mock_from_ladder(ladder, TRUTH, np.random.default_rng(seed))
    stars, peaks, flow = mock.cepheids, mock.peaks, mock.flow
    assert stars is not None
    assert peaks is not None
    assert flow is not None
    modulus = np.array([TRUTH[f"modulus[{host}]"] for host in mock.hosts])
    mean = modulus[stars.host] + absolute(mock, stars, TRUTH)
    of_stars = (stars.magnitude - mean) / np.sqrt(stars.variance + TRUTH["scatter"] ** 2)
    of_peaks = peaks.magnitude - modulus[peaks.host] - TRUTH["peak_magnitude"]
    of_peaks /= np.sqrt(peaks.variance + TRUTH["peak_scatter"] ** 2)
    z, light = flow.redshift, 299792.458
    series = 1.0 + 0.775 * z - (1.55 - 3.0 * 0.55**2 + 1.0) / 6.0 * z**2
    distance = (1.0 + flow.redshift_heliocentric) / (1.0 + z) * light * z * series
    expected = TRUTH["peak_magnitude"] + 25.0 + 5.0 * np.log10(distance / TRUTH["hubble_constant"])
    variance = flow.variance + TRUTH["peak_scatter"] ** 2
    variance = variance + (5.0 / np.log(10.0) * 250.0 / (light * z)) ** 2
    anchors = [
        (anchor.modulus - TRUTH[f"modulus[{anchor.name}]"]) / anchor.error
        for anchor in mock.geometric
    ]
    return {
        "stars": of_stars,
        "peaks": of_peaks,
        "flow": (flow.magnitude - expected) / np.sqrt(variance),
        "anchors": np.array(anchors),
    }


def test_data_scatter_about_the_truth_as_the_model_says(sample: Ladder) -> None:
    found = [pulls(sample, seed) for seed in range(40)]
    for name in found[0]:
        pull = np.concatenate([one[name] for one in found])
        n = len(pull)
        assert n >= 80
        assert abs(pull.mean()) < 5.0 / np.sqrt(n), name
        assert abs(pull.std() - 1.0) < 5.0 / np.sqrt(2.0 * n), name


def test_parallaxes_and_magnitudes_share_one_true_modulus(sample: Ladder) -> None:
    plain = sample.parallax_stars
    assert plain is not None
    deviations = []
    for seed in range(40):
        mock = mock_from_ladder(sample, TRUTH, np.random.default_rng(seed), (6.0, 8.0))
        stars = mock.parallax_stars
        assert stars is not None
        assert stars.parallax is not None
        assert stars.parallax_error is not None
        np.testing.assert_array_equal(stars.star, plain.star)
        assert stars.parallax.min() > 10.0 ** (2.0 - 1.6) - 0.3
        assert stars.parallax.max() < 10.0 ** (2.0 - 1.2) + 0.3
        # Near stars: the parallax gives the modulus to well under the scatter.
        modulus = 10.0 - 5.0 * np.log10(stars.parallax - TRUTH["parallax_offset"])
        error = stars.parallax_error / stars.parallax * 5.0 / np.log(10.0)
        variance = stars.variance + TRUTH["scatter"] ** 2 + error**2
        mean = modulus + absolute(mock, stars, TRUTH)
        deviations.append((stars.magnitude - mean) / np.sqrt(variance))
    pull = np.concatenate(deviations)
    assert abs(pull.mean()) < 5.0 / np.sqrt(len(pull))
    assert abs(pull.std() - 1.0) < 5.0 / np.sqrt(2.0 * len(pull))


def ranks_of_parallaxes(ladder: Ladder, assumed: dict[str, float]) -> np.ndarray:
    """Where each simulated parallax falls in what is expected of it, given the magnitude."""
    steps = np.linspace(-8.0, 8.0, 401)
    weights = stats.norm.pdf(steps) / stats.norm.pdf(steps).sum()
    ranks = []
    for seed in range(15):
        stars = mock_from_ladder(ladder, TRUTH, np.random.default_rng(seed)).parallax_stars
        assert stars is not None
        assert stars.parallax is not None
        variance = (stars.variance + assumed["scatter"] ** 2)[:, None]
        near = (stars.magnitude - absolute(ladder, stars, assumed))[:, None]
        if ladder.choices.anchors.parallaxes.distance_prior == "uniform in volume":
            near = near + 0.6 * np.log(10.0) * variance
        true = 10.0 ** (2.0 - 0.2 * (near + np.sqrt(variance) * steps))
        miss = stars.parallax[:, None] - true - assumed["parallax_offset"]
        ranks.append(stats.norm.cdf(miss / stars.parallax_error[:, None]) @ weights)
    return np.concatenate(ranks)


@pytest.mark.parametrize("prior", ["flat in modulus", "uniform in volume"])
def test_parallaxes_are_as_the_magnitudes_have_them(sample: Ladder, prior: str) -> None:
    ladder = sample.change({"anchors.parallaxes.distance_prior": prior})
    assert stats.kstest(ranks_of_parallaxes(ladder, TRUTH), "uniform").pvalue > 1e-4
    wrong = {**TRUTH, "zero_point": TRUTH["zero_point"] + 0.05}
    assert stats.kstest(ranks_of_parallaxes(ladder, wrong), "uniform").pvalue < 1e-6


def test_moduli_follow_the_distance_prior(sample: Ladder) -> None:
    volume = sample.change({"anchors.parallaxes.distance_prior": "uniform in volume"})
    means = {}
    for name, ladder in (("flat", sample), ("volume", volume)):
        found = []
        for seed in range(20):
            stars = mock_from_ladder(
                ladder, TRUTH, np.random.default_rng(seed), (5.0, 8.0)
            ).parallax_stars
            assert stars is not None
            found.append(stars.magnitude - absolute(ladder, stars, TRUTH))
        means[name] = float(np.concatenate(found).mean())
    assert means["flat"] == pytest.approx(6.5, abs=0.15)
    edge = 10.0 ** (-0.6 * 3.0)
    slope = 0.6 * np.log(10.0)
    mean_below = 1.0 / slope - 3.0 * edge / (1.0 - edge)
    assert means["volume"] == pytest.approx(8.0 - mean_below, abs=0.1)


def test_what_is_exact_stays(sample: Ladder) -> None:
    mock = mock_from_ladder(sample, TRUTH, np.random.default_rng(1))
    assert mock.hosts == sample.hosts
    assert [anchor.name for anchor in mock.geometric] == ["Tavin", "Orsell"]
    for name in ("cepheids", "parallax_stars"):
        before, after = getattr(sample, name), getattr(mock, name)
        np.testing.assert_array_equal(after.star, before.star)
        np.testing.assert_array_equal(after.host, before.host)
        np.testing.assert_allclose(after.log_period, before.log_period, atol=1e-9)
        np.testing.assert_allclose(after.variance, before.variance, rtol=1e-6)
        np.testing.assert_allclose(after.metallicity, before.metallicity, atol=1e-7)
    assert mock.cepheids is not None
    assert sample.cepheids is not None
    assert (mock.cepheids.magnitude != sample.cepheids.magnitude).all()
    assert mock.parallax_stars is not None
    assert sample.parallax_stars is not None
    np.testing.assert_allclose(
        mock.parallax_stars.magnitude, sample.parallax_stars.magnitude, rtol=1e-7
    )
    assert (mock.parallax_stars.parallax != sample.parallax_stars.parallax).all()
    assert sample.flow is not None
    assert mock.flow is not None
    np.testing.assert_allclose(mock.flow.redshift, sample.flow.redshift, rtol=1e-9)
    np.testing.assert_allclose(
        mock.flow.redshift_heliocentric, sample.flow.redshift_heliocentric, rtol=1e-9
    )
    kept = ("relation", "hosts", "priors", "sampling")
    before, after = sample.choices.to_mapping(), mock.choices.to_mapping()
    assert {key: after.get(key) for key in kept} == {key: before.get(key) for key in kept}
    assert after["cepheids"]["periods"] == before["cepheids"]["periods"]
    assert after["expansion"]["redshifts"] == before["expansion"]["redshifts"]


def test_same_seed_same_data_other_seed_other(sample: Ladder) -> None:
    one, again, other = (redraw(sample, TRUTH, np.random.default_rng(seed)) for seed in (3, 3, 4))
    for section, table in one.tables.items():
        assert ecsv(table) == ecsv(again.tables[section])
        assert ecsv(table) != ecsv(other.tables[section])
    assert one.choices == again.choices
    assert one.choices != other.choices


def test_a_missing_truth_is_named(sample: Ladder) -> None:
    lacking = {name: value for name, value in TRUTH.items() if name != "modulus[Brelin]"}
    with pytest.raises(InputError, match=r"no true value.*modulus\[Brelin\]"):
        mock_from_ladder(sample, lacking, np.random.default_rng(1))


@pytest.mark.parametrize(
    ("changes", "complaint"),
    [
        (
            {
                "anchors.parallaxes.offset_slope": True,
                "anchors.parallaxes.columns.g_magnitude": "Vmag",
            },
            "key anchors.parallaxes.offset_slope: found true;",
        ),
    ],
)
def test_a_term_the_simulator_does_not_know_is_refused(
    sample: Ladder, changes: dict[str, object], complaint: str
) -> None:
    with pytest.raises(InputError, match=re.escape(complaint)):
        mock_from_ladder(sample.change(changes), TRUTH, np.random.default_rng(1))


@pytest.mark.parametrize("part", ["log_period_error", "metallicity_error"])
def test_errors_of_inputs_in_an_endless_volume_are_refused(sample: Ladder, part: str) -> None:
    volume = sample.change({"anchors.parallaxes.distance_prior": "uniform in volume"})
    stars = volume.parallax_stars
    assert stars is not None
    odd = dataclasses.replace(stars, **{part: np.full(len(stars), 0.01)})
    ladder = dataclasses.replace(volume, parallax_stars=odd)
    truth = TRUTH | {"metallicity_spread": 0.1, "parallax_metallicity": 0.0}
    with pytest.raises(InputError, match="errors of periods or metallicities in an endless volume"):
        mock_from_ladder(ladder, truth, np.random.default_rng(1))


def test_plain_truth_is_near_the_data(sample: Ladder) -> None:
    truth = plain_truth(sample)
    assert set(truth) == set(needed(sample)) == set(TRUTH)
    assert truth["slope"] == -3.3
    assert truth["hubble_constant"] == 70.0
    assert truth["modulus[Tavin]"] == sample.choices.anchors.geometric["Tavin"].modulus
    for host in sample.hosts:
        name = f"modulus[{host}]"
        assert truth[name] == pytest.approx(TRUTH[name], abs=0.35)


def test_an_anchor_out_of_use_is_a_plain_host(sample: Ladder) -> None:
    without = sample.change({"anchors.geometric.Tavin.use": False, "anchors.parallaxes.use": False})
    mock = mock_from_ladder(without, TRUTH, np.random.default_rng(1))
    assert [anchor.name for anchor in mock.geometric] == ["Orsell"]
    assert mock.parallax_stars is None
    assert "Tavin" in mock.hosts
    assert "parallax_offset" not in needed(without)


def test_without_metallicity_and_third_rung(sample: Ladder) -> None:
    short = sample.change({"relation.metallicity": "none", "supernovae": None, "expansion": None})
    assert "metallicity" not in needed(short)
    mock = mock_from_ladder(short, TRUTH, np.random.default_rng(1))
    assert mock.peaks is None
    assert mock.flow is None
    assert mock.cepheids is not None
    assert np.isnan(mock.cepheids.metallicity).all()


def test_a_published_intercept_is_measured_again(sample: Ladder) -> None:
    published = sample.change(
        {
            "expansion.table": None,
            "expansion.columns": None,
            "expansion.intercept": {"value": 0.7, "error": 0.002},
        }
    )
    a = np.log10(TRUTH["hubble_constant"]) - 0.2 * TRUTH["peak_magnitude"] - 5.0
    values = []
    for seed in range(60):
        mock = mock_from_ladder(published, TRUTH, np.random.default_rng(seed))
        expansion = mock.choices.expansion
        assert expansion is not None
        assert expansion.intercept is not None
        values.append((expansion.intercept.value - a) / 0.002)
    assert abs(np.mean(values)) < 5.0 / np.sqrt(60.0)
    assert abs(np.std(values) - 1.0) < 5.0 / np.sqrt(120.0)


def test_velocities_against_distances() -> None:
    choices = {
        "expansion": {
            "columns": {"name": "name", "distance": "r", "velocity": "v"},
            "velocity_constant": True,
        }
    }
    distance = np.linspace(1.0, 20.0, 500)
    names = [f"Neb-{number}" for number in range(500)]
    ladder = build_ladder(
        choices, {"expansion": {"name": names, "r": distance, "v": 70.0 * distance}}
    )
    truth = {"hubble_constant": 80.0, "velocity_scatter": 150.0, "velocity_constant": -40.0}
    assert set(needed(ladder)) == set(truth)
    mock = mock_from_ladder(ladder, truth, np.random.default_rng(2)).velocities
    assert mock is not None
    np.testing.assert_allclose(mock.distance, distance, rtol=1e-9)
    deviation = mock.velocity - 80.0 * distance + 40.0
    assert abs(deviation.mean()) < 5.0 * 150.0 / np.sqrt(500.0)
    assert abs(deviation.std() / 150.0 - 1.0) < 5.0 / np.sqrt(1000.0)


# --- the folder ----------------------------------------------------------------------------


def test_a_folder_of_simulated_data(tmp_path: Path, sample: Ladder) -> None:
    out = tmp_path / "mock"
    path = write_mock(sample_ladder(), out, seed=9)
    assert path == out / "ladder.toml"
    assert sorted(item.name for item in out.iterdir()) == [
        "cepheids.ecsv",
        "expansion.ecsv",
        "ladder.toml",
        "parallax_stars.ecsv",
        "supernovae.ecsv",
        "truth.toml",
    ]
    record = tomllib.loads((out / "truth.toml").read_text("utf-8"))
    assert record["seed"] == 9
    assert record["truth"] == plain_truth(sample)
    written, direct = (
        read_ladder(path),
        mock_from_ladder(sample, record["truth"], np.random.default_rng(9)),
    )
    assert written.hosts == direct.hosts == sample.hosts
    for name in ("cepheids", "parallax_stars", "peaks", "flow"):
        one, two = getattr(written, name), getattr(direct, name)
        np.testing.assert_array_equal(one.magnitude, two.magnitude)
        np.testing.assert_array_equal(one.variance, two.variance)
    assert written.geometric == direct.geometric


def test_the_folder_is_the_same_for_the_same_seed(tmp_path: Path) -> None:
    for name, seed in (("one", 1), ("again", 1), ("other", 2)):
        write_mock(sample_ladder(), tmp_path / name, seed)
    contents = {
        name: {item.name: item.read_bytes() for item in (tmp_path / name).iterdir()}
        for name in ("one", "again", "other")
    }
    assert contents["one"] == contents["again"]
    assert contents["one"] != contents["other"]


def test_stated_truth_wins_and_strangers_are_refused(tmp_path: Path) -> None:
    write_mock(sample_ladder(), tmp_path / "steep", 1, {"slope": -4.0})
    record = tomllib.loads((tmp_path / "steep" / "truth.toml").read_text("utf-8"))
    assert record["truth"]["slope"] == -4.0
    with pytest.raises(InputError, match="a true value for colour"):
        write_mock(sample_ladder(), tmp_path / "odd", 1, {"colour": 1.0})
    assert not (tmp_path / "odd").exists()


def test_an_existing_folder_is_not_overwritten(tmp_path: Path) -> None:
    (tmp_path / "mine").mkdir()
    with pytest.raises(InputError, match="nothing is overwritten"):
        write_mock(sample_ladder(), tmp_path / "mine", 1)
    assert list((tmp_path / "mine").iterdir()) == []
