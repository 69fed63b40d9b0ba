"""Each verdict on a made table, its evidence, and what refuses a claim."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest
from review_papers import CEPHEIDS, table
from test_published_small import FREEDMAN

import ladderfit as lf
from ladderfit.ladder import Ladder
from ladderfit.review import VERDICTS, ClaimReview, claims_from, review
from ladderfit.review import verdicts as v
from ladderfit.review.words import fewest

SLOPE = {"quantity": "slope", "value": -3.3}


@pytest.fixture(scope="module")
def stars() -> pd.DataFrame:
    return table(np.random.default_rng(11))


@pytest.fixture(scope="module")
def ladder(stars: pd.DataFrame) -> Ladder:
    return lf.build_ladder({"cepheids": CEPHEIDS}, {"cepheids": stars})


@pytest.fixture(scope="module")
def line(ladder: Ladder) -> tuple[np.ndarray, np.ndarray]:
    """Slope and level at 10 d of numpy's least squares, and their errors."""
    sample = ladder.cepheids
    found, covariance = np.polyfit(sample.log_period - 1.0, sample.magnitude, 1, cov=True)
    return found, np.sqrt(np.diag(covariance))


def reviewed(ladder: Ladder, *claims: dict[str, Any], **head: Any) -> tuple[ClaimReview, ...]:
    return review(ladder, claims_from({**head, "claim": list(claims)}), draws=400).claims


def slope(line: tuple[np.ndarray, np.ndarray], shift: float = 0.0, **more: Any) -> dict[str, Any]:
    (value, _), (error, _) = line
    return {
        "quantity": "slope",
        "value": round(value + shift * error, 4),
        "error": round(error, 4),
        **more,
    }


def test_verdicts_are_those_of_the_list() -> None:
    assert VERDICTS == (
        "reproduced as described",
        "reproduced by another method",
        "reproduced only under a choice not stated",
        "not reproduced",
        "its error is too small",
        "its error is too large",
        "stated at another pivot",
        "cannot be judged from this table",
    )


def test_reproduced_as_described(ladder: Ladder, line: Any) -> None:
    (found,) = reviewed(ladder, slope(line))
    assert found.names == (v.AS_DESCRIBED,)
    assert found.refits[0].within_rounding
    assert "within the rounding of the claim" in found.verdicts[0].evidence
    ways = [refit.words for refit in found.refits]
    assert ways[0] == "least squares, no weights"
    assert "hierarchical fit" in ways
    assert any("clip at 2.5" in words for words in ways)


def test_not_reproduced(ladder: Ladder, line: Any) -> None:
    (found,) = reviewed(ladder, slope(line, 4.0))
    assert found.names == (v.NOT_REPRODUCED,)
    assert "4.0 of its errors" in found.verdicts[0].evidence


@pytest.mark.parametrize(("factor", "name"), [(0.25, v.ERROR_TOO_SMALL), (4.0, v.ERROR_TOO_LARGE)])
def test_errors(ladder: Ladder, line: Any, factor: float, name: str) -> None:
    claim = slope(line)
    claim["error"] = round(claim["error"] * factor, 4)
    (found,) = reviewed(ladder, claim)
    assert found.names == (v.AS_DESCRIBED, name)
    assert "allow errors of" in found.verdicts[1].evidence


def test_an_error_below_what_any_periods_allow(ladder: Ladder, line: Any) -> None:
    claim = slope(line) | {"error": 0.0001, "error_decimals": 4}
    (found,) = reviewed(ladder, claim)
    assert any("impossible" in check.words for check in found.checks)


def test_another_pivot(ladder: Ladder, line: Any) -> None:
    value, error = line[0][1] - line[0][0], 2.0 * line[1][1]
    claim = {"quantity": "zero_point", "apparent": True, "error": round(error, 3)}
    (found,) = reviewed(ladder, claim | {"value": round(value, 3), "pivot": 10.0})
    assert found.names == (v.ANOTHER_PIVOT,)
    assert "at 1 d" in found.verdicts[0].evidence
    (right,) = reviewed(ladder, claim | {"value": round(value, 3), "pivot": 1.0})
    assert right.names == (v.AS_DESCRIBED,)
    # A magnitude that lies nowhere in particular is not called another pivot.
    (nowhere,) = reviewed(ladder, claim | {"value": round(value + 0.4, 3), "pivot": 10.0})
    assert nowhere.verdict == v.NOT_REPRODUCED
    assert "the line has the claimed magnitude at" in nowhere.verdicts[0].evidence


