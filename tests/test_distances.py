"""Distances of new hosts: the same as if they had been in the fit; what lies outside is told."""

from __future__ import annotations

import dataclasses
import json
from pathlib import Path

import builders
import held_out
import numpy as np
import pytest
from astropy.table import Table
from small_ladders import small_ladder

from ladderfit.cli import main
from ladderfit.distances.files import distance_table, distances_text, write_distances
from ladderfit.distances.joined_ladders import together
from ladderfit.distances.moduli import Distances, distances_of, megaparsecs
from ladderfit.errors import InputError, LadderfitError
from ladderfit.ladder import build_ladder, read_ladder
from ladderfit.names import with_group
from ladderfit.ranges import Ranges, calibrated_ranges
from ladderfit.result import Result
from ladderfit.sampling.run import draw
from ladderfit.store import read_netcdf, read_ranges, read_result, write_result

DRAWS = 4000


@pytest.fixture(scope="module")
def survey() -> held_out.Survey:
    return held_out.survey(0)


@pytest.fixture(scope="module")
def base(survey: held_out.Survey) -> Result:
    return draw(survey.ladder, seed=2, draws=DRAWS)


@pytest.fixture(scope="module")
def joint(survey: held_out.Survey) -> Result:
    return draw(survey.whole, seed=3, draws=4 * DRAWS)


@pytest.fixture(scope="module")
def found(base: Result, survey: held_out.Survey) -> Distances:
    return distances_of(base, [survey.cepheids, survey.supernovae])


def agree(one: Distances, joint: Result, error: float = 4.0) -> None:
    """Means, spreads and correlations within so many Monte Carlo errors."""
    worst = min(one.ess, *joint.diagnostics.ess.values())
    size = 1.0 / np.sqrt(worst)
    names = [with_group("modulus", host) for host in one.hosts]
    mine = np.stack([*one.draws.values(), *(one.parameters[n] for n in joint.headline)])
    theirs = np.stack([joint.draws[n] for n in (*names, *joint.headline)])
    free = theirs.std(axis=1) > 0.0
    mine, theirs = mine[free], theirs[free]
    shift = (mine.mean(axis=1) - theirs.mean(axis=1)) / theirs.std(axis=1)
    assert np.all(np.abs(shift) < error * size * 1.3), shift
    spread = np.log(mine.std(axis=1) / theirs.std(axis=1))
    assert np.all(np.abs(spread) < error * size), spread
    apart = np.corrcoef(mine) - np.corrcoef(theirs)
    assert np.all(np.abs(apart) < 1.4 * error * size), np.abs(apart).max()


# --- the same as in the fit ---------------------------------------------------------------


def test_new_hosts_are_as_if_in_the_fit(found: Distances, joint: Result) -> None:
    """The joint fit is read from the whole tables: another way to the same posterior."""
    assert found.route == "weights"
    assert found.pareto_k < 0.7
    assert set(found.hosts) == set(held_out.HELD_OUT)
    agree(found, joint)


def test_the_saved_draws_alone_would_not_be(base: Result, found: Distances, joint: Result) -> None:
    """Negative control: without the weights, parameters stay those of the calibration."""
    unweighted = dataclasses.replace(found, parameters=dict(base.draws))
    with pytest.raises(AssertionError):
        agree(unweighted, joint)


def test_drawn_anew_it_is_the_same(base: Result, survey: held_out.Survey, joint: Result) -> None:
    """A new host named like one of the calibration's own takes the other route."""
    again = draw(together(survey.ladder, _new_ladder(base, survey)), seed=5, draws=DRAWS)
    names = [with_group("modulus", host) for host in held_out.HELD_OUT]
    for name in (*names, "zero_point", "peak_magnitude", "hubble_constant"):
        size = joint.sd(name) / np.sqrt(min(again.diagnostics.ess.values()))
        assert abs(again.mean(name) - joint.mean(name)) < 5.0 * size


def _new_ladder(base: Result, survey: held_out.Survey):  # type: ignore[no-untyped-def]
    from ladderfit.distances.new_objects import new_objects

    return new_objects(base.choices, [survey.cepheids, survey.supernovae]).ladder


