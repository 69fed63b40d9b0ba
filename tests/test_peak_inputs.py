"""Terms of the peak-magnitude relation as choices: columns, messages, notes, copies, drafts."""

from __future__ import annotations

import tomllib
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from brute_force import marginal, rows_of
from peak_ladders import EVERYTHING, RATE, TRIPP, as_written, ladder_with, parts_with
from test_log_density import log_prior_of_phi, prior_draws, values_at

import ladderfit as lf
from ladderfit.draft import write_draft
from ladderfit.errors import InputError
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.ladder_copy import copy_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.mock import mock_from_ladder, plain_truth
from ladderfit.physics.expansion import distance_term, peculiar_variance
from ladderfit.posterior.determined import undetermined
from ladderfit.posterior.joint import posterior
from ladderfit.shipped import shipped

ROLES = ("peak_width_covariance", "peak_colour_covariance", "width_colour_covariance")
QUADRATIC = {"decline_rate": {"quadratic": True}}


def problems(choices: dict[str, Any], tables: dict[str, Any]) -> list[str]:
    with pytest.raises(InputError) as caught:
        build_ladder(choices, tables)
    return [str(problem) for problem in caught.value.problems]


# --- messages ----------------------------------------------------------------------------


def test_terms_need_columns_in_every_table() -> None:
    choices, tables = parts_with("flow", TRIPP)
    del choices["expansion"]["columns"]["width"]
    (found,) = problems(choices, tables)
    assert "expansion.columns.width" in found
    assert 'add width = "..." to columns, or take the term out of peak_relation' in found


@pytest.mark.parametrize(
    ("relation", "key", "words"),
    [
        (
            {"width": {}, "decline_rate": {}},
            "peak_relation.decline_rate",
            "expected one of the two",
        ),
        ({"surveys": ["Ost", "Ost"]}, "peak_relation.surveys", "'Ost' twice"),
        ({"surveys": ["Osten"]}, "peak_relation.surveys", "did you mean 'Ost'?"),
        ({"host_mass": {"smoothing": -0.1}}, "peak_relation.host_mass.smoothing", "0 dex or more"),
        ({"errors": "guessed"}, "peak_relation.errors", "population"),
        ({"colr": {}}, "peak_relation.colr", "did you mean 'colour'?"),
    ],
)
def test_wrong_terms(relation: dict[str, Any], key: str, words: str) -> None:
    (found,) = problems(*parts_with("flow", relation))
    assert key in found
    assert words in found


def test_a_covariance_needs_both_errors() -> None:
    choices, tables = parts_with("flow", TRIPP)
    del choices["supernovae"]["columns"]["width_error"]
    found = problems(choices, tables)
    assert len(found) == 2
    assert "peak_width_covariance, but no width_error" in found[0]
    assert "width_colour_covariance, but no width_error" in found[1]


def test_covariances_too_large_for_the_errors() -> None:
    choices, tables = parts_with("flow", TRIPP)
    tables["expansion"].loc[[4, 7], "mc"] = 1.1 * tables["expansion"]["e_mB"] * 0.06
    (found,) = problems(choices, tables)
    assert "covariances that are too large for the errors (and 1 more such row)" in found
    assert "row 5" in found
    assert "column 'mc'" in found


def test_a_covariance_of_peaks_that_leaves_no_room() -> None:
    choices, tables = parts_with("flow", TRIPP)
    choices["expansion"]["covariance"] = {"adds": False}
    del choices["expansion"]["columns"]["peak_error"]
    matrix = 0.03**2 * np.eye(24) + 1e-8
    choices["expansion"]["peculiar_velocity"] = 0.0
    found = problems(choices, tables | {"expansion.covariance": matrix})
    assert "too " in found[0]
    assert "covariance" in found[0]


@pytest.mark.parametrize(
    ("column", "value", "words"),
    [("e_w", 0.0, "an error above 0"), ("c", "red", "a colour in mag, a finite number")],
)
def test_impossible_cells(column: str, value: object, words: str) -> None:
    choices, tables = parts_with("flow", TRIPP)
    table = tables["expansion"].astype({column: object})
    table.loc[2, column] = value
    (found,) = problems(choices, tables | {"expansion": table})
    assert words in found
    assert "row 3" in found


def test_rows_that_lack_an_input_are_left_out_where_it_counts() -> None:
    choices, tables = parts_with("flow", TRIPP)
    tables["expansion"].loc[3, "w"] = np.nan
    tables["expansion"].loc[[5, 6], "logM"] = np.nan
    ladder = build_ladder(choices, tables)
    assert "1 missing width" in str(ladder.kept["expansion"])
    assert "2 missing host mass" in str(
        ladder.change({"peak_relation.host_mass": {}}).kept["expansion"]
    )
    assert ladder.change({"peak_relation": None}).kept["expansion"].kept == 24


# --- notes -------------------------------------------------------------------------------