def spoiled_table(stars: pd.DataFrame) -> pd.DataFrame:
    """Long-period stars that lie 0.4 mag low: a clip, or a cut, takes them out."""
    low = stars.copy()
    low.loc[low["P"].nlargest(4).index, "Hmag"] += 0.9
    return low


def test_another_method(stars: pd.DataFrame) -> None:
    ladder = lf.build_ladder({"cepheids": CEPHEIDS}, {"cepheids": spoiled_table(stars)})
    sample = ladder.cepheids
    kept = np.ones(len(sample), bool)
    for _ in range(20):
        found, covariance = np.polyfit(
            sample.log_period[kept] - 1.0, sample.magnitude[kept], 1, cov=True
        )
        rest = sample.magnitude - np.polyval(found, sample.log_period - 1.0)
        kept = np.abs(rest) < 3.0 * np.sqrt(np.sum(rest[kept] ** 2) / (kept.sum() - 2))
    claim = slope((found, np.sqrt(np.diag(covariance))), stars=int(kept.sum()))
    (clipped,) = reviewed(ladder, claim)
    assert clipped.names[0] == v.BY_ANOTHER_METHOD
    assert "clip at 3 s.d." in clipped.verdicts[0].evidence
    (told,) = reviewed(ladder, claim | {"method": {"clip": 3.0}})
    assert told.names == (v.AS_DESCRIBED,)


def test_a_choice_not_stated(stars: pd.DataFrame) -> None:
    low = spoiled_table(stars)
    low.loc[low["P"] > 30.0, "Hmag"] += 0.5
    ladder = lf.build_ladder({"cepheids": CEPHEIDS}, {"cepheids": low})
    sample = ladder.cepheids
    short = 10.0**sample.log_period <= 30.0
    found, covariance = np.polyfit(
        sample.log_period[short] - 1.0, sample.magnitude[short], 1, cov=True
    )
    claim = slope((found, np.sqrt(np.diag(covariance))), stars=int(short.sum()))
    (cut,) = reviewed(ladder, claim)
    assert cut.names == (v.UNDER_A_CHOICE,)
    assert "periods up to 30 d" in cut.verdicts[0].evidence
    # The ladder file's own range is one of the choices, not part of the description.
    (own,) = reviewed(ladder.change({"cepheids.periods": [0.0, 30.0]}), claim)
    assert own.names == (v.UNDER_A_CHOICE,)
    (told,) = reviewed(ladder, claim | {"method": {"periods": [0.0, 30.0]}})
    assert told.names == (v.AS_DESCRIBED,)
    axes = {each.axis for each in told.variations}
    assert axes >= {"shortest period [d]", "longest period [d]", "clip [s.d.]", "break"}


def test_numbers_of_one_relation_are_explained_together(stars: pd.DataFrame) -> None:
    """A magnitude that any cut gives is explained by the cut that gives the slope."""
    low = spoiled_table(stars)
    low.loc[low["P"] > 30.0, "Hmag"] += 0.5
    ladder = lf.build_ladder({"cepheids": CEPHEIDS}, {"cepheids": low})
    sample = ladder.cepheids
    short = 10.0**sample.log_period <= 30.0
    x, y = sample.log_period[short] - 1.0, sample.magnitude[short]
    found, covariance = np.polyfit(x, y, 1, cov=True)
    count = {"stars": int(short.sum())}
    level = {"quantity": "zero_point", "apparent": True, "value": round(found[1], 3), **count}
    claims = [slope((found, np.sqrt(np.diag(covariance))), **count), level]
    pair = reviewed(ladder, *claims, paper="Quillon")
    assert [each.verdict for each in pair] == [v.UNDER_A_CHOICE] * 2
    assert {each.explanation.words for each in pair} == {"periods up to 30 d"}