def test_more_stars_in_a_known_host_join_it(base: Result, survey: held_out.Survey) -> None:
    more = survey.cepheids[survey.cepheids["Galaxy"] == "Fenoru"].copy()
    more["Galaxy"] = "Hestrin"
    offset = 31.033 - 30.608
    for band in ("Hmag", "Vmag", "Imag"):
        more[band] = more[band] + offset
    joined = distances_of(base, [more])
    assert joined.route == "fit"
    assert any("Hestrin: in the calibration already" in note for note in joined.notes)
    before = base.sd("modulus[Hestrin]")
    assert joined.draws["Hestrin"].std() < 0.95 * before


def test_supernovae_alone_have_the_peak_magnitude_s_error(base: Result) -> None:
    """One new supernova says nothing of the parameters: its modulus is m - M."""
    new = Table({"SN": ["N1"], "Galaxy": ["Nowhere"], "mB": [13.0], "e_mB": [0.1]})
    for name in ("mB", "e_mB"):
        new[name].unit = "mag"
    alone = distances_of(base, [new])
    peak, scatter = base.draws["peak_magnitude"], base.draws["peak_scatter"]
    expected = np.sqrt(np.var(peak) + 0.01 + np.mean(scatter**2))
    assert alone.ess > 0.9 * DRAWS
    assert alone.draws["Nowhere"].mean() == pytest.approx(13.0 - peak.mean(), abs=0.012)
    assert alone.draws["Nowhere"].std() == pytest.approx(expected, rel=0.05)
    shared = np.corrcoef(alone.draws["Nowhere"], alone.parameters["peak_magnitude"])[0, 1]
    assert shared == pytest.approx(-peak.std() / expected, abs=0.06)


def test_errors_of_the_inputs_count_too() -> None:
    """Periods and metallicities with errors, populations of metallicity: the same posterior."""
    whole, less, new = _noisy()
    one = distances_of(draw(less, seed=2, draws=DRAWS), [new])
    agree(one, draw(whole, seed=3, draws=2 * DRAWS), error=5.0)


def _noisy():  # type: ignore[no-untyped-def]
    rng = np.random.default_rng(5)
    tables = builders.tables()
    stars = tables["cepheids"]
    stars["e_P"], stars["e_OH"] = 0.01 * stars["P"], 0.1
    stars["OH"] += 0.1 * rng.normal(size=len(stars))
    plain = builders.choices()
    plain["cepheids"]["columns"] |= {"period_error": "e_P", "metallicity_error": "e_OH"}
    del plain["anchors"]["parallaxes"], tables["anchors.parallaxes"]
    for section in ("supernovae", "expansion"):
        del plain[section], tables[section]
    out = stars["Galaxy"] == "Q07"
    whole = build_ladder(plain, tables)
    return whole, build_ladder(plain, {"cepheids": stars[~out]}), stars[out]


def test_the_prior_of_distances_is_the_calibration_s(survey: held_out.Survey) -> None:
    """Uniform in volume pushes a modulus out by 0.6 ln 10 times its variance."""
    few = survey.cepheids[survey.cepheids["Galaxy"] == "Vestow"][:3]
    flat = draw(survey.ladder, seed=2, draws=2000)
    volume = draw(
        survey.ladder.change({"hosts.distance_prior": "uniform in volume"}), seed=2, draws=2000
    )
    one, other = (distances_of(result, [few]) for result in (flat, volume))
    moved = float(other.draws["Vestow"].mean() - one.draws["Vestow"].mean())
    own = np.var(one.draws["Vestow"])
    push = 0.6 * np.log(10.0) * own + (flat.mean("zero_point") - volume.mean("zero_point"))
    assert moved == pytest.approx(push, abs=0.02)


# --- warnings ----------------------------------------------------------------------------


def test_what_lies_outside_is_told(base: Result, survey: held_out.Survey) -> None:
    ranges = Ranges(period=(20.0, 60.0), metallicity=(8.7, 8.8), colour=(1.0, 1.2))
    told = distances_of(base, [survey.cepheids], ranges=ranges).warnings
    for words in ("period, 20 to 60 d", "metallicity, 8.7 to 8.8 dex", "colour, 1 to 1.2 mag"):
        assert any(words in warning for warning in told), words
    assert len({warning.split(":")[0] for warning in told}) == len(held_out.HELD_OUT)


def test_what_lies_inside_is_not(base: Result, survey: held_out.Survey) -> None:
    wide = Ranges(period=(1.0, 200.0), metallicity=(7.0, 10.0), colour=(-2.0, 5.0))
    assert not distances_of(base, [survey.cepheids], ranges=wide).warnings