def test_notes_say_what_is_not_modelled_and_what_is_for_comparing() -> None:
    ladder = ladder_with("flow", TRIPP)
    (note,) = [n for n in ladder.notes if n.startswith("supernovae")]
    assert "a selection by colour that is not modelled biases beta" in note
    for errors, words in (("ignored", "are ignored"), ("in the variance", "put into the variance")):
        naive = ladder.change({"peak_relation.errors": errors})
        assert any("FOR COMPARING ONLY" in n and words in n for n in naive.notes)
        assert not any("FOR COMPARING" in n for n in ladder.notes)
    exact = ladder_with("flow", TRIPP, covariances=False, errors=False)
    assert any("no errors are given of width (supernovae)" in n for n in exact.notes)
    assert not any("supernovae: " in n for n in ladder_with("flow", {}).notes)


# --- plain columns -----------------------------------------------------------------------


@pytest.mark.parametrize("relation", [EVERYTHING, RATE | QUADRATIC], ids=["all", "quadratic"])
def test_exact_inputs_are_columns_and_their_coefficients_in_theta(relation: dict[str, Any]) -> None:
    ladder = ladder_with("flow", relation, covariances=False, errors=False)
    ignored = ladder_with("flow", relation).change({"peak_relation.errors": "ignored"})
    joint = posterior(ladder)
    assert {"alpha", "beta", "decline_slope"} & set(joint.split.phi_names) == set()
    whole = as_written(ladder, exact_rows(ladder), np.zeros((len(rows_of(ladder)),) * 2))
    z = prior_draws(joint, np.random.default_rng(11), 8)
    expected = log_prior_of_phi(joint, z)
    expected += [marginal(whole, values) for values in values_at(joint, whole, z)]
    np.testing.assert_allclose(joint.log_density(z), expected, rtol=1e-9, atol=3e-7)
    np.testing.assert_array_equal(posterior(ignored).log_density(z), joint.log_density(z))


def exact_rows(ladder: Ladder) -> list[Any]:
    """Rows of `brute_force` with the terms added to those of supernovae."""
    relation, found = ladder.choices.peak_relation, []
    count = {"peaks": 0, "flow": 0}
    for row in rows_of(ladder):
        if "peak_magnitude" not in row.terms:
            found.append(row)
            continue
        kind = "flow" if "hubble_constant" in row.terms else "peaks"
        sample, i = getattr(ladder, kind), count[kind]
        count[kind] += 1
        terms, inputs = dict(row.terms), sample.inputs.values
        if relation.width != "none":
            terms["alpha"] = -(inputs["width"][i] - relation.width.reference)
        if relation.decline_rate != "none":
            rate = inputs["decline_rate"][i] - 1.1
            terms |= {"decline_slope": rate, "decline_curvature": rate**2}
        terms["beta"] = inputs["colour"][i]
        if relation.host_mass != "none":
            terms["mass_step"] = 0.5 if inputs["host_mass"][i] >= 10.0 else -0.5
        for survey in relation.surveys:
            terms[f"survey_offset[{survey}]"] = float(sample.inputs.survey[i] == survey)
        found.append(replace(row, terms=terms))
    return found


def test_offsets_of_all_surveys_leave_the_scale_determined() -> None:
    ladder = ladder_with("flow", {"surveys": ["Ost", "West", "Nord"]})
    assert undetermined(posterior(ladder)) == ()


def test_a_square_puts_the_means_into_phi() -> None:
    names = posterior(ladder_with("flow", RATE | QUADRATIC)).split.phi_names
    assert {"decline_rate_mean[hosts]", "colour_mean[expansion]", "decline_curvature"} <= set(names)
    assert "decline_rate_mean[hosts]" not in posterior(ladder_with("flow", RATE)).split.phi_names


# --- files, copies, simulations ----------------------------------------------------------


def test_choices_are_written_and_read(tmp_path: Path) -> None:
    ladder = ladder_with("flow", EVERYTHING | {"host_mass": {"step": 10.5, "smoothing": 0.2}})
    write_choices(ladder.choices, tmp_path / "ladder.toml")
    text = (tmp_path / "ladder.toml").read_text()
    assert "[peak_relation" in text
    copy = copy_ladder(ladder, tmp_path)
    assert copy.choices.peak_relation == ladder.choices.peak_relation
    for name, values in ladder.flow.inputs.values.items():
        np.testing.assert_array_equal(copy.flow.inputs.values[name], values)
    np.testing.assert_array_equal(copy.peaks.inputs.survey, ladder.peaks.inputs.survey)


def test_a_mock_keeps_the_objects_and_draws_their_light_curves() -> None:
    ladder = ladder_with("flow", EVERYTHING | {"surveys": ["Ost"]}).change(
        {"priors.shape_colour_correlation": {"uniform": [-0.9, 0.9]}}
    )
    truth = plain_truth(ladder) | {"alpha": 0.2, "survey_offset[Ost]": 0.05, "mass_step": -0.1}
    truth |= {f"shape_colour_correlation[{group}]": 0.5 for group in ("hosts", "expansion")}
    one, two = (mock_from_ladder(ladder, truth, np.random.default_rng(seed)) for seed in (1, 2))
    assert one.choices.peak_relation == ladder.choices.peak_relation
    np.testing.assert_allclose(
        one.flow.inputs.values["width_error"], ladder.flow.inputs.values["width_error"]
    )
    np.testing.assert_allclose(
        one.flow.inputs.values["host_mass"], ladder.flow.inputs.values["host_mass"]
    )
    assert np.all(one.flow.inputs.values["width"] != two.flow.inputs.values["width"])
    with pytest.raises(InputError, match="from which true inputs are drawn"):
        mock_from_ladder(
            ladder.change({"peak_relation.errors": "ignored"}), truth, np.random.default_rng(1)
        )


