"""The ladder: which rows take part, what a change keeps, how two ladders differ."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from astropy.table import QTable, Table
from builders import HOSTS, choices, tables, write_tables
from hypothesis import given
from hypothesis import strategies as st

from ladderfit.choices import Choices
from ladderfit.errors import InputError
from ladderfit.ladder import AnchorInUse, Ladder, build_ladder, read_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.samples import Kept


def small(**changes: Any) -> Ladder:
    return build_ladder(choices(), {**tables(), **changes})


def on_disk(folder: Path) -> Path:
    write_tables(folder)
    write_choices(Choices.from_mapping(choices(tables=True)), folder / "small.toml")
    return folder / "small.toml"


def test_samples_of_the_small_ladder() -> None:
    ladder, given_tables = small(), tables()
    assert ladder.hosts == HOSTS
    assert ladder.path is None
    assert ladder.geometric == (AnchorInUse(0, "Tavin", 18.49, 0.025),)
    assert ladder.notes == ()
    cepheids, frame = ladder.cepheids, given_tables["cepheids"]
    assert cepheids is not None
    assert list(cepheids.star) == list(frame["ID"])
    np.testing.assert_array_equal(cepheids.host, np.repeat([0, 1, 2], 12))
    np.testing.assert_allclose(cepheids.log_period, np.log10(frame["P"]), rtol=1e-15)
    index = frame["Hmag"] - 0.386 * (frame["Vmag"] - frame["Imag"])
    np.testing.assert_allclose(cepheids.magnitude, index, rtol=1e-14)
    np.testing.assert_allclose(cepheids.variance, 0.05**2 + 2 * (0.386 * 0.02) ** 2, rtol=1e-13)
    np.testing.assert_array_equal(cepheids.metallicity, frame["OH"])
    stars = ladder.parallax_stars
    assert stars is not None
    assert stars.parallax is not None
    np.testing.assert_array_equal(stars.parallax, given_tables["anchors.parallaxes"]["plx"])
    assert set(stars.host) == {-1}
    peaks, flow = ladder.peaks, ladder.flow
    assert peaks is not None
    assert flow is not None
    assert list(peaks.host) == [1, 2, 2]
    np.testing.assert_allclose(peaks.variance, [0.01, 0.01, 0.0144])
    np.testing.assert_array_equal(flow.redshift_heliocentric, flow.redshift)
    assert len(flow) == 20
    with pytest.raises(ValueError, match="read-only"):
        cepheids.magnitude[0] = 0.0


def test_cepheids_are_sorted_by_host_of_first_appearance() -> None:
    frame = tables()["cepheids"]
    mixed = frame.sample(frac=1.0, random_state=3).reset_index(drop=True)
    ladder = small(cepheids=mixed)
    assert ladder.hosts == tuple(dict.fromkeys(mixed["Galaxy"]))
    assert ladder.cepheids is not None
    assert np.all(np.diff(ladder.cepheids.host) >= 0)
    for host, name in enumerate(ladder.hosts):
        here = ladder.cepheids.host == host
        expected = mixed[mixed["Galaxy"] == name]
        assert list(ladder.cepheids.star[here]) == list(expected["ID"])
        assert list(ladder.cepheids.row[here]) == list(expected.index + 1)


@pytest.mark.parametrize("kind", [Table.from_pandas, QTable.from_pandas, lambda t: dict(t.items())])
def test_every_kind_of_table_builds_the_same(kind: Any) -> None:
    ladder = build_ladder(choices(), {key: kind(table) for key, table in tables().items()})
    reference = small()
    for section in ("cepheids", "parallax_stars", "peaks", "flow"):
        mine, theirs = getattr(ladder, section), getattr(reference, section)
        np.testing.assert_array_equal(mine.magnitude, theirs.magnitude)
        np.testing.assert_array_equal(mine.variance, theirs.variance)


def test_from_disk_as_from_memory(tmp_path: Path) -> None:
    read, built = read_ladder(on_disk(tmp_path)), small()
    assert read.path == tmp_path / "small.toml"
    assert read.kept == built.kept
    assert read.cepheids is not None
    assert built.cepheids is not None
    np.testing.assert_array_equal(read.cepheids.magnitude, built.cepheids.magnitude)
    source = read.sources["supernovae"]
    assert (source.path, source.rows) == ("supernovae.csv", 3)
    assert set(read.sources) == set(read.kept)


def test_base_folder_of_other_tables(tmp_path: Path) -> None:
    write_tables(tmp_path)
    ladder = build_ladder(choices(tables=True), base=tmp_path)
    assert ladder.hosts == HOSTS


def test_one_band_and_log_period_and_total_error() -> None:
    frame = tables()["cepheids"].assign(logP=lambda t: np.log10(t["P"]), tot=0.3)
    plain = choices()
    del plain["anchors"]["parallaxes"]
    plain["cepheids"]["columns"] = {"star": "ID", "host": "Galaxy", "log_period": "logP"}
    plain["cepheids"]["magnitude"] = {
        "band": "H",
        "bands": {"H": "Hmag"},
        "errors": {"total": "tot"},
    }
    plain["relation"] = {}
    for section in ("supernovae", "expansion"):
        del plain[section]
    plain["anchors"]["geometric"] = {}
    sample = build_ladder(plain, {"cepheids": frame}).cepheids
    assert sample is not None
    np.testing.assert_array_equal(sample.magnitude, frame["Hmag"])
    np.testing.assert_allclose(sample.variance, 0.09)
    np.testing.assert_array_equal(sample.log_period, frame["logP"])
    assert np.isnan(sample.metallicity).all()


def test_stars_without_names_go_by_their_rows() -> None:
    frame = tables()["cepheids"].drop(columns="ID")
    plain = choices()
    del plain["cepheids"]["columns"]["star"]
    plain["cepheids"]["set_aside"] = [{"star": "row 30", "reason": "blended"}]
    ladder = build_ladder(plain, {**tables(), "cepheids": frame})
    assert ladder.kept["cepheids"].reasons == {"set aside by hand": 1}
    assert ladder.cepheids is not None
    assert ladder.cepheids.star[0] == "row 1"
    assert "row 30" not in ladder.cepheids.star


def test_linear_law() -> None:
    plain = {"expansion": {"columns": {"name": "n", "distance": "r", "velocity": "v"}}}
    table = {"n": ["a", "b"], "r": [0.5, 2.0], "v": [-10.0, 1000.0]}
    ladder = build_ladder(plain, {"expansion": table})
    assert ladder.velocities is not None
    assert list(ladder.velocities.velocity) == [-10.0, 1000.0]
    assert ladder.flow is None
    assert ladder.hosts == ()


RUNGS: dict[str, tuple[tuple[str, ...], tuple[str, ...]]] = {
    "relation": (("supernovae", "expansion"), ("cepheids", "anchors.parallaxes")),
    "peaks": (("expansion",), ("cepheids", "anchors.parallaxes", "supernovae")),
    "expansion only": (("cepheids", "anchors", "supernovae", "relation"), ("expansion",)),
}


@pytest.mark.parametrize(("dropped", "left"), RUNGS.values(), ids=RUNGS)
def test_rungs_are_optional(dropped: tuple[str, ...], left: tuple[str, ...]) -> None:
    plain = {key: value for key, value in choices().items() if key not in dropped}
    ladder = build_ladder(plain, {key: tables()[key] for key in left})
    assert tuple(ladder.kept) == left


def test_reasons_in_order_each_row_once() -> None:
    frame = tables()["cepheids"].astype({"Mode": object})
    frame.loc[0, "Mode"] = "1O"  # set aside by hand first
    frame.loc[1, "OH"] = np.nan
    frame.loc[2, ["Vmag", "P"]] = np.nan  # the first missing role counts
    frame.loc[3, ["Mode", "P"]] = ["First  overtone", 2.0]
    frame.loc[4, "Mode"] = None
    frame.loc[5, "P"] = 2.0
    frame.loc[6, "e_I"] = np.nan
    frame.loc[7, "Galaxy"] = ""
    plain = choices()
    plain["cepheids"]["set_aside"] = [{"star": frame["ID"][0], "reason": "blended"}]
    ladder = build_ladder(plain, {**tables(), "cepheids": frame})
    kept = ladder.kept["cepheids"]
    assert kept.total == 36
    assert kept.kept == 28
    assert list(kept.reasons.items()) == [
        ("set aside by hand", 1),
        ("missing host", 1),
        ("missing period", 1),
        ("missing error of I", 1),
        ("missing metallicity", 1),
        ("missing mode", 1),
        ("overtone", 1),
        ("outside the period range", 1),
    ]
    assert str(kept).startswith("28 of 36 kept (1 set aside by hand; ")


def test_a_row_set_aside_is_not_judged() -> None:
    frame = tables()["cepheids"]
    frame.loc[3, ["P", "e_H"]] = [-1.0, 0.0]
    plain = choices()
    plain["cepheids"]["set_aside"] = [
        {"star": frame["ID"][3], "host": "Tavin", "reason": "nonsense in the table"}
    ]
    assert build_ladder(plain, {**tables(), "cepheids": frame}).kept["cepheids"].kept == 35


def test_metallicity_is_needed_only_by_its_term() -> None:
    frame = tables()["cepheids"]
    frame.loc[0, "OH"] = np.nan
    ladder = small(cepheids=frame)
    assert ladder.kept["cepheids"].kept == 35
    assert ladder.change({"relation.metallicity": "none"}).kept["cepheids"].kept == 36


@pytest.mark.parametrize("label", ["F", "fu", "Fundamental", 0, 0.0])
def test_fundamental_labels(label: Any) -> None:
    frame = tables()["cepheids"].assign(Mode=label)
    assert small(cepheids=frame).kept["cepheids"].kept == 36


@pytest.mark.parametrize("label", ["1O", "fo", "O", "Overtone", "first overtone", 1, 1.0])
def test_overtone_labels(label: Any) -> None:
    frame = tables()["cepheids"].astype({"Mode": object})
    frame["Mode"] = [0 if not isinstance(label, str) else "F"] * 35 + [label]
    assert small(cepheids=frame).kept["cepheids"].reasons == {"overtone": 1}


def test_ranges_are_inclusive() -> None:
    frame = tables()["cepheids"]
    frame.loc[[0, 1, 2, 3], "P"] = [5.0, 100.0, np.nextafter(5.0, 0.0), np.nextafter(100.0, 200.0)]
    flow = tables()["expansion"]
    flow.loc[[0, 1, 2, 3], "zcmb"] = [0.023, 0.15, 0.0229, 0.1501]
    ladder = small(cepheids=frame, expansion=flow)
    assert ladder.kept["cepheids"].reasons == {"outside the period range": 2}
    assert ladder.kept["expansion"].reasons == {"outside the redshift range": 2}


def test_heliocentric_redshift_where_given() -> None:
    flow = tables()["expansion"].assign(zhel=lambda t: t["zcmb"] + 0.001)
    plain = choices()
    plain["expansion"]["columns"]["redshift_heliocentric"] = "zhel"
    sample = build_ladder(plain, {**tables(), "expansion": flow}).flow
    assert sample is not None
    np.testing.assert_allclose(sample.redshift_heliocentric - sample.redshift, 0.001)


def test_a_host_that_loses_its_cepheids() -> None:
    frame = tables()["cepheids"]
    frame.loc[frame["Galaxy"] == "Q07", "P"] = 7.0
    ladder = small(cepheids=frame).change({"cepheids.periods": [7.5, 100.0]})
    assert ladder.hosts == ("Tavin", "Orrel")
    assert ladder.notes == ("Q07: no Cepheid left after the cuts; its 2 supernovae are set aside",)
    assert ladder.kept["supernovae"].reasons == {"in a host without Cepheid or anchor in use": 2}


def test_an_anchor_that_loses_its_cepheids() -> None:
    frame = tables()["cepheids"]
    frame.loc[frame["Galaxy"] == "Tavin", "P"] = 7.0
    ladder = small(cepheids=frame).change({"cepheids.periods": [7.5, 100.0]})
    assert ladder.geometric == ()
    assert ladder.notes == (
        "Tavin: no Cepheid left after the cuts",
        "Tavin: nothing is left of it after the cuts; its anchor is left out",
    )


def test_an_anchor_with_a_supernova_and_no_cepheid() -> None:
    supernovae = tables()["supernovae"]
    supernovae.loc[0, "Galaxy"] = "Zuvi"
    plain = choices()
    plain["anchors"]["geometric"]["Zuvi"] = {"modulus": 29.0, "error": 0.1}
    given_tables = {**tables(), "supernovae": supernovae}
    ladder = build_ladder(plain, given_tables)
    assert ladder.hosts == (*HOSTS, "Zuvi")
    assert ladder.peaks is not None
    assert list(ladder.peaks.host) == [3, 2, 2]
    assert AnchorInUse(3, "Zuvi", 29.0, 0.1) in ladder.geometric
    off = ladder.change({"anchors.geometric.Zuvi.use": False})
    assert off.hosts == HOSTS
    assert off.notes == ("Zuvi: no Cepheid and no anchor in use; its supernova is set aside",)


def test_anchors_on_and_off() -> None:
    ladder = small()
    both = ladder.change({"anchors.geometric.Orrel.use": True})
    assert [anchor.name for anchor in both.geometric] == ["Tavin", "Orrel"]
    assert both.cepheids is ladder.cepheids
    without = both.change({"anchors.parallaxes.use": False})
    assert without.parallax_stars is None
    assert "anchors.parallaxes" not in without.kept
    again = without.change({"anchors.parallaxes.use": True})
    assert again.parallax_stars is ladder.parallax_stars


@pytest.mark.parametrize(
    ("wanted", "touched"),
    [
        ({"cepheids.periods": [10.0, 100.0]}, {"cepheids"}),
        ({"anchors.parallaxes.periods": [6.5, 100.0]}, {"parallax_stars"}),
        ({"supernovae.set_aside": [{"name": "2091b", "reason": "odd"}]}, {"peaks"}),
        ({"expansion.redshifts": [0.03, 0.15]}, {"flow"}),
        ({"expansion.q0": -0.6, "expansion.peculiar_velocity": 300.0}, set()),
        ({"relation.pivot": 6.0, "title": "x", "priors.slope": {"fixed": -3.3}}, set()),
        ({"relation.metallicity.reference": 8.5}, set()),
        ({"relation.metallicity": "none"}, {"cepheids", "parallax_stars"}),
        ({"anchors.parallaxes.distance_prior": "uniform in volume"}, set()),
    ],
)
def test_untouched_samples_are_the_same_objects(wanted: dict[str, Any], touched: set[str]) -> None:
    ladder = small()
    changed = ladder.change(wanted)
    parts = ("cepheids", "parallax_stars", "peaks", "flow")
    assert {p for p in parts if getattr(changed, p) is not getattr(ladder, p)} == touched


def test_no_table_is_read_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    ladder = read_ladder(on_disk(tmp_path))
    table = tmp_path / "cepheids.csv"
    table.rename(tmp_path / "moved.csv")
    changed = ladder.change({"cepheids.periods": [10.0, 100.0]})
    assert changed.kept["cepheids"].kept < 36
    moved = ladder.change({"cepheids.table": "moved.csv"})
    assert moved.kept["cepheids"] == Kept(36, 36)
    with pytest.raises(InputError, match="no such file"):
        ladder.change({"cepheids.table": "absent.csv"})


def test_differences_read_well() -> None:
    ladder = small()
    cut = ladder.change({"cepheids.periods": [10, 100], "anchors.geometric.Tavin.use": False})
    assert cut.difference(ladder).splitlines() == [
        "cepheids.periods: [5, 100] -> [10, 100]",
        "anchors.geometric.Tavin.use: true -> false",
    ]
    assert ladder.difference(cut).splitlines()[0] == "cepheids.periods: [10, 100] -> [5, 100]"
    assert ladder.difference(small()) == ""
    other = tables()["supernovae"]
    other.loc[0, "mB"] += 0.1
    (line,) = small(supernovae=other).difference(ladder).splitlines()
    assert line.startswith("supernovae.table: the contents differ (SHA-256 ")


@given(
    low=st.floats(5.0, 20.0),
    high=st.floats(25.0, 100.0),
    tavin=st.booleans(),
    orrel=st.booleans(),
    stars=st.booleans(),
)
def test_change_and_back_is_the_same(
    low: float, high: float, tavin: bool, orrel: bool, stars: bool
) -> None:
    ladder = LADDER
    wanted = {
        "cepheids.periods": [low, high],
        "anchors.geometric.Tavin.use": tavin,
        "anchors.geometric.Orrel.use": orrel,
        "anchors.parallaxes.use": stars,
    }
    changed = ladder.change(wanted)
    back = changed.change({key: ladder.choices.value(key) for key in wanted})
    assert back.choices == ladder.choices
    assert back.difference(ladder) == ""
    assert (back.hosts, back.kept, back.geometric) == (ladder.hosts, ladder.kept, ladder.geometric)
    assert back.cepheids is not None
    assert ladder.cepheids is not None
    np.testing.assert_array_equal(back.cepheids.row, ladder.cepheids.row)
    assert changed.cepheids is not None
    period = 10.0**changed.cepheids.log_period
    assert np.all((period > low * (1 - 1e-12)) & (period < high * (1 + 1e-12)))


LADDER = small()


@given(st.permutations(range(36)))
def test_order_of_rows_does_not_matter(order: list[int]) -> None:
    shuffled = tables()["cepheids"].iloc[order].reset_index(drop=True)
    ladder = small(cepheids=shuffled).change({"cepheids.periods": [10.0, 60.0]})
    expected = LADDER.change({"cepheids.periods": [10.0, 60.0]})
    assert set(ladder.hosts) == set(expected.hosts)
    assert ladder.cepheids is not None
    assert expected.cepheids is not None

    def by_star(other: Ladder) -> dict[str, tuple[str, float]]:
        sample = other.cepheids
        assert sample is not None
        hosts = [other.hosts[host] for host in sample.host]
        return dict(zip(sample.star, zip(hosts, sample.magnitude, strict=True), strict=True))

    assert by_star(ladder) == by_star(expected)


def test_a_ladder_shows_itself_in_one_line() -> None:
    shown = repr(build_ladder(choices(), tables()))
    assert shown.startswith("<Ladder ")
    assert "hosts" in shown
    assert len(shown) < 200