@pytest.mark.parametrize(
    ("claim", "words"),
    [
        ({"quantity": "hubble_constant", "value": 73.0}, "no expansion"),
        ({"quantity": "peak_magnitude", "value": -19.2}, "no supernovae"),
        ({"quantity": "metallicity", "value": -0.2}, "no metallicity term"),
        ({"quantity": "zero_point", "value": -5.9}, "no anchor is in use"),
        ({"quantity": "modulus", "value": 20.0, "host": "Orrel"}, "no anchor is in use"),
        ({"quantity": "modulus", "value": 20.0, "host": "Tavin"}, "no host Tavin"),
        ({"quantity": "slope", "value": -3.3, "stars": 9000}, "the paper has 9,000 stars"),
        ({"quantity": "slope", "value": -3.3, "method": {"fixed": {"slope": -3.3}}}, "fixed"),
        ({"quantity": "slope", "value": -3.3, "method": {"mode": "overtone"}}, "does not tell"),
        (
            {"quantity": "slope", "value": -3.3, "method": {"set_aside": ["Orr-001", "X"]}},
            "the paper sets aside X, which the table does not have",
        ),
        (
            {"quantity": "slope", "value": -3.3, "method": {"fixed": {"metallicity": -0.2}}},
            "the paper holds metallicity fixed, a term the ladder file lacks",
        ),
        (
            {"quantity": "slope", "value": -3.3, "method": {"metallicity": True}},
            "the ladder file none",
        ),
        (
            {"quantity": "slope", "value": -3.3, "method": {"periods": [500.0, 600.0]}},
            "no star is left",
        ),
        (
            {"quantity": "slope", "value": -3.3, "magnitude": {"band": "K"}},
            "the claim is for the band K, the ladder file for W = H - 0.386 (V-I)",
        ),
        (
            {
                "quantity": "slope",
                "value": -3.3,
                "magnitude": {"wesenheit": {"band": "H", "colour": ["V", "I"], "ratio": 0.4}},
            },
            "the claim has the Wesenheit ratio 0.4, the ladder file 0.386",
        ),
        (
            {
                "quantity": "slope",
                "value": -3.3,
                "magnitude": {"wesenheit": {"band": "H", "colour": ["J", "K"], "ratio": 0.386}},
            },
            "the claim is for the index H - 0.386 (J-K)",
        ),
        (
            {"quantity": "slope", "value": -3.3, "magnitude": {"system": "S2"}},
            "nothing says which the table is on",
        ),
    ],
)
def test_cannot_be_judged(ladder: Ladder, claim: dict[str, Any], words: str) -> None:
    (found,) = reviewed(ladder, claim)
    assert found.names == (v.CANNOT_BE_JUDGED,)
    assert words in found.verdicts[0].evidence
    assert found.refits == ()


def test_a_number_that_the_joint_fit_alone_knows() -> None:
    """Velocities against distances, Freedman et al. 2001: 76.6 +- 4.0 km/s/Mpc (read)."""
    claim = {"quantity": "hubble_constant", "value": 76.6, "error": 4.0}
    found = reviewed(FREEDMAN.ladder(), claim, claim | {"value": 96.6}, SLOPE)
    assert [each.verdict for each in found] == [
        v.AS_DESCRIBED,
        v.NOT_REPRODUCED,
        v.CANNOT_BE_JUDGED,
    ]
    assert [refit.words for refit in found[0].refits] == ["hierarchical fit"]
    assert found[0].variations == ()
    assert "no Cepheids" in found[2].verdicts[0].evidence
    assert "single choices were not tried" in fewest(found[0])


