"""Coverage of the sample's ladder: right fits inside, wrong ones outside; the design prior."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from small_ladders import small_ladder

from ladderfit.cli import main
from ladderfit.coverage import Design, Experiment, run_coverage
from ladderfit.coverage.quantities import DISTANCE, MAGNITUDE, MEAN_MODULUS
from ladderfit.coverage.words import statement
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.priors import Fixed, HalfNormal, LogNormal, Normal, Uniform
from ladderfit.shipped import sample_ladder

SEED = 1504  # chosen before the first run of these tests


@pytest.fixture(scope="module")
def sample() -> Ladder:
    return read_ladder(sample_ladder())


@pytest.fixture(scope="module")
def right(sample: Ladder, in_full: bool) -> Experiment:
    return run_coverage(sample, 1000 if in_full else 40, seed=SEED, workers=1)


@pytest.mark.full
def test_the_sample_is_covered(right: Experiment) -> None:
    """1,000 ladders in full; the bands are exact for any number."""
    headline = {"slope", "zero_point", "metallicity", "scatter", "parallax_offset"}
    headline |= {"peak_magnitude", "peak_scatter", "hubble_constant"}
    assert headline | {MAGNITUDE, MEAN_MODULUS, "intercept", DISTANCE} == set(right.family)
    assert not right.failures
    assert right.outside == (), statement(right)
    assert "no fault is seen" in statement(right)


@pytest.mark.full
def test_a_scatter_told_too_small_is_found(sample: Ladder, in_full: bool) -> None:
    """Negative control: 30 % in full; 80 % with few ladders."""
    size, part = (1000, 0.7) if in_full else (40, 0.2)
    found = run_coverage(sample, size, seed=SEED, workers=1, told={"scatter": part})
    assert "slope" in found.outside, statement(found)
    assert "do not mean what they say" in statement(found)


@pytest.mark.full
def test_limits_left_out_are_found(sample: Ladder, in_full: bool) -> None:
    """Negative control: magnitude limits of six hosts, and fits that do not know them."""
    if not in_full:
        pytest.skip("1,000 ladders: set LADDERFIT_FULL=1")
    hosts = ("Cadvo", "Dornash", "Elquist", "Fenoru", "Galvesh", "Hestrin")
    stars = sample.cepheids
    assert stars is not None
    assert stars.photometry is not None
    faint = {h: stars.photometry.band[stars.host == sample.hosts.index(h)].max() for h in hosts}
    limits = {host: round(float(value) - 0.1, 2) for host, value in faint.items()}
    limited = sample.change({"cepheids.completeness": {"band": "H", "limits": limits}})
    left_out = {"cepheids.completeness": None}
    found = run_coverage(limited, 1000, seed=SEED, workers=1, changes=left_out)
    assert "slope" in found.outside, statement(found)


def test_fixed_truths_have_shares_and_no_verdict(sample: Ladder) -> None:
    found = run_coverage(sample, 5, seed=SEED, fixed=True, workers=1)
    assert found.design is None
    assert found.outside == ()
    assert np.isnan(found.table()["p"]).all()
    words = statement(found)
    assert "Truths are fixed" in words
    assert "inside their bands" not in words


def test_a_sweep_goes_on_and_gives_the_same(tmp_path: Path) -> None:
    ladder = small_ladder("anchors")
    file = tmp_path / "outcomes.jsonl"
    run_coverage(ladder, 2, seed=9, workers=1, file=file)
    first = file.read_text(encoding="utf-8")
    again = run_coverage(ladder, 4, seed=9, workers=1, file=file)
    assert file.read_text(encoding="utf-8").startswith(first)
    whole = run_coverage(ladder, 4, seed=9, workers=1)
    for name, ranks in whole.ranks.items():
        np.testing.assert_array_equal(ranks, again.ranks[name])
    other = run_coverage(ladder, 4, seed=10, workers=1)
    assert any(np.any(ranks != whole.ranks[name]) for name, ranks in other.ranks.items())


def test_the_design_prior_is_the_posterior_five_times_as_wide(right: Experiment) -> None:
    design = right.design
    assert design is not None
    slope, scatter = design.priors["slope"], design.priors["scatter"]
    assert isinstance(slope, Normal)
    assert slope.deviation == pytest.approx(5.0 * 0.0173, rel=0.1)
    assert isinstance(scatter, LogNormal)
    assert scatter.median == pytest.approx(0.0752, rel=0.01)
    offset = design.priors["parallax_offset"]
    assert isinstance(offset, Normal)
    assert offset.deviation == 0.02  # the ladder's own prior is narrower
    assert set(design.moduli) == set(right_hosts(design))


def right_hosts(design: Design) -> list[str]:
    table = design.table()["parameter"]
    return [name[len("modulus[") : -1] for name in table if name.startswith("modulus[")]


def test_prior_and_correlated_anchors_make_one_normal() -> None:
    """The product of densities, written out, differs from the imposed anchors by a constant."""
    moduli = {"A": Normal(18.0, 0.3), "B": Normal(29.0, 0.2), "C": Normal(31.0, 0.5)}
    measured = {"C": {"modulus": 31.2, "error": 0.1}, "A": {"modulus": 18.1, "error": 0.05}}
    shared = {"s": {"error": 0.08, "loads": {"A": 1.0, "C": 0.5}}}
    choices = {"anchors": {"geometric": measured, "shared_errors": shared}}
    imposed, tables = Design({}, moduli).imposed(choices, {})
    mean = np.array([each["modulus"] for each in imposed["anchors"]["geometric"].values()])
    assert list(imposed["anchors"]["geometric"]) == list(moduli)
    load = np.array([0.5, 1.0]) * 0.08
    own = np.diag([0.1**2, 0.05**2]) + np.outer(load, load)
    rng = np.random.default_rng(4)
    gaps = []
    for point in mean + 0.2 * rng.normal(size=(6, 3)):
        off = point - mean
        made = -0.5 * off @ np.linalg.inv(tables["anchors.covariance"]) @ off
        pairs = zip(moduli.values(), point, strict=True)
        prior = sum(-0.5 * ((x - p.mean) / p.deviation) ** 2 for p, x in pairs)
        miss = point[[2, 0]] - np.array([31.2, 18.1])
        gaps.append(made - prior + 0.5 * miss @ np.linalg.inv(own) @ miss)
    assert np.ptp(gaps) < 1e-9
    assert "shared_errors" not in imposed["anchors"]


def test_priors_that_are_no_normal_keep_their_kind() -> None:
    found = run_coverage(
        small_ladder("anchors").change(
            {"priors": {"scatter": {"half_normal": 0.3}, "slope": {"uniform": [-4.0, -2.0]}}}
        ),
        1,
        workers=1,
    ).design
    assert found is not None
    assert isinstance(found.priors["slope"], Uniform)
    assert isinstance(found.priors["scatter"], HalfNormal | LogNormal)
    assert not any(isinstance(prior, Fixed) for prior in found.priors.values())


def test_the_command_writes_a_folder(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out = tmp_path / "coverage"
    asked = ["coverage", "--repeats", "3", "--workers", "1", "--out", str(out)]
    assert main(asked) == 0
    assert "With 3 ladders only gross faults show" in capsys.readouterr().out
    names = {path.name for path in out.iterdir()}
    assert {"outcomes.jsonl", "coverage.ecsv", "design.ecsv", "ranks.csv"} <= names
    assert {"statement.txt", "coverage.png", "coverage.pdf"} <= names
    assert main([*asked, "--seed", "2"]) == 2
    assert "found the outcomes of another sweep" in capsys.readouterr().err


def test_no_mocks_are_refused(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main(["coverage", "--repeats", "0"])
    assert ended.value.code == 2
    assert "expected a whole number from 1 up" in capsys.readouterr().err