def test_the_ranges_are_those_of_the_stars(base: Result, survey: held_out.Survey) -> None:
    covered = calibrated_ranges(survey.ladder)
    period = 10.0**survey.ladder.cepheids.log_period  # type: ignore[union-attr]
    assert covered.period is not None
    assert covered.period[0] <= period.min()
    assert covered.period[1] == pytest.approx(max(period.max(), covered.period[1]))
    assert Ranges.read(json.loads(json.dumps(covered.written()))) == covered


def test_a_strange_photometric_system_is_told() -> None:
    plain, tables = builders.choices(), builders.tables()
    stars = tables["cepheids"]
    stars["Sys"] = "near"
    plain["cepheids"]["columns"]["system"] = "Sys"
    del plain["anchors"]["parallaxes"], tables["anchors.parallaxes"]
    result = draw(build_ladder(plain, tables), seed=1, draws=500)
    new = stars[stars["Galaxy"] == "Q07"].assign(Galaxy="New", Sys="far")
    told = distances_of(result, [new]).warnings
    assert [w for w in told if "12 of 12 Cepheids in the photometric system 'far'" in w]


def test_data_that_disagree_are_told(base: Result, survey: held_out.Survey) -> None:
    steep = survey.cepheids.copy()
    tilt = -1.0 * (np.log10(steep["P"]) - 1.0)
    for band in ("Hmag", "Vmag", "Imag"):
        steep[band] = steep[band] + tilt
    notes = distances_of(base, [steep]).notes
    assert any("slope" in note and "look whether they belong together" in note for note in notes)


# --- what is refused -----------------------------------------------------------------------


def test_stars_of_the_calibration_do_not_count_twice(survey: held_out.Survey) -> None:
    result = draw(survey.whole, seed=1, draws=500)
    with pytest.raises(InputError, match=r"the star 'Bre-001' of 'Brelin' and \d+ more, in the"):
        distances_of(result, [survey.cepheids])
    with pytest.raises(InputError, match="the supernova 'ES-001'"):
        distances_of(result, [survey.supernovae])


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"relation.pivot": 12.0}, "a choice that was made when the calibration was drawn"),
        ({"cepheids.periods": "all"}, "a list of 2"),
        ({"cepheids.periods": [200.0, 300.0]}, r"none of \d+ rows left"),
        ({"cepheids.columns.host": "Gal"}, "no column 'Gal'"),
    ],
)
def test_changes_that_do_not_fit(
    base: Result, survey: held_out.Survey, changes: dict, words: str
) -> None:
    with pytest.raises(InputError, match=words):
        distances_of(base, [survey.cepheids], changes=changes)


def test_tables_that_do_not_fit(base: Result, survey: held_out.Survey) -> None:
    with pytest.raises(InputError, match=r"no column 'Galaxy' \(host\)"):
        distances_of(base, [survey.cepheids["ID", "P", "Mode", "OH", "Vmag", "Imag", "Hmag"]])
    with pytest.raises(InputError, match="a second table of Cepheids"):
        distances_of(base, [survey.cepheids, survey.cepheids])
    with pytest.raises(InputError, match="no table"):
        distances_of(base, [])


def test_renamed_columns_are_named_anew(
    base: Result, survey: held_out.Survey, found: Distances
) -> None:
    other = survey.cepheids.copy()
    other.rename_columns(["Galaxy", "Vmag"], ["Gal", "F555W"])
    changes = {"cepheids.columns.host": "Gal", "cepheids.magnitude.bands.V": "F555W"}
    again = distances_of(base, [other, survey.supernovae], changes=changes)
    np.testing.assert_array_equal(again.draws["Vestow"], found.draws["Vestow"])


def test_without_the_calibration_s_tables(
    base: Result, survey: held_out.Survey, found: Distances
) -> None:
    """Saved draws suffice, unless a new host is an old one."""
    alone = dataclasses.replace(base, source=None)
    same = distances_of(alone, [survey.cepheids, survey.supernovae])
    np.testing.assert_array_equal(same.draws["Vestow"], found.draws["Vestow"])
    more = survey.cepheids.copy()
    more["Galaxy"] = "Hestrin"
    with pytest.raises(LadderfitError, match="tables are missing or changed"):
        distances_of(alone, [more])


