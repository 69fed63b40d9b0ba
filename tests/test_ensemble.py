"""Ensembles on densities whose answer is known: moves, starts, warm-up and what draws are worth."""

from __future__ import annotations

import itertools
from dataclasses import replace
from pathlib import Path

import emcee
import numpy as np
import pytest

from ladderfit.errors import SamplingError
from ladderfit.sampling.chain_file import ChainFile
from ladderfit.sampling.chain_layout import Header
from ladderfit.sampling.chain_reading import read_chain
from ladderfit.sampling.convergence import (
    Goal,
    Report,
    ensemble_ess,
    ensemble_rhat,
    report,
)
from ladderfit.sampling.direct import Target
from ladderfit.sampling.ensemble import advance, layout, start
from ladderfit.sampling.grow import grow, is_look
from ladderfit.sampling.moves import SnookerMove


def normal_target(scale: np.ndarray) -> Target:
    d = len(scale)

    def log_density(z: np.ndarray) -> np.ndarray:
        return -0.5 * np.sum((z / scale) ** 2, axis=1)

    return Target(log_density, np.full(d, 0.1), 3.0 * scale, np.zeros(d, bool))


def drawn(target: Target, rows: int, seed: int = 1, ensembles: int = 4) -> np.ndarray:
    """Rows after the start, shape (rows, ensembles, walkers, d)."""
    plan = layout(len(target.start), ensembles)
    steps = advance(target.log_density, plan, start(target, plan, seed).states)
    return np.array([[s.z for s in states] for states in itertools.islice(steps, rows)])