def test_systems(stars: pd.DataFrame, line: Any) -> None:
    columns = {**CEPHEIDS["columns"], "system": "sys"}
    choices = {"cepheids": {**CEPHEIDS, "columns": columns}}
    ladder = lf.build_ladder(choices, {"cepheids": stars.assign(sys="S1")})
    (same,) = reviewed(ladder, slope(line), magnitude={"system": "S1"})
    assert same.names == (v.AS_DESCRIBED,)
    (other,) = reviewed(ladder, slope(line), magnitude={"system": "S2"})
    assert other.names == (v.CANNOT_BE_JUDGED,)
    assert "'S2', the table on 'S1'" in other.verdicts[0].evidence
    (named,) = reviewed(ladder, slope(line), magnitude={"system": "S2"}, system="S2")
    assert named.names == (v.AS_DESCRIBED,)


def test_a_transformation_makes_a_claim_comparable(ladder: Ladder, line: Any) -> None:
    law = {"slope": 0.05, "zero_point": -0.2, "pivot": 10.0, "source": "Osk"}
    other = {"magnitude": {"system": "S2"}, "transformation": law}
    steep = slope(line) | other
    steep["value"] = round(steep["value"] - 0.05, 4)
    level = {"quantity": "zero_point", "apparent": True, "pivot": 1.0, **other}
    level["value"] = round(line[0][1] - line[0][0] + 0.2 + 0.05, 4)
    found = reviewed(ladder, steep, level)
    assert [each.names for each in found] == [(v.AS_DESCRIBED,)] * 2
    assert found[0].judged.value == pytest.approx(line[0][0], abs=1e-4)
    (plain,) = reviewed(ladder, {**steep, "magnitude": {}, "transformation": None})
    assert plain.judged.value == plain.claim.value


def test_errors_in_both_coordinates(stars: pd.DataFrame) -> None:
    """Against the line of York et al. (2004) in `ladderfit.classical`."""
    from ladderfit.classical import line_with_both_errors

    given = stars.assign(e_P=0.05 * stars["P"])
    columns = {**CEPHEIDS["columns"], "period_error": "e_P"}
    ladder = lf.build_ladder({"cepheids": {**CEPHEIDS, "columns": columns}}, {"cepheids": given})
    method = {"fit": "both errors"}
    (found,) = reviewed(ladder, {"quantity": "slope", "value": -3.3, "method": method})
    sample = ladder.cepheids
    first = found.refits[0]
    assert first.words == "line with errors in both coordinates"
    # The scatter that the refit finds, put into York's y errors, gives York's slope.
    (scatter,) = reviewed(
        ladder, {"quantity": "scatter", "value": 0.1, "intrinsic": True, "method": method}
    )
    extra = np.hypot(np.sqrt(sample.variance), scatter.refits[0].value)
    york = line_with_both_errors(
        sample.log_period - 1.0, sample.magnitude, sample.log_period_error, extra
    )
    assert first.value == pytest.approx(york.slope, abs=0.001 * york.slope_error)


def test_hosts_and_modes_are_choices_too() -> None:
    rng = np.random.default_rng(4)
    tables = [table(rng).iloc[:60].assign(Galaxy=host) for host in ("Tavin", "Orrel")]
    both = pd.concat(tables).reset_index(drop=True)
    both["ID"] = [f"S{i}" for i in range(len(both))]
    both["Mode"] = np.where(np.arange(len(both)) % 7 == 0, "1O", "F")
    columns = {**CEPHEIDS["columns"], "mode": "Mode"}
    ladder = lf.build_ladder({"cepheids": {**CEPHEIDS, "columns": columns}}, {"cepheids": both})
    (found,) = reviewed(ladder, {"quantity": "slope", "value": -3.3})
    axes = {(each.axis, each.words) for each in found.variations}
    assert axes >= {
        ("host left out", "Tavin"),
        ("host left out", "Orrel"),
        ("modes", "overtone"),
        ("modes", "both"),
    }
    assert found.refits[0].stars == int(np.sum(both["Mode"] == "F"))
    (one,) = reviewed(ladder, {"quantity": "slope", "value": -3.3, "method": {"hosts": ["Orrel"]}})
    fundamental = (both["Mode"] == "F") & (both["Galaxy"] == "Orrel")
    assert one.refits[0].stars == int(fundamental.sum())
    joint = next(refit for refit in one.refits if refit.way.joint)
    assert joint.stars == int(fundamental.sum())
