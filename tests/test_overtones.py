"""Overtone pulsators: dropped, flagged for an offset, or their periods converted."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from builders import choices, tables
from star_tables import built, cepheids, given

from ladderfit.errors import InputError
from ladderfit.ladder import build_ladder
from ladderfit.physics.overtones import (
    PERIOD_RATIOS,
    fundamental_log_period,
    fundamental_stretch,
    within_range,
)
from ladderfit.relations import design

FEAST, ALCOCK = PERIOD_RATIOS["Feast & Catchpole 1997"], PERIOD_RATIOS["Alcock et al. 1995"]


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
