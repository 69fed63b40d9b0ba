"""Overtones, errors of the inputs, photometric systems, groups and the break, on their way in."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest
from astropy.table import Table
from builders import choices, tables

from ladderfit.errors import InputError
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.physics.overtones import (
    PERIOD_RATIOS,
    fundamental_log_period,
    fundamental_stretch,
    within_range,
)
from ladderfit.relations import design, scatters
from ladderfit.samples import StarSample

FEAST, ALCOCK = PERIOD_RATIOS["Feast & Catchpole 1997"], PERIOD_RATIOS["Alcock et al. 1995"]
COLUMNS = "cepheids.columns"


def given(**changes: Any) -> dict[str, pd.DataFrame]:
    """The small tables with two overtones among the Cepheids, rows 5 and 20."""
    found = tables()
    found["cepheids"].loc[[4, 19], "Mode"] = "1O"
    found["cepheids"].loc[[4, 19], "P"] = [4.0, 6.0]
    return {**found, **changes}


def built(changes: dict[str, Any] | None = None, data: Any = None) -> Ladder:
    """The small ladder with choices changed, by dotted key."""
    plain = choices()
    for dotted, value in (changes or {}).items():
        *parts, last = dotted.split(".")
        section = plain
        for part in parts:
            section = section.setdefault(part, {})
        section[last] = value
    return build_ladder(plain, given() if data is None else data)


def cepheids(ladder: Ladder) -> StarSample:
    assert ladder.cepheids is not None
    return ladder.cepheids


def complaints(changes: dict[str, Any], data: Any = None) -> list[str]:
    with pytest.raises(InputError) as caught:
        built(changes, data)
    return str(caught.value).splitlines()


# --- overtones ---------------------------------------------------------------------------


def test_overtones_are_dropped_unless_asked_for() -> None:
    ladder = built()
    assert ladder.kept["cepheids"].reasons == {"overtone": 2}
    assert cepheids(ladder).overtone is None


def test_overtones_with_an_offset_are_flagged() -> None:
    ladder = built({"cepheids.overtones": "offset", "cepheids.periods": [3.0, 100.0]})
    stars = cepheids(ladder)
    assert stars.overtone is not None
    assert list(stars.row[stars.overtone]) == [5, 20]
    assert np.all(10.0 ** stars.log_period[stars.overtone] == pytest.approx([4.0, 6.0]))
    column = design(ladder.choices, stars, ladder.hosts)["overtone_offset"]
    assert list(column) == [float(flag) for flag in stars.overtone]
    assert not any("overtone" in note for note in ladder.notes)


def test_an_offset_without_overtones_is_told() -> None:
    ladder = built({"cepheids.overtones": "offset"}, tables())
    note = "no overtone pulsator takes part; their offset rests on its prior alone"
    assert note in ladder.notes


@pytest.mark.parametrize(("name", "law"), PERIOD_RATIOS.items())
def test_converted_periods_by_hand(name: str, law: Any) -> None:
    ladder = built({"cepheids.overtones": "convert", "cepheids.conversion": name})
    stars = cepheids(ladder)
    assert stars.overtone is None
    zero, slope = {"Feast & Catchpole 1997": (0.716, -0.027)}.get(name, (0.733, -0.034))
    for row, period in ((5, 4.0), (20, 6.0)):
        expected = period / (zero + slope * np.log10(period))
        assert 10.0 ** stars.log_period[stars.row == row] == pytest.approx(expected, rel=1e-12)
    others = ~np.isin(stars.row, [5, 20])
    table = given()["cepheids"]
    observed = table["P"].to_numpy()[stars.row[others] - 1]
    assert stars.log_period[others] == pytest.approx(np.log10(observed), rel=1e-14)


def test_the_range_of_periods_is_for_converted_ones() -> None:
    """4 d becomes 5.7 d, 6 d becomes 8.6 d."""
    wide = built({"cepheids.overtones": "convert"})
    assert wide.kept["cepheids"].reasons == {}
    cut = built({"cepheids.overtones": "convert", "cepheids.periods": [5.8, 100.0]})
    assert 5 not in cepheids(cut).row
    assert 20 in cepheids(cut).row


def test_a_period_at_the_bound_is_kept() -> None:
    data = given()
    data["cepheids"].loc[7, "P"] = 5.0
    assert 8 in cepheids(built(data=data)).row


def test_conversion_notes_say_what_and_where_it_holds() -> None:
    data = given()
    data["cepheids"].loc[4, "P"] = 5.5  # log10 P1 = 0.74, beyond the range of Alcock et al.
    changes = {"cepheids.overtones": "convert", "cepheids.conversion": "Alcock et al. 1995"}
    assert list(built(changes, data).notes)[:2] == [
        "Cepheids: 2 overtone periods converted by P1/P0 = 0.733 - 0.034 log10 P1 "
        "(Alcock et al. 1995, from memory)",
        "Cepheids: 2 of 2 converted overtone periods outside 0.1 < log10 P1 < 0.7, "
        "where Alcock et al. 1995 is stated to hold",
    ]
    del changes["cepheids.conversion"]
    assert list(built(changes, data).notes) == [
        "Cepheids: 2 overtone periods converted by P1/P0 = 0.716 - 0.027 log10 P1 "
        "(Feast & Catchpole 1997, from memory)"
    ]


def test_parallax_stars_are_converted_too() -> None:
    data = given()
    data["anchors.parallaxes"].loc[2, "Mode"] = "FO"
    period = data["anchors.parallaxes"].loc[2, "P"]
    ladder = built({"anchors.parallaxes.overtones": "convert"}, data)
    assert ladder.parallax_stars is not None
    expected = fundamental_log_period(np.log10(period), FEAST)
    assert ladder.parallax_stars.log_period[2] == pytest.approx(float(expected), rel=1e-14)
    changed = ladder.change({"anchors.parallaxes.conversion": "Alcock et al. 1995"})
    assert changed.parallax_stars is not None
    assert changed.parallax_stars.log_period[2] != ladder.parallax_stars.log_period[2]


@pytest.mark.parametrize("law", [FEAST, ALCOCK])
def test_the_stretch_is_the_derivative(law: Any) -> None:
    x, step = np.linspace(-0.3, 1.2, 7), 1e-6
    ahead, behind = (fundamental_log_period(x + s, law) for s in (step, -step))
    slope = (ahead - behind) / (2.0 * step)
    assert fundamental_stretch(x, law) == pytest.approx(slope, rel=1e-8)
    assert np.all(fundamental_stretch(x, law) > 1.0)


def test_ranges_of_validity() -> None:
    assert list(within_range([0.05, 0.3, 0.9], ALCOCK)) == [False, True, False]
    assert np.all(within_range([-1.0, 2.0], FEAST))


@pytest.mark.parametrize("overtones", ["offset", "convert"])
@pytest.mark.parametrize("section", ["cepheids", "anchors.parallaxes"])
def test_overtones_need_a_mode(section: str, overtones: str) -> None:
    plain = choices()
    inner = plain["cepheids"] if section == "cepheids" else plain["anchors"]["parallaxes"]
    del inner["columns"]["mode"]
    inner["overtones"] = overtones
    with pytest.raises(InputError) as caught:
        build_ladder(plain, given())
    assert str(caught.value) == (
        f"key {section}.overtones: found {overtones!r}, but no column that tells overtone "
        'pulsators; expected columns.mode; name the column, or set overtones = "drop"'
    )


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
