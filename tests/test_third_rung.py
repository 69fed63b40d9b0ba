"""Jobs that stop at the third rung, the laws of distance, and the intercept."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from astropy.cosmology import FlatLambdaCDM, Planck18, w0waCDM
from small_ladders import SMALL, TRUTH

from ladderfit.choices import Cosmology, Expansion
from ladderfit.errors import InputError
from ladderfit.files import new_folder
from ladderfit.ladder import build_ladder, read_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.physics.expansion import term_of
from ladderfit.posterior.joint import posterior
from ladderfit.sampling.run import draw
from ladderfit.store import read_result, write_result
from ladderfit.wording import summary_text

Z = np.linspace(0.01, 0.15, 40)
SIZE = 20_000


def parts_of(name: str) -> tuple[dict[str, Any], dict[str, Any]]:
    return SMALL[name][0](np.random.default_rng(701), TRUTH)


def law(model: str, **parameters: float) -> Expansion:
    cosmology = Cosmology(model, parameters)
    return Expansion(table="t", columns={}, cosmology=cosmology)


# --- laws of distance --------------------------------------------------------------------


@pytest.mark.parametrize(
    ("expansion", "cosmology"),
    [
        (law("FlatLambdaCDM", Om0=0.3), FlatLambdaCDM(H0=50.0, Om0=0.3)),
        (law("Planck18"), Planck18),
        (
            law("w0waCDM", Om0=0.3, Ode0=0.6, w0=-0.9, wa=0.2),
            w0waCDM(H0=80.0, Om0=0.3, Ode0=0.6, w0=-0.9, wa=0.2),
        ),
    ],
)
def test_a_cosmology_gives_its_distances_whatever_its_own_rate(
    expansion: Expansion, cosmology: Any
) -> None:
    modulus = term_of(expansion, Z, Z) - 5.0 * np.log10(cosmology.H0.value)
    np.testing.assert_allclose(modulus, cosmology.distmod(Z).value, rtol=0.0, atol=1e-9)


def test_kinematic_and_cosmology_agree_where_q0_and_j0_match() -> None:
    """To 1 part in 10^4 of the distance, 0.0002 mag."""
    kinematic = Expansion(table="t", columns={}, q0=-0.55, j0=1.0)
    gap = term_of(kinematic, Z, Z) - term_of(law("FlatLambdaCDM", Om0=0.3), Z, Z)
    assert 0.0 < np.max(np.abs(gap)) < 5.0 * np.log10(1.0 + 1e-4)
    other = term_of(kinematic, Z, Z) - term_of(law("FlatLambdaCDM", Om0=0.4), Z, Z)
    assert np.max(np.abs(other)) > 0.01


def test_a_cosmology_dims_by_the_heliocentric_redshift() -> None:
    flat = law("FlatLambdaCDM", Om0=0.3)
    gap = term_of(flat, Z, Z + 1e-3) - term_of(flat, Z, Z)
    np.testing.assert_allclose(gap, 5.0 * np.log10((1.0 + Z + 1e-3) / (1.0 + Z)), atol=1e-12)


@pytest.mark.parametrize(
    ("written", "words"),
    [
        ({"model": "Plank18"}, "key expansion.cosmology.model: found the unknown cosmology"),
        ({"model": "Plank18"}, "did you mean 'Planck18'?"),
        ({"model": "FlatLambdaCDM"}, "key expansion.cosmology.parameters: found"),
        (
            {"model": "FlatLambdaCDM", "parameters": {"Om0": 0.3, "H0": 70.0}},
            "found the parameter 'H0'; expected among Om0, ",
        ),
        ({"model": "Planck18", "parameters": {"Om0": 0.3}}, "no parameters, as the published set"),
        ({"parameters": {"q0": -0.5}}, "found the parameter 'q0'; expected q0 and j0, which stand"),
        ({"model": "FlatLambdaCDM", "parameters": {"Om0": -8.0}}, "expected parameters that give"),
        ({"model": "FLRW"}, "found the unknown cosmology 'FLRW'"),
        ({"model": "units"}, "found the unknown cosmology 'units'"),
    ],
)
def test_cosmologies_that_do_not_fit(written: dict[str, Any], words: str) -> None:
    choices, tables = parts_of("expansion alone")
    choices["expansion"]["cosmology"] = written
    with pytest.raises(InputError) as caught:
        build_ladder(choices, tables)
    assert words in str(caught.value)


def test_a_ladder_scales_a_cosmology_to_its_rate() -> None:
    choices, tables = parts_of("flow")
    kinematic = draw(build_ladder(choices, tables), seed=2, draws=4000)
    choices["expansion"]["cosmology"] = {"model": "FlatLambdaCDM", "parameters": {"Om0": 0.3}}
    ladder = build_ladder(choices, tables)
    scaled = draw(ladder, seed=2, draws=4000)
    assert scaled.mean("hubble_constant") == pytest.approx(
        kinematic.mean("hubble_constant"), rel=2e-4
    )
    wide = draw(ladder.change({"expansion.cosmology.parameters.Om0": 0.6}), seed=2, draws=4000)
    change = wide.mean("intercept") - scaled.mean("intercept")
    mean_z = float(np.mean(tables["expansion"]["zcmb"]))
    assert change == pytest.approx(np.log10(1.0 - 0.225 * mean_z), rel=0.2)  # d_L: -dq0 z / 2


# --- jobs that stop here -----------------------------------------------------------------


def test_peak_magnitude_from_given_moduli_with_a_covariance(tmp_path: Path) -> None:
    """Hosts known by moduli with a covariance, peaks with another, in an ordinary ladder file."""
    rng = np.random.default_rng(6)
    n = 9
    shared = np.full((n, n), 0.03**2) + np.diag(rng.uniform(0.03, 0.08, n) ** 2)
    of_peaks = np.full((n, n), 0.02**2) + np.diag(rng.uniform(0.05, 0.1, n) ** 2)
    true = rng.uniform(29.0, 32.0, n)
    modulus = np.round(rng.multivariate_normal(true, shared), 4)
    peak = np.round(rng.multivariate_normal(true - 19.25, of_peaks), 4)
    hosts = [f"G{i}" for i in range(n)]
    table = pd.DataFrame({"SN": [f"S{i}" for i in range(n)], "Galaxy": hosts, "mB": peak})
    table.to_csv(tmp_path / "peaks.csv", index=False)
    np.save(tmp_path / "peaks.npy", of_peaks)
    text = "\n".join([str(n), *(f"{value:.17g}" for value in shared.ravel())])
    (tmp_path / "moduli.txt").write_text(text)
    anchors = "\n".join(
        f"{host} = {{modulus = {value!r}, error = 0.05}}"
        for host, value in zip(hosts, modulus.tolist(), strict=True)
    )
    (tmp_path / "ladder.toml").write_text(
        f"""
        [anchors.covariance]
        file = "moduli.txt"
        [anchors.geometric]
        {anchors}
        [supernovae]
        table = "peaks.csv"
        columns = {{name = "SN", host = "Galaxy", peak = "mB"}}
        covariance = {{file = "peaks.npy"}}
        [priors]
        peak_scatter = {{fixed = 0.0}}
        """
    )
    result = draw(read_ladder(tmp_path / "ladder.toml"), seed=1, draws=SIZE)
    inverse = np.linalg.inv(shared + of_peaks)
    prior = result.choices.prior("peak_magnitude")
    weight = inverse.sum() + prior.sd**-2
    mean = (inverse.sum(axis=0) @ (peak - modulus) + prior.mean * prior.sd**-2) / weight
    error = weight**-0.5
    assert result.mean("peak_magnitude") == pytest.approx(mean, abs=5.0 * error / SIZE**0.5)
    assert result.sd("peak_magnitude") == pytest.approx(error, rel=0.03)
    single = np.sum(1.0 / np.diag(shared + of_peaks)) ** -0.5
    assert error > 1.3 * single  # what leaving the covariances out would claim
    assert "hubble_constant" not in result.draws
    assert "intercept" not in result.draws


def test_expansion_alone_from_a_given_peak_magnitude() -> None:
    choices, tables = parts_of("expansion alone")
    choices["priors"] |= {"peak_scatter": {"fixed": 0.1}}
    ladder = build_ladder(choices, tables)
    result = draw(ladder, seed=1, draws=SIZE)
    flow = ladder.flow
    assert flow is not None
    term = term_of(ladder.choices.expansion, flow.redshift, flow.redshift_heliocentric)
    peculiar = 5.0 / np.log(10.0) * 250.0 / (299_792.458 * flow.redshift)
    weight = 1.0 / (flow.variance + peculiar**2 + 0.01)
    offset = np.sum(weight * (flow.magnitude - term)) / weight.sum()
    expected = -19.25 - offset  # of 5 log10 H0, the peak magnitude -19.25 +- 0.05
    error = np.hypot(0.05, weight.sum() ** -0.5)
    found = 5.0 * np.log10(result.draws["hubble_constant"])
    assert found.mean() == pytest.approx(expected, abs=5.0 * error / SIZE**0.5 + 1e-3)
    assert found.std() == pytest.approx(error, rel=0.03)
    a = -0.2 * offset - 5.0
    assert result.mean("intercept") == pytest.approx(a, abs=5.0 * result.sd("intercept") / 141.0)
    assert result.sd("intercept") == pytest.approx(0.2 * weight.sum() ** -0.5, rel=0.03)


# --- the intercept -----------------------------------------------------------------------


def test_a_published_intercept_comes_back() -> None:
    choices, tables = parts_of("intercept")
    result = draw(build_ladder(choices, tables), seed=1, draws=SIZE)
    given = choices["expansion"]["intercept"]
    limit = 5.0 * given["error"] / SIZE**0.5
    assert result.mean("intercept") == pytest.approx(given["value"], abs=limit)
    assert result.sd("intercept") == pytest.approx(given["error"], rel=0.03)


def test_the_intercept_is_told_and_kept_as_derived(tmp_path: Path) -> None:
    choices, tables = parts_of("flow")
    result = draw(build_ladder(choices, tables), seed=1, draws=2000)
    assert result.derived == ("intercept",)
    assert "intercept" not in result.headline
    assert "intercept" not in result.diagnostics.informed
    assert "intercept of the expansion (derived)" in summary_text(result)
    assert "prior of the intercept" not in summary_text(result)
    assert "intercept" in result.summary().index
    exact = np.log10(result.draws["hubble_constant"]) - 0.2 * result.draws["peak_magnitude"] - 5.0
    np.testing.assert_allclose(result.draws["intercept"], exact, atol=1e-12)
    with new_folder(tmp_path / "out") as folder:
        write_result(result, folder)
    again = read_result(tmp_path / "out")
    assert np.array_equal(again.draws["intercept"], result.draws["intercept"])


def test_no_prior_may_be_stated_for_the_intercept() -> None:
    choices, tables = parts_of("flow")
    choices["priors"] = {"intercept": {"normal": [0.7, 0.1]}}
    with pytest.raises(InputError, match=r"priors\.intercept: found an unknown parameter"):
        build_ladder(choices, tables)


def test_a_result_with_covariances_is_read_back_with_its_ladder(tmp_path: Path) -> None:
    """Paths of the matrix follow the ladder file into the result's folder."""
    choices, tables = parts_of("no Cepheids")
    for section, table in tables.items():
        table.to_csv(tmp_path / f"{section}.csv", index=False)
        choices[section]["table"] = f"{section}.csv"
    np.save(tmp_path / "c.npy", np.diag(np.full(28, 0.01)) + 1e-4)
    choices["supernovae"]["covariance"] = {"file": "c.npy"}
    memory = build_ladder(choices, base=tmp_path)
    write_choices(memory.choices, tmp_path / "ladder.toml")
    ladder = read_ladder(tmp_path / "ladder.toml")
    result = draw(ladder, seed=1, draws=1000)
    (tmp_path / "results").mkdir()
    with new_folder(tmp_path / "results" / "one") as folder:
        write_result(result, folder)
    again = read_result(tmp_path / "results" / "one")
    assert again.source is not None
    assert np.array_equal(again.ladder.peak_covariance, ladder.peak_covariance)
    assert posterior(again.ladder).dimension == 1
    np.save(tmp_path / "c.npy", np.diag(np.full(28, 0.02)) + 1e-4)
    assert read_result(tmp_path / "results" / "one").source is None