def variance_left(move: emcee.moves.Move, scale: float, steps: int = 1500) -> tuple[float, float]:
    """Variance over the true one of a normal in 3 dimensions, moved by `move` alone; its error."""
    target = normal_target(np.full(3, scale))
    sampler = emcee.EnsembleSampler(60, 3, target.log_density, moves=move, vectorize=True)
    random = np.random.RandomState(4)
    begin = emcee.State(scale * random.randn(60, 3), random_state=random.get_state())
    states = sampler.sample(begin, iterations=steps, store=False)
    z = np.array([state.coords.copy() for state in states])[steps // 10 :] / scale
    by_block = np.array([np.mean(part**2) for part in np.array_split(z, 20)])
    return float(by_block.mean()), float(by_block.std() / np.sqrt(20))


@pytest.mark.parametrize("scale", [0.1, 1.0, 10.0])
def test_the_snooker_move_leaves_the_posterior_as_it_is(scale: float) -> None:
    variance, error = variance_left(SnookerMove(), scale)
    assert variance == pytest.approx(1.0, abs=4.0 * error)
    assert error < 0.03


class Uncorrected(SnookerMove):
    """Forgets the change of volume."""

    def get_proposal(self, moving, others, random):
        moved, factor = super().get_proposal(moving, others, random)
        return moved, 0.0 * factor


def test_a_wrong_snooker_move_is_found_out() -> None:
    """Negative control."""
    variance, error = variance_left(Uncorrected(), 1.0)
    assert abs(variance - 1.0) > 6.0 * error


def test_starts_are_wider_than_the_posterior_and_differ_between_ensembles() -> None:
    scale = np.array([1.0, 0.01])
    plan = layout(2)
    begun = start(normal_target(scale), plan, seed=2)
    z = np.array([state.z for state in begun.states])
    assert z.shape == (4, plan.walkers, 2)
    np.testing.assert_allclose(z.std(axis=(0, 1)), 2.0 * scale, rtol=0.25)
    assert not np.array_equal(z[0], z[1])
    assert begun.box is not None
    np.testing.assert_allclose(begun.box, np.outer([-12.0, 12.0], scale), rtol=0.1)


def test_starts_lie_where_the_density_is_finite() -> None:
    def log_density(z: np.ndarray) -> np.ndarray:
        return np.where(z[:, 0] > 0.0, -0.5 * np.sum((z - 0.3) ** 2, axis=1), -np.inf)

    target = Target(log_density, np.full(2, 0.5), np.ones(2), np.zeros(2, bool))
    for state in start(target, layout(2), seed=1).states:
        assert (state.z[:, 0] > 0.0).all()
        assert np.isfinite(state.log_density).all()


def test_no_place_to_start_is_an_error_in_words() -> None:
    target = Target(lambda z: np.full(len(z), -np.inf), np.zeros(2), np.ones(2), np.zeros(2, bool))
    with pytest.raises(SamplingError, match="no finite density"):
        start(target, layout(2), seed=1)


def test_same_seed_same_draws_other_seed_other_draws() -> None:
    target = normal_target(np.ones(2))
    first, again, other = (drawn(target, 3, seed) for seed in (1, 1, 2))
    np.testing.assert_array_equal(first, again)
    assert not np.isin(first, other).any()


def test_draws_do_not_depend_on_numpys_global_generator() -> None:
    target = normal_target(np.ones(2))
    np.random.seed(1)  # noqa: NPY002
    first = drawn(target, 3)
    np.random.seed(2)  # noqa: NPY002
    np.testing.assert_array_equal(first, drawn(target, 3))


def test_effective_draws_match_the_scatter_of_the_mean(in_full: bool) -> None:
    """The claim against its definition: the variance of means over many seeds."""
    repeats, rows = (200, 80) if in_full else (30, 40)
    target = normal_target(np.array([1.0, 1e-3, 50.0]))
    means, claims = [], []
    for seed in range(repeats):
        z = drawn(target, rows + 40, seed, ensembles=2)[40:] / [1.0, 1e-3, 50.0]
        means.append(z.mean(axis=(0, 1, 2)))
        claims.append([ensemble_ess(z[..., k].swapaxes(0, 1)) for k in range(3)])
    achieved = 1.0 / np.mean(np.square(means))  # three directions alike
    error = np.sqrt(2.0 / (3 * repeats))
    assert np.mean(claims) == pytest.approx(achieved, rel=4.0 * error + 0.1)


def test_walkers_that_move_together_are_no_independent_draws() -> None:
    """Negative control: walkers that repeat each other add nothing."""
    rng = np.random.default_rng(3)
    series = rng.normal(size=(4, 200, 1))
    together = np.repeat(series, 10, axis=2) + 1e-6 * rng.normal(size=(4, 200, 10))
    apart = rng.normal(size=(4, 200, 10))
    assert ensemble_ess(together) == pytest.approx(800, rel=0.3)
    assert ensemble_ess(apart) == pytest.approx(8000, rel=0.3)


def test_rhat_tells_ensembles_apart() -> None:
    rng = np.random.default_rng(4)
    draws = rng.normal(size=(4, 100, 20))
    assert ensemble_rhat(draws) < 1.003
    draws[2] += 0.3
    assert ensemble_rhat(draws) > 1.01
    wider = rng.normal(size=(4, 100, 20))
    wider[1] *= 1.5
    assert ensemble_rhat(wider) > 1.01


def test_two_modes_are_shared_between_walkers_and_drawn() -> None:
    def log_density(z: np.ndarray) -> np.ndarray:
        parts = [np.log(0.7) - 0.5 * np.sum((z - 4.0) ** 2, axis=1)]
        parts.append(np.log(0.3) - 0.5 * np.sum((z + 4.0) ** 2, axis=1))
        return np.logaddexp(*parts)

    target = Target(log_density, np.full(2, 3.0), np.full(2, 8.0), np.zeros(2, bool))
    plan = layout(2)
    begun = start(target, plan, seed=1)
    assert begun.box is None
    share = [np.mean(state.z[:, 0] > 0.0) for state in begun.states]
    assert 0.2 < min(share) <= max(share) < 0.8
    z = drawn(target, 400)[50:]
    effective = ensemble_ess(z[..., 0].swapaxes(0, 1))
    error = np.sqrt(0.21 / effective)
    assert np.mean(z[..., 0] > 0.0) == pytest.approx(0.7, abs=4.0 * error)
    assert error < 0.05


def grown(path: Path, target: Target, enough, most) -> None:
    plan = layout(len(target.start))
    names = tuple("abcdefgh"[: len(target.start)])
    header = Header(names, (False,) * len(names), plan, 1, "")
    with ChainFile.create(path, header, start(target, plan, 1).states) as file:
        for _ in grow(file, target.log_density, enough, most):
            pass


def test_a_chain_ends_at_its_total_or_when_it_is_enough(tmp_path: Path) -> None:
    target = normal_target(np.ones(2))
    grown(tmp_path / "total.h5", target, lambda z: False, lambda: 33)
    assert read_chain(tmp_path / "total.h5").commit.kept == 33
    seen = []

    def enough(z: np.ndarray) -> bool:
        seen.append(len(z))
        return len(z) > 28

    grown(tmp_path / "enough.h5", target, enough, lambda: None)
    assert seen == [25, 28, 31]
    assert read_chain(tmp_path / "enough.h5").commit.kept == 31


def test_looks_grow_by_a_tenth() -> None:
    assert [n for n in range(60) if is_look(n)] == [25, 28, 31, 35, 39, 43, 48, 53, 59]


def test_the_warm_up_waits_for_ensembles_on_their_way(tmp_path: Path) -> None:
    target = normal_target(np.ones(2))
    grown(tmp_path / "near.h5", target, lambda z: False, lambda: 1)
    assert read_chain(tmp_path / "near.h5").commit.warm_up == 30
    plan = layout(2)
    states = [
        replace(state, z=state.z + 3000.0, log_density=target.log_density(state.z + 3000.0))
        for state in start(target, plan, 1).states
    ]
    header = Header(("a", "b"), (False, False), plan, 1, "")
    with ChainFile.create(tmp_path / "far.h5", header, states) as file:
        for _ in grow(file, target.log_density, lambda z: False, lambda: 60):
            pass
    far = read_chain(tmp_path / "far.h5")
    assert far.commit.warm_up > 30
    assert np.abs(far.z[far.commit.warm_up :]).max() < 8.0


def test_a_chain_that_still_drifts_is_not_called_enough() -> None:
    """A curved ridge that takes thousands of steps to walk along."""

    def ridge(z: np.ndarray) -> np.ndarray:
        return -0.5 * (z[:, 0] / 30.0) ** 2 - 0.5 * ((z[:, 1] - 0.2 * z[:, 0] ** 2) / 0.3) ** 2

    target = Target(ridge, np.zeros(2), np.ones(2), np.zeros(2, bool))
    z = np.moveaxis(drawn(target, 400)[30:], (3, 1, 0, 2), (0, 1, 2, 3))
    found = report({"along": z[0], "across": z[1]})
    assert found.draws == 59_200
    assert not found.agreed
    assert found.worst_ess < 0.01 * found.draws
    assert not found.reaches(Goal(ess=100))


def test_a_report_says_which_parameter_how_many_more_and_what_to_do() -> None:
    found = Report(8000, {"slope": 1600.0, "scatter": 400.0}, {"slope": 1.001, "scatter": 1.004})
    assert (found.worst, found.worst_ess, found.least_agreed) == ("scatter", 400.0, "scatter")
    assert not found.reaches(Goal(ess=1000))
    assert found.more(Goal(ess=1000)) == 12000
    assert found.sentence(Goal(ess=1000)) == (
        "scatter is worst: 400 effective of 8,000 draws. The ensembles agree (R-hat at most "
        "1.004). About 12,000 more draws for 1,000 effective: let the run go on."
    )
    assert found.sentence(Goal(total=9000), going=False).endswith(
        "About 1,000 more draws for 9,000: resume the run."
    )
    assert found.reaches(Goal(ess=400))
    assert found.reaches(Goal(ess=1000, total=8000))
    assert found.sentence(Goal(ess=400)).endswith("Nothing more is needed.")


def test_ensembles_that_disagree_are_never_enough() -> None:
    found = Report(8000, {"slope": 5000.0}, {"slope": 1.08})
    assert not found.reaches(Goal(ess=1000))
    assert found.more(Goal(ess=1000)) == 4000
    words = found.sentence(Goal(ess=1000))
    assert "disagree on slope (R-hat 1.080, above 1.01): do not use these numbers yet" in words


def test_a_report_needs_some_rows_and_leaves_constants_out() -> None:
    few = report({"a": np.random.default_rng(1).normal(size=(4, 10, 8))})
    assert (few.draws, few.worst) == (320, None)
    assert few.sentence(Goal(ess=100)) == (
        "320 draws so far, too few to say what they are worth: let the run go on."
    )
    many = report({"a": np.random.default_rng(1).normal(size=(4, 50, 8)), "b": np.ones((4, 50, 8))})
    assert list(many.ess) == ["a"]