def test_a_mock_has_the_moments_of_its_truth() -> None:
    """Peak, width and colour less their means, whitened by their covariance, are white."""
    ladder = ladder_with("expansion alone", TRIPP)
    truth = plain_truth(ladder) | {"alpha": 0.3, "width_mean[expansion]": 0.4}
    truth |= {"shape_colour_correlation[expansion]": -0.4}
    flow, inputs = ladder.flow, ladder.flow.inputs.values
    spread = [truth["width_spread[expansion]"], truth["colour_spread[expansion]"]]
    both = -0.4 * spread[0] * spread[1]
    population = np.array([[spread[0] ** 2, both], [both, spread[1] ** 2]])
    loads = np.array([[-0.3, truth["beta"]], [1.0, 0.0], [0.0, 1.0]])
    covariance = np.tile(loads @ population @ loads.T, (len(flow), 1, 1))
    covariance[:, 0, 0] += flow.variance + peculiar_variance(flow.redshift, 250.0)
    covariance[:, 0, 0] += truth["peak_scatter"] ** 2
    for (i, j), role in zip(((0, 1), (0, 2), (1, 2)), ROLES, strict=True):
        covariance[:, i, j] += inputs[role]
        covariance[:, j, i] += inputs[role]
    covariance[:, 1, 1] += inputs["width_error"] ** 2
    covariance[:, 2, 2] += inputs["colour_error"] ** 2
    level = distance_term(flow.redshift, flow.redshift_heliocentric, -0.55, 1.0)
    level += truth["peak_magnitude"] - 5.0 * np.log10(truth["hubble_constant"]) - 0.3 * 0.4
    mean = np.stack([level, np.full(len(flow), 0.4), np.zeros(len(flow))], axis=1)
    rng, white = np.random.default_rng(5), []
    for _ in range(40):
        again = mock_from_ladder(ladder, truth, rng).flow
        seen = [again.magnitude, again.inputs.values["width"], again.inputs.values["colour"]]
        off = np.stack(seen, axis=1) - mean
        white.append(np.linalg.solve(np.linalg.cholesky(covariance), off[..., None])[..., 0])
    drawn = np.concatenate(white)
    np.testing.assert_allclose(drawn.mean(axis=0), 0.0, atol=4.0 / np.sqrt(len(drawn)))
    np.testing.assert_allclose(np.cov(drawn.T), np.eye(3), atol=4.0 * np.sqrt(2.0 / len(drawn)))


def test_the_second_sample_is_drawn_from_what_its_truth_says() -> None:
    """Its own truth, at five of the posterior's errors: the seed is not chosen to please."""
    folder = shipped("sample_data")
    truth = tomllib.loads((folder / "tripp_truth.toml").read_text())["truth"]
    result = lf.draw(lf.read_ladder(folder / "tripp.toml"), seed=1, draws=1000)
    free = [name for name in result.headline if name in truth and result.sd(name) > 0.0]
    assert {"alpha", "beta", "mass_step", "survey_offset[Marl]"} <= set(free)
    for name in free:
        assert abs(result.mean(name) - truth[name]) < 5.0 * result.sd(name), name


def test_a_draft_finds_the_columns_and_leaves_the_terms_open(tmp_path: Path) -> None:
    folder = shipped("sample_data")
    names = ("cepheids", "parallax_stars", "tripp_supernovae", "tripp_flow")
    made = write_draft([folder / f"{name}.ecsv" for name in names], tmp_path / "draft.toml")
    sample = lf.read_ladder(folder / "tripp.toml").choices
    for section in ("supernovae", "expansion"):
        found = {r: c.value for r, c in made.sources[section][1].columns.items()}
        assert found == dict(sample.value(f"{section}.columns"))
    opened = [entry.dotted for entry in made.undecided if entry.dotted.startswith("peak_relation")]
    assert opened == [f"peak_relation.{term}" for term in ("width", "colour", "host_mass")]


def test_a_draft_of_standardised_peaks_has_no_terms(tmp_path: Path) -> None:
    table = pd.DataFrame(
        {"SN": ["a", "b", "c"], "zcmb": [0.03, 0.04, 0.05], "mB": [16.0, 16.5, 17.0]}
    )
    table["e_mB"] = 0.1
    table.to_csv(tmp_path / "flow.csv", index=False)
    made = write_draft([tmp_path / "flow.csv"], tmp_path / "draft.toml")
    assert not [entry for entry in made.entries if entry.section == ("peak_relation",)]