def test_a_calibration_by_parallaxes_alone() -> None:
    result = draw(small_ladder("parallaxes"), seed=1, draws=1000)
    new = builders.tables()["cepheids"].rename(columns={"Hmag": "W", "e_H": "e_W"})
    with pytest.raises(InputError, match=r"--set cepheids\.columns\.host=NAME"):
        distances_of(result, [new])
    found = distances_of(result, [new], changes={"cepheids.columns.host": "Galaxy"})
    assert set(found.hosts) == set(builders.HOSTS)
    assert "zero_point" in found.parameters


# --- words, files and the command ------------------------------------------------------------


def test_words_and_files(found: Distances, base: Result, tmp_path: Path) -> None:
    text = distances_text(found)
    for host in found.hosts:
        assert host in text
    assert "as if the new objects had been in the fit without an anchor" in text
    write_distances(found, base, tmp_path)
    table = Table.read(tmp_path / "distances.ecsv", format="ascii.ecsv")
    for row in table:
        draws = found.draws[row["host"]]
        assert row["modulus"] == pytest.approx(draws.mean())
        assert row["distance"] == pytest.approx(megaparsecs(draws).mean())
    matrix = Table.read(tmp_path / "covariance_moduli.ecsv", format="ascii.ecsv")
    names = [name for name in matrix.colnames if name.startswith("modulus[")]
    stored = np.array([matrix[name] for name in names])
    np.testing.assert_allclose(stored, found.covariance(), rtol=1e-9)
    saved = read_netcdf(tmp_path / "posterior.nc")
    np.testing.assert_array_equal(saved["modulus[Vestow]"], found.draws["Vestow"])
    assert len(distance_table(found)) == len(found.hosts)


def test_the_command(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    builders.write_tables(tmp_path)
    tables = builders.tables()
    out = tables["cepheids"]["Galaxy"] == "Q07"
    tables["cepheids"][~out].to_csv(tmp_path / "cepheids.csv", index=False)
    tables["cepheids"][out].to_csv(tmp_path / "new.csv", index=False)
    peaks = tables["supernovae"]
    peaks[peaks["Galaxy"] != "Q07"].to_csv(tmp_path / "supernovae.csv", index=False)
    from ladderfit.ladder_file import write_choices

    choices = builders.choices(tables=True)
    write_choices(build_ladder(choices, {}, tmp_path).choices, tmp_path / "my.toml")
    result = draw(read_ladder(tmp_path / "my.toml"), seed=1, draws=500)
    (tmp_path / "saved").mkdir()
    write_result(result, tmp_path / "saved")
    assert read_ranges(tmp_path / "saved") == calibrated_ranges(result.ladder)
    saved, new = str(tmp_path / "saved"), str(tmp_path / "new.csv")
    assert main(["distances", saved, new, "--out", str(tmp_path / "far")]) == 0
    said = capsys.readouterr().out
    assert "Q07" in said
    assert (tmp_path / "far" / "distances.tex").is_file()
    assert main(["distances", saved, new, "--set", "cepheids.periods=[10, 20]"]) == 0
    assert "outside the period range" in capsys.readouterr().out
    assert main(["distances", saved, new, "--out", str(tmp_path / "far")]) == 2
    assert main(["distances", saved, new, "--set", "relation.pivot"]) == 2
    assert main(["distances", saved, str(tmp_path / "none.csv")]) == 2
    assert "Traceback" not in capsys.readouterr().err
    (tmp_path / "cepheids.csv").unlink()
    assert read_result(saved).source is None
    assert main(["distances", saved, new]) == 0  # the tables behind the result may be gone


@pytest.mark.parametrize("treatment", ["mixture", "Student-t"])
def test_outliers_in_the_new_stars_are_met_as_in_the_fit(treatment: str) -> None:
    """Stars that lie off count as the calibration's own outliers do."""
    plain, tables = builders.choices(), builders.tables()
    plain["cepheids"]["outliers"] = {"treatment": treatment}
    del plain["anchors"]["parallaxes"], tables["anchors.parallaxes"]
    for section in ("supernovae", "expansion"):
        del plain[section], tables[section]
    stars = tables["cepheids"]
    stars.loc[[3, 15, 30], "Hmag"] += [0.9, -1.1, 1.0]
    out = stars["Galaxy"] == "Q07"
    less = build_ladder(plain, {"cepheids": stars[~out]})
    one = distances_of(draw(less, seed=2, draws=DRAWS), [stars[out]])
    agree(one, draw(build_ladder(plain, tables), seed=3, draws=2 * DRAWS), error=6.0)
