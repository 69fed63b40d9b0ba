"""Ladders with covariances: their log density against the covariance of all data written out."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from brute_force import LIGHT, Written, marginal, written
from small_ladders import SMALL, TRUTH
from test_log_density import log_prior_of_phi, prior_draws, values_at

from ladderfit.ladder import Ladder, build_ladder
from ladderfit.posterior.joint import posterior
from ladderfit.sampling.run import draw

APART = ("peak_scatter[hosts]", "peak_scatter[expansion]")


def parts_of(name: str) -> tuple[dict[str, Any], dict[str, Any]]:
    make, _ = SMALL[name]
    return make(np.random.default_rng(701), TRUTH)


def correlated(n: int, size: float, seed: int = 3) -> np.ndarray:
    """Errors of 0.6 to 1.4 times `size`, and two patterns that all rows share."""
    rng = np.random.default_rng(seed)
    patterns = 0.5 * size * rng.normal(size=(n, 2))
    return np.diag((size * rng.uniform(0.6, 1.4, n)) ** 2) + patterns @ patterns.T


def with_shared(plain: Ladder, **blocks: np.ndarray) -> Written:
    """The ladder written out, a covariance added for anchors, flow, or `both` (peaks first)."""
    whole = written(plain)
    n = len(whole.y)
    peaks = 0 if plain.peaks is None else len(plain.peaks)
    flow = 0 if plain.flow is None else len(plain.flow)
    anchors = len(plain.geometric)
    others = n - peaks - flow - anchors
    place = {
        "anchors": others + np.arange(anchors),
        "flow": n - peaks - flow + np.arange(flow),
        "both": np.concatenate([n - peaks + np.arange(peaks), n - peaks - flow + np.arange(flow)]),
    }
    shared = np.zeros((n, n))
    for key, block in blocks.items():
        shared[np.ix_(place[key], place[key])] += block
    return replace(whole, shared=shared)


def scatters_apart(whole: Written) -> Written:
    """Peaks have the moduli of hosts among their terms, the expansion has none."""
    hosts = [name.startswith("modulus[") for name in whole.linear]
    of_host = np.any(whole.A[:, hosts] != 0.0, axis=1)
    scatter = tuple(
        APART[0 if inside else 1] if name == "peak_scatter" else name
        for name, inside in zip(whole.scatter, of_host, strict=True)
    )
    return replace(whole, scatter=scatter)


def agree(ladder: Ladder, whole: Written, *, n: int = 12, same: bool = True) -> None:
    joint = posterior(ladder)
    z = prior_draws(joint, np.random.default_rng(11), n)
    found = joint.log_density(z) - joint.log_parallaxes(z).sum(axis=1)
    expected = log_prior_of_phi(joint, z)
    expected += [marginal(whole, values) for values in values_at(joint, whole, z)]
    if same:
        np.testing.assert_allclose(found, expected, rtol=1e-8, atol=1e-7)  # what tables may err by
    else:
        assert np.max(np.abs(found - expected)) > 1e-3


def both(name: str, *, adds: bool, **options: Any) -> tuple[Ladder, Written]:
    """A small ladder with a covariance of all its supernovae, and the same written out."""
    choices, tables = parts_of(name)
    plain = build_ladder(choices, tables)
    peaks = plain.peaks.variance if plain.peaks is not None else np.empty(0)
    flow = plain.flow.variance if plain.flow is not None else np.empty(0)
    variance = np.concatenate([peaks, flow])
    matrix = correlated(len(variance), 0.08)
    choices["supernovae"] |= {"covariance": {"adds": adds}, **options}
    if not adds:
        del choices["supernovae"]["columns"]["peak_error"]
        choices.get("expansion", {}).get("columns", {}).pop("peak_error", None)
    ladder = build_ladder(choices, tables | {"supernovae.covariance": matrix})
    return ladder, with_shared(plain, both=matrix if adds else matrix - np.diag(variance))


@pytest.mark.parametrize("adds", [True, False])
@pytest.mark.parametrize("name", ["flow", "no Cepheids", "up to the peaks", "all rungs"])
def test_one_covariance_for_all_supernovae(name: str, adds: bool) -> None:
    ladder, whole = both(name, adds=adds)
    agree(ladder, whole)
    agree(ladder, replace(whole, shared=None), same=False)


@pytest.mark.parametrize("name", ["flow", "no Cepheids"])
def test_two_scatters(name: str) -> None:
    ladder, whole = both(name, adds=False, scatter="apart")
    assert set(APART) <= set(posterior(ladder).split.phi_names)
    agree(ladder, scatters_apart(whole))


def test_two_scatters_without_a_covariance() -> None:
    choices, tables = parts_of("flow")
    plain = build_ladder(choices, tables)
    apart = plain.change({"supernovae.scatter": "apart"})
    agree(apart, scatters_apart(written(plain)))


@pytest.mark.parametrize("held", [APART, APART[:1], APART[1:]])
def test_scatters_that_are_held(held: tuple[str, ...]) -> None:
    ladder, whole = both("flow", adds=True, scatter="apart")

    ladder = ladder.change({f"priors.{name}": {"fixed": 0.1} for name in held})

    agree(ladder, scatters_apart(whole))


def test_two_scatters_that_are_tied_equal_one() -> None:
    one, _ = both("flow", adds=True)
    two = one.change({"supernovae.scatter": "apart"})
    first, second = posterior(one), posterior(two)
    scatter = np.linspace(0.0, 0.3, 7)
    names = first.split.phi_names
    z = np.tile([c.start for c in first.split.phi], (7, 1))
    z[:, names.index("peak_scatter")] = scatter
    both_z = np.stack(
        [scatter if name in APART else z[:, names.index(name)] for name in second.split.phi_names],
        axis=1,
    )
    found = first.log_density(z) - first.split.log_prior(z)
    expected = second.log_density(both_z) - second.split.log_prior(both_z)
    np.testing.assert_allclose(found, expected, rtol=1e-9)


@pytest.mark.parametrize("name", ["flow", "expansion alone"])
def test_covariance_of_the_expansion_alone(name: str) -> None:
    choices, tables = parts_of(name)
    plain = build_ladder(choices, tables)
    matrix = correlated(len(plain.flow), 0.08)
    choices["expansion"]["covariance"] = {"adds": True}
    ladder = build_ladder(choices, tables | {"expansion.covariance": matrix})
    assert posterior(ladder).constant.coupling is None  # hosts stay independent
    agree(ladder, with_shared(plain, flow=matrix))


@pytest.mark.parametrize("adds", [True, False])
def test_velocity_covariance(adds: bool) -> None:
    choices, tables = parts_of("flow")
    plain = build_ladder(choices, tables)
    matrix = correlated(len(plain.flow), 200.0)
    choices["expansion"]["velocity_covariance"] = {"adds": adds}
    ladder = build_ladder(choices, tables | {"expansion.velocity_covariance": matrix})
    factor = 5.0 / np.log(10.0) / (LIGHT * plain.flow.redshift)
    single = np.diag((250.0 * factor) ** 2)
    shared = matrix * np.outer(factor, factor) - (0.0 if adds else single)
    agree(ladder, with_shared(plain, flow=shared))


def test_velocity_errors_of_single_supernovae() -> None:
    choices, tables = parts_of("flow")
    plain = build_ladder(choices, tables)
    error = np.random.default_rng(2).uniform(100.0, 400.0, len(plain.flow))
    tables["expansion"]["e_v"] = error
    choices["expansion"]["columns"]["peculiar_velocity_error"] = "e_v"
    factor = 5.0 / np.log(10.0) / (LIGHT * plain.flow.redshift)
    shared = np.diag((error**2 - 250.0**2) * factor**2)
    agree(build_ladder(choices, tables), with_shared(plain, flow=shared))


@pytest.mark.parametrize("adds", [True, False])
@pytest.mark.parametrize("name", ["no Cepheids", "up to the peaks"])
def test_covariance_of_the_anchors(name: str, adds: bool) -> None:
    choices, tables = parts_of(name)
    plain = build_ladder(choices, tables)
    matrix = correlated(len(plain.geometric), 0.04)
    choices["anchors"]["covariance"] = {"adds": adds}
    ladder = build_ladder(choices, tables | {"anchors.covariance": matrix})
    single = np.diag([anchor.error**2 for anchor in plain.geometric])
    agree(ladder, with_shared(plain, anchors=matrix - (0.0 if adds else single)))
    errors = [anchor.error for anchor in ladder.geometric]
    assert errors == pytest.approx(np.sqrt(np.diag(matrix) + adds * np.diag(single)))


def test_both_covariances_couple_different_hosts() -> None:
    choices, tables = parts_of("flow")
    plain = build_ladder(choices, tables)
    n = len(plain.peaks) + len(plain.flow)
    supernovae, anchors = correlated(n, 0.06), correlated(3, 0.04)
    choices["supernovae"]["covariance"] = choices["anchors"]["covariance"] = {"adds": True}
    matrices = {"supernovae.covariance": supernovae, "anchors.covariance": anchors}
    ladder = build_ladder(choices, tables | matrices)
    assert set(plain.peaks.host) != {anchor.host for anchor in plain.geometric}
    agree(ladder, with_shared(plain, both=supernovae, anchors=anchors))


def test_names_find_their_rows_whatever_the_order_and_cuts(tmp_path: Path) -> None:
    """A shuffled matrix with rows of strangers; supernovae cut by redshift and by hand."""
    choices, tables = parts_of("flow")
    plain = build_ladder(choices, tables)
    names = [*plain.peaks.name, *plain.flow.name]
    listed = [*names, "stranger", "another"]
    matrix = correlated(len(listed), 0.08)
    order = np.random.default_rng(5).permutation(len(listed))
    (tmp_path / "names.txt").write_text("# names\n" + "\n".join(listed[i] for i in order) + "\n")
    cuts = {
        "expansion.redshifts": [0.04, 0.12],
        "supernovae.set_aside": [{"name": "P4", "reason": "a test"}],
    }
    choices["supernovae"]["covariance"] = {"adds": True, "names": "names.txt"}
    shuffled = {"supernovae.covariance": matrix[np.ix_(order, order)]}
    ladder = build_ladder(choices, tables | shuffled, tmp_path).change(cuts)
    cut = plain.change(cuts)
    kept = [listed.index(name) for name in [*cut.peaks.name, *cut.flow.name]]
    assert len(kept) < len(names)
    agree(ladder, with_shared(cut, both=matrix[np.ix_(kept, kept)]))


def test_light_curves_of_one_supernova_and_one_that_stands_in_both_tables(tmp_path: Path) -> None:
    """Names that repeat: two rows in a host, and one row that both tables share."""
    choices, tables = parts_of("no Cepheids")
    tables["supernovae"].loc[2, "SN"] = "P0"  # two light curves of P0
    tables["expansion"].loc[4, "SN"] = "P1"  # and P1 in the expansion too
    plain = build_ladder(choices, tables)
    listed = ["P0", "P0", "P3", *dict.fromkeys(plain.flow.name)]
    matrix = correlated(len(listed), 0.08)
    (tmp_path / "names.txt").write_text("\n".join(listed))
    choices["supernovae"]["covariance"] = {"adds": False, "names": "names.txt"}
    ladder = build_ladder(choices, tables | {"supernovae.covariance": matrix}, tmp_path)
    first = {name: listed.index(name) for name in listed}
    kept = [first["P0"], first["P1"], first["P0"] + 1, first["P3"]]
    kept += [first[name] for name in plain.flow.name]
    variance = np.concatenate([plain.peaks.variance, plain.flow.variance])
    agree(ladder, with_shared(plain, both=matrix[np.ix_(kept, kept)] - np.diag(variance)))
    assert [note for note in plain.notes if "without a covariance" in note] == [
        "the supernova P1 stands in hosts and in the expansion; without a covariance the "
        "measurements are taken as independent",
        "the supernova P0 stands more than once in hosts; without a covariance the light "
        "curves are taken as independent",
    ]
    assert not any("without a covariance" in note for note in ladder.notes)


def test_a_change_elsewhere_keeps_the_decomposition() -> None:
    ladder, _ = both("flow", adds=True)
    before = posterior(ladder)
    changed = ladder.change({"anchors.geometric.Tavin.error": 0.03})
    assert posterior(changed, before).blocks[0] is before.blocks[0]
    moved = posterior(ladder.change({"cepheids.periods": [8.0, 40.0]}), before)
    assert moved.blocks[0].rows.base is before.blocks[0].rows.base
    np.testing.assert_allclose(
        moved.log_density(np.zeros((1, moved.dimension)) + 0.1),
        posterior(moved.ladder).log_density(np.zeros((1, moved.dimension)) + 0.1),
        rtol=1e-12,
    )


def test_draws_with_a_covariance_have_the_mean_of_the_data_written_out() -> None:
    """Peak magnitude and intercept of a ladder whose scatter is held, by dense algebra."""
    ladder, whole = both("flow", adds=True)
    ladder = ladder.change(
        {"priors.peak_scatter": {"fixed": 0.1}, "priors.scatter": {"fixed": 0.08}}
    )
    result = draw(ladder, seed=1, draws=20_000)
    names = whole.linear
    scatter = np.array([{"peak_scatter": 0.1, "scatter": 0.08}.get(s, 0.0) for s in whole.scatter])
    inverse = np.linalg.inv(np.diag(whole.variance + scatter**2) + whole.shared)
    precision, pull = whole.A.T @ inverse @ whole.A, whole.A.T @ inverse @ whole.y
    for place, name in enumerate(names):
        if not name.startswith("modulus["):
            prior = ladder.choices.prior(name)
            normal = prior.in_magnitudes() if name == "hubble_constant" else prior
            precision[place, place] += normal.deviation**-2
            pull[place] += normal.mean * normal.deviation**-2
    mean, covariance = np.linalg.solve(precision, pull), np.linalg.inv(precision)
    for name, drawn in result.draws.items():
        if name in names:
            drawn = 5.0 * np.log10(drawn) if name == "hubble_constant" else drawn
            place = names.index(name)
            sd = np.sqrt(covariance[place, place])
            assert abs(drawn.mean() - mean[place]) < 5.0 * sd / np.sqrt(20_000), name
            assert drawn.std() == pytest.approx(sd, rel=0.03), name
    form = np.zeros(len(names))
    form[names.index("hubble_constant")], form[names.index("peak_magnitude")] = 0.2, -0.2
    a, error = form @ mean - 5.0, np.sqrt(form @ covariance @ form)
    assert result.mean("intercept") == pytest.approx(a, abs=5.0 * error / np.sqrt(20_000))
    assert result.sd("intercept") == pytest.approx(error, rel=0.03)


@pytest.mark.parametrize(
    "changes",
    [
        {"hosts.distance_prior": "uniform in volume"},
        {"priors.hubble_constant": {"uniform": [60.0, 76.0]}},
        {"priors.metallicity": {"fixed": -0.2}},
    ],
    ids=lambda changes: next(iter(changes)),
)
@pytest.mark.parametrize("scatter", ["common", "apart"])
def test_other_priors_beside_a_covariance(changes: dict[str, Any], scatter: str) -> None:
    """A tilt of the moduli; coefficients that are known in a draw, or always."""
    ladder, whole = both("flow", adds=True, scatter=scatter)
    plain, shared = whole.ladder.change(changes), whole.shared
    moved = replace(written(plain), shared=shared)
    agree(ladder.change(changes), scatters_apart(moved) if scatter == "apart" else moved)


@pytest.mark.parametrize("scatter", ["common", "apart"])
def test_finer_tables_round_the_mode_change_nothing(scatter: str) -> None:
    ladder, _ = both("flow", adds=True, scatter=scatter)
    joint, fresh = posterior(ladder), posterior(ladder)
    size = joint.dimension
    joint.focus(np.full(size, 0.05), np.full(size, 0.15))
    assert len(joint.blocks[0].rows.tables) == 2
    z = np.random.default_rng(3).uniform(0.06, 0.14, (20, size))
    np.testing.assert_allclose(joint.log_density(z), fresh.log_density(z), rtol=0.0, atol=2e-7)
