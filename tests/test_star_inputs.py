"""Errors of the inputs, photometric systems, groups and the break, on their way in."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest
from astropy.table import Table
from builders import choices
from star_tables import built, cepheids, complaints, given

from ladderfit.errors import InputError
from ladderfit.ladder import build_ladder
from ladderfit.physics.overtones import PERIOD_RATIOS, fundamental_stretch
from ladderfit.relations import design, scatters

FEAST = PERIOD_RATIOS["Feast & Catchpole 1997"]
COLUMNS = "cepheids.columns"


# --- errors of the inputs ----------------------------------------------------------------


def with_errors() -> dict[str, pd.DataFrame]:
    data = given()
    data["cepheids"]["e_P"] = 0.01 * data["cepheids"]["P"]
    data["cepheids"]["e_OH"] = 0.06
    return data


def test_period_errors_become_errors_of_the_logarithm() -> None:
    stars = cepheids(built({f"{COLUMNS}.period_error": "e_P"}, with_errors()))
    assert stars.log_period_error is not None
    assert stars.log_period_error == pytest.approx(0.01 / np.log(10.0), rel=1e-12)
    assert stars.metallicity_error is None


def test_period_errors_stretch_with_the_conversion() -> None:
    changes = {f"{COLUMNS}.period_error": "e_P", "cepheids.overtones": "convert"}
    stars = cepheids(built(changes, with_errors()))
    assert stars.log_period_error is not None
    converted = stars.log_period_error[stars.row == 5] * np.log(10.0) / 0.01
    assert converted == pytest.approx(float(fundamental_stretch(np.log10(4.0), FEAST)), rel=1e-12)
    assert stars.log_period_error[stars.row == 6] == pytest.approx(0.01 / np.log(10.0), rel=1e-12)


def test_errors_of_a_logarithmic_period_are_in_dex() -> None:
    data = with_errors()
    data["cepheids"]["logP"] = np.log10(data["cepheids"].pop("P"))
    data["cepheids"]["e_logP"] = 0.004
    columns = {"host": "Galaxy", "log_period": "logP", "period_error": "e_logP"}
    columns |= {"metallicity": "OH", "mode": "Mode"}
    stars = cepheids(built({COLUMNS: columns}, data))
    assert stars.log_period_error == pytest.approx(0.004)


def test_units_of_the_errors() -> None:
    data = with_errors()
    hours = data["cepheids"].copy()
    hours["e_P"] *= 24.0
    table = Table.from_pandas(hours)
    table["e_P"].unit, table["P"].unit = "h", "d"
    stars = cepheids(built({f"{COLUMNS}.period_error": "e_P"}, {**data, "cepheids": table}))
    assert stars.log_period_error == pytest.approx(0.01 / np.log(10.0), rel=1e-12)
    table["e_P"].unit = "mag"
    assert complaints({f"{COLUMNS}.period_error": "e_P"}, {**data, "cepheids": table}) == [
        "the table given for cepheids, column 'e_P': found the unit 'mag'; "
        "expected an error of a period, in d or what converts to it; "
        "name the right column, or correct its unit"
    ]


def test_a_logarithm_of_hours_has_an_error_in_dex_all_the_same() -> None:
    data = with_errors()
    table = Table.from_pandas(data["cepheids"].assign(logP=np.log10(data["cepheids"]["P"] * 24.0)))
    table["e_logP"] = 0.004
    table["logP"].unit = table["e_logP"].unit = "dex(h)"
    columns = {"host": "Galaxy", "log_period": "logP", "period_error": "e_logP"}
    columns |= {"metallicity": "OH", "mode": "Mode"}
    stars = cepheids(built({COLUMNS: columns}, {**data, "cepheids": table}))
    assert stars.log_period_error == pytest.approx(0.004)
    observed = data["cepheids"]["P"].to_numpy()[stars.row - 1]
    assert stars.log_period == pytest.approx(np.log10(observed))


def test_metallicity_errors_come_with_the_term_only() -> None:
    changes: dict[str, Any] = {f"{COLUMNS}.metallicity_error": "e_OH"}
    stars = cepheids(built(changes, with_errors()))
    assert stars.metallicity_error == pytest.approx(0.06)
    changes["relation.metallicity"] = "none"
    assert cepheids(built(changes, with_errors())).metallicity_error is None


@pytest.mark.parametrize(
    ("role", "column", "words"),
    [
        ("period_error", "e_P", "missing period error"),
        ("metallicity_error", "e_OH", "missing metallicity error"),
    ],
)
def test_a_missing_error_sets_the_star_aside(role: str, column: str, words: str) -> None:
    data = with_errors()
    data["cepheids"].loc[[1, 2], column] = np.nan
    ladder = built({f"{COLUMNS}.{role}": column}, data)
    assert ladder.kept["cepheids"].reasons == {words: 2, "overtone": 2}


@pytest.mark.parametrize("error", [0.0, -0.01])
@pytest.mark.parametrize(
    ("role", "column"), [("period_error", "e_P"), ("metallicity_error", "e_OH")]
)
def test_an_error_has_to_be_above_zero(role: str, column: str, error: float) -> None:
    data = with_errors()
    data["cepheids"].loc[[1, 2], column] = error
    assert complaints({f"{COLUMNS}.{role}": column}, data) == [
        f"the table given for cepheids, row 2, column {column!r}: found {error:g} "
        "(and 1 more such row); expected an error above 0; "
        "correct the cell, empty it, or set the row aside"
    ]


def test_metallicity_errors_need_metallicities() -> None:
    columns = {"host": "Galaxy", "period": "P", "metallicity_error": "e_OH"}
    assert complaints({COLUMNS: columns, "relation.metallicity": "none"}, with_errors()) == [
        "key cepheids.columns: found a column of metallicity errors, but none of metallicities; "
        'expected both or neither; add metallicity = "..." to columns, '
        "or remove metallicity_error"
    ]


# --- systems and groups ------------------------------------------------------------------


def with_systems() -> dict[str, pd.DataFrame]:
    data = given()
    data["cepheids"]["Cam"] = np.where(np.arange(36) % 3 == 0, "ground", "WF-2")
    return data


def test_systems_are_carried_along() -> None:
    ladder = built({f"{COLUMNS}.system": "Cam"}, with_systems())
    stars = cepheids(ladder)
    assert stars.system is not None
    assert list(stars.system) == ["ground" if row % 3 == 1 else "WF-2" for row in stars.row]
    assert ladder.parallax_stars is not None
    assert ladder.parallax_stars.system is None


def test_a_missing_system_sets_the_star_aside() -> None:
    data = with_systems()
    data["cepheids"].loc[[10, 11, 12], "Cam"] = ""
    ladder = built({f"{COLUMNS}.system": "Cam"}, data)
    assert ladder.kept["cepheids"].reasons == {"missing system": 3, "overtone": 2}


def test_groups_of_every_kind_find_their_stars() -> None:
    ladder = built(
        {
            f"{COLUMNS}.system": "Cam",
            "cepheids.overtones": "offset",
            "cepheids.periods": [3.0, 100.0],
            "groups": {
                "near": {"hosts": ["Tavin"], "parallax_stars": True},
                "ground": {"system": "ground"},
                "overtones": {"mode": "overtone"},
            },
            "relation.zero_points": ["ground"],
            "relation.slopes": ["near"],
            "relation.scatter": ["overtones", "near"],
        },
        with_systems(),
    )
    stars = cepheids(ladder)
    columns = design(ladder.choices, stars, ladder.hosts)
    assert stars.system is not None
    assert list(columns["zero_point_offset[ground]"]) == list((stars.system == "ground") * 1.0)
    near = stars.host == ladder.hosts.index("Tavin")
    assert list(columns["slope_offset[near]"]) == list((stars.log_period - 1.0) * near)
    names, which = scatters(ladder.choices, stars, ladder.hosts)
    assert names == ("scatter", "scatter[overtones]", "scatter[near]")
    assert stars.overtone is not None
    assert list(which) == list(np.where(stars.overtone, 1, np.where(near, 2, 0)))
    assert ladder.parallax_stars is not None
    assert scatters(ladder.choices, ladder.parallax_stars, ladder.hosts)[0] == ("scatter[near]",)


@pytest.mark.parametrize(
    ("group", "remedy"),
    [
        ({"system": "HRC"}, "name the column of photometric systems: columns.system"),
        (
            {"mode": "overtone"},
            'keep the overtones (overtones = "offset"), or take the group out',
        ),
        (
            {"hosts": ["Tavin"], "system": "ground", "mode": "overtone"},
            "name the column of photometric systems: columns.system",
        ),
    ],
)
def test_a_group_of_nobody(group: dict[str, Any], remedy: str) -> None:
    assert complaints({"groups": {"few": group}}) == [
        "key groups.few: found no star that takes part; expected at least one star that meets "
        f"every criterion of the group; {remedy}"
    ]


def test_a_group_of_an_unknown_system() -> None:
    changes = {f"{COLUMNS}.system": "Cam", "groups": {"few": {"system": "WF2"}}}
    (line,) = complaints(changes, with_systems())
    assert line.endswith("every criterion of the group; did you mean 'WF-2'?")


def test_a_group_that_the_cuts_emptied() -> None:
    data = given()
    data["cepheids"].loc[:11, "P"] = 4.0  # all of Tavin
    (line,) = complaints({"groups": {"near": {"hosts": ["Tavin"]}}}, data)
    assert line == (
        "key groups.near: found no star that takes part; expected at least one star that meets "
        "every criterion of the group; "
        "correct its criteria, widen the cuts, or take the group out"
    )


def test_a_group_of_an_unknown_host() -> None:
    assert complaints({"groups": {"near": {"hosts": ["Tavinn", "Orrel"]}}}) == [
        "key groups.near.hosts: found the host 'Tavinn', which no table has; "
        "expected hosts of the Cepheids; did you mean 'Tavin'?"
    ]


def test_parallax_stars_may_be_switched_off_under_a_group() -> None:
    groups = {"groups": {"near": {"parallax_stars": True}}, "relation.scatter": ["near"]}
    ladder = built(groups).change({"anchors.parallaxes.use": False})
    assert ladder.notes[-1] == ("group near: no star takes part, as the parallaxes are not in use")
    plain = choices()
    del plain["anchors"]["parallaxes"]
    plain["groups"] = groups["groups"]
    data = given()
    del data["anchors.parallaxes"]
    with pytest.raises(InputError, match=r"add \[anchors.parallaxes\], or take the group out"):
        build_ladder(plain, data)


# --- the break ---------------------------------------------------------------------------


@pytest.mark.parametrize("place", [3.0, 99.0])
def test_a_break_with_stars_on_one_side(place: float) -> None:
    period = given()["cepheids"]["P"].drop([4, 19])
    stars = given()["anchors.parallaxes"]["P"]
    low, high = min(period.min(), stars.min()), max(period.max(), stars.max())
    assert complaints({"relation.break": place}) == [
        f"key relation.break: found {place:g} d, where the periods that take part run from "
        f"{low:.4g} to {high:.4g} d; expected a period with stars on both sides; "
        'move the break, widen the period range, or write break = "none"'
    ]


def test_a_cut_may_leave_the_break_outside() -> None:
    ladder = built({"relation.break": 12.0})
    with pytest.raises(InputError, match=r"key relation.break: found 12 d, where the periods"):
        ladder.change({"cepheids.periods": [15.0, 100.0], "anchors.parallaxes.use": False})
