"""Drafts of ladder files: what is told from tables, and what is left to a person."""

from __future__ import annotations

import functools
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import tomlkit
from astropy.table import Table
from hypothesis import given, settings
from hypothesis import strategies as st
from same_data import assert_same_sample

import ladderfit as lf
from ladderfit.cli import main
from ladderfit.draft import draft_ladder, draft_of, write_draft
from ladderfit.draft.facts import stem_of
from ladderfit.draft.magnitudes import label_of
from ladderfit.errors import InputError
from ladderfit.inputs.table_memory import table_in_memory
from ladderfit.ladder import Ladder
from ladderfit.schema import split
from ladderfit.shipped import sample_ladder

SAMPLE = ("cepheids", "parallax_stars", "supernovae", "flow")
OTHER_NAMES = {
    "ID": "star_id",
    "Galaxy": "host",
    "P": "period_d",
    "OH": "12+log(O/H)",
    "Mode": "pulsation",
    "Vmag": "V",
    "Imag": "I",
    "Hmag": "F160W",
    "e_V": "V_err",
    "e_I": "I_err",
    "e_H": "F160W_err",
    "plx": "parallax",
    "e_plx": "parallax_error",
    "SN": "name",
    "mB": "peak",
    "e_mB": "sigma_peak",
    "zcmb": "z_CMB",
    "zhel": "z_helio",
}


def renamed(folder: Path, names: dict[str, str] | None) -> dict[str, dict[str, str]]:
    """The sample's tables with columns shuffled and renamed; what became of each name."""
    rng, became = np.random.default_rng(8), {}
    for table in SAMPLE:
        found = Table.read(sample_ladder().parent / f"{table}.ecsv")
        found = found[list(rng.permutation(found.colnames))]
        new = {
            name: f"{table[:3]}{place}" if names is None else names.get(name, name)
            for place, name in enumerate(found.colnames)
        }
        found.rename_columns(list(new), list(new.values()))
        found.write(folder / f"{table}.ecsv")
        became[table] = new
    return became


def decide(path: Path, decisions: dict[str, Any]) -> None:
    """Put values in the place of what a draft left open; None takes a key out."""
    document: Any = tomlkit.parse(path.read_text())
    for key, value in decisions.items():
        *parts, last = split(key)
        section = document
        for part in parts:
            section = section[part]
        if value is None:
            del section[last]
        else:
            section[last] = value
    path.write_text(tomlkit.dumps(document))


def open_keys(path: Path) -> list[str]:
    with pytest.raises(InputError) as caught:
        lf.read_ladder(path)
    assert all(problem.found.startswith('"undecided:') for problem in caught.value.problems)
    return [str(problem.key) for problem in caught.value.problems]


def as_sample(ladder: Ladder) -> Ladder:
    """With the choices of the sample that no table can tell."""
    sample = lf.read_ladder(sample_ladder()).choices
    keys = ("cepheids.periods", "cepheids.set_aside", "anchors.parallaxes.periods", "priors")
    changes = {key: sample.value(key) for key in (*keys, "anchors.geometric")}
    return ladder.change(changes)


def assert_calibrates_to_the_same(ladder: Ladder) -> None:
    sample = lf.read_ladder(sample_ladder())
    ladder = as_sample(ladder)
    for part in ("cepheids", "parallax_stars", "peaks", "flow"):
        assert_same_sample(getattr(ladder, part), getattr(sample, part))
    pd.testing.assert_frame_equal(lf.draw(ladder, seed=3).summary(), of_the_sample())


@functools.cache
def of_the_sample() -> pd.DataFrame:
    return lf.draw(lf.read_ladder(sample_ladder()), seed=3).summary()


@pytest.mark.parametrize("names", [{}, OTHER_NAMES], ids=["own names", "other names"])
def test_the_sample_calibrates_to_the_same_numbers(tmp_path: Path, names: dict[str, str]) -> None:
    renamed(tmp_path, names)
    path = tmp_path / "ladders" / "draft.toml"
    made = write_draft([tmp_path / f"{table}.ecsv" for table in SAMPLE], path)
    keys = ["cepheids.magnitude.wesenheit.ratio", "anchors.parallaxes.corrected"]
    assert [entry.dotted for entry in made.undecided] == open_keys(path) == keys
    decide(path, dict(zip(keys, [0.386, True], strict=True)))
    assert_calibrates_to_the_same(lf.read_ladder(path))


def test_the_sample_without_telling_names(tmp_path: Path) -> None:
    """Units and values tell most; bands, their errors and redshifts remain to be said."""
    became = renamed(tmp_path, None)
    path = tmp_path / "draft.toml"
    write_draft([tmp_path / f"{table}.ecsv" for table in reversed(SAMPLE)], path)
    decisions: dict[str, Any] = {}
    for section, table in (("cepheids", "cepheids"), ("anchors.parallaxes", "parallax_stars")):
        new, light = became[table], f"{section}.magnitude"
        decisions[f"{light}.band"] = None
        for band in "VIH":
            decisions[f"{light}.errors.{new[f'{band}mag']}"] = new[f"e_{band}"]
    stars, flow = became["parallax_stars"], became["flow"]
    decisions["anchors.parallaxes.corrected"] = True
    decisions["anchors.parallaxes.columns.parallax"] = stars["plx"]
    decisions["anchors.parallaxes.columns.parallax_error"] = stars["e_plx"]
    decisions["expansion.columns.redshift"] = flow["zcmb"]
    decisions["expansion.columns.redshift_heliocentric"] = flow["zhel"]
    assert sorted(open_keys(path)) == sorted(decisions)
    decide(path, decisions)
    document: Any = tomlkit.parse(path.read_text())
    for section, table in (
        (document["cepheids"], "cepheids"),
        (document["anchors"]["parallaxes"], "parallax_stars"),
    ):
        new, light = became[table], section["magnitude"]
        light["bands"] = {band: new[f"{band}mag"] for band in "HVI"}
        light["errors"] = {band: new[f"e_{band}"] for band in "HVI"}
        light["wesenheit"] = {"band": "H", "colour": ["V", "I"], "ratio": 0.386}
    path.write_text(tomlkit.dumps(document))
    assert_calibrates_to_the_same(lf.read_ladder(path))


# --- single tables -----------------------------------------------------------------------


def told(tmp_path: Path, **tables: dict[str, Any]) -> dict[str, Any]:
    """The draft of CSV tables, as a nested mapping."""
    paths = []
    for name, columns in tables.items():
        pd.DataFrame(columns).to_csv(tmp_path / f"{name}.csv", index=False)
        paths.append(tmp_path / f"{name}.csv")
    return tomllib.loads(draft_ladder(paths, tmp_path).text)


def stars(n: int = 30, **more: Any) -> dict[str, Any]:
    rng = np.random.default_rng(1)
    return {
        "Name": [f"S{i:02d}" for i in range(n)],
        "Gal": np.repeat(["Tavin", "Orrel", "Q07"], n // 3),
        "logP": rng.uniform(0.5, 1.8, n).round(4),
        "W": rng.uniform(12.0, 25.0, n).round(3),
        "e_W": rng.uniform(0.02, 0.1, n).round(3),
        **more,
    }


def test_a_finished_index_and_logarithmic_periods(tmp_path: Path) -> None:
    found = told(tmp_path, cepheids=stars(P=np.linspace(3.0, 60.0, 30), W_VI=20.0))
    columns = found["cepheids"]["columns"]
    assert {columns.get("period"), columns.get("log_period")} == {"P", None}
    assert found["cepheids"]["magnitude"]["band"] == "undecided: W or W_VI?"
    assert found["relation"] == {"pivot": 10.0, "metallicity": "none"}
    found = told(tmp_path, cepheids=stars())["cepheids"]
    assert found["columns"] == {"star": "Name", "host": "Gal", "log_period": "logP"}
    assert found["magnitude"] == {"band": "W", "bands": {"W": "W"}, "errors": {"W": "e_W"}}


def test_errors_of_the_inputs_and_systems(tmp_path: Path) -> None:
    rng = np.random.default_rng(2)
    more = {
        "FeH": rng.normal(0.0, 0.2, 30).round(3),
        "e_FeH": 0.06,
        "e_logP": 0.001,
        "Camera": ["WF", "NIC"] * 15,
    }
    found = told(tmp_path, cepheids=stars(**more))
    columns = found["cepheids"]["columns"]
    assert columns["metallicity_error"] == "e_FeH"
    assert columns["period_error"] == "e_logP"
    assert columns["system"] == "Camera"
    assert found["relation"]["metallicity"] == {"scale": "[Fe/H]", "reference": 0.0}


def test_two_scales_of_metallicity_are_left_open(tmp_path: Path) -> None:
    first = stars(OH=np.linspace(8.2, 8.9, 30))
    second = stars(12, FeH=np.linspace(-0.3, 0.3, 12), plx=np.linspace(0.2, 3.0, 12), e_plx=0.02)
    found = told(tmp_path, cepheids=first, near=second)["relation"]["metallicity"]
    assert found["scale"] == (
        "undecided: 12+log(O/H) in one table, [Fe/H] in the other: bring them to one scale"
    )


def test_a_colour_and_the_error_of_the_whole(tmp_path: Path) -> None:
    columns = {key: value for key, value in stars().items() if key not in ("W", "e_W")}
    columns |= {"F160W": np.linspace(16.0, 26.0, 30), "V_minus_I": 0.9, "e_tot": 0.3}
    light = told(tmp_path, cepheids=columns)["cepheids"]["magnitude"]
    assert light["wesenheit"]["colour"] == "V-I"
    assert light["bands"] == {"F160W": "F160W", "V-I": "V_minus_I"}
    assert light["errors"] == {"total": "e_tot"}


def test_two_parallaxes_are_left_open(tmp_path: Path) -> None:
    near = stars(
        12, plx_photometric_mas=np.linspace(0.3, 3.0, 12), plx_EDR3_mas=np.linspace(0.2, 3, 12)
    )
    columns = told(tmp_path, near=near)["anchors"]["parallaxes"]["columns"]
    assert columns["parallax"] == "undecided: plx_photometric_mas or plx_EDR3_mas?"
    assert columns["parallax_error"] == "undecided: the error of what parallax is"


def test_anchors_of_a_table(tmp_path: Path) -> None:
    moduli = {
        "Galaxy": ["Tavin", "Void", "Orrel", "Orrel", "Q07"],
        "mu": [18.49, 30.0, 29.4, 29.41, np.nan],
        "e_mu": [0.02, 0.1, 0.03, 0.03, 0.05],
    }
    found = told(tmp_path, cepheids=stars(), moduli=moduli)["anchors"]["geometric"]
    assert found == {
        "Tavin": {"modulus": 18.49, "error": 0.02},
        "Void": {"modulus": 30.0, "error": 0.1, "use": False},
        "Orrel": {
            "modulus": "undecided: 29.4 (mu) or 29.41 (mu)?",
            "error": "undecided: 0.03 (e_mu) or 0.03 (e_mu)?",
        },
        "Q07": {"modulus": "undecided: the modulus is missing in the table", "error": 0.05},
    }


def test_a_linear_law(tmp_path: Path) -> None:
    nebulae = {"object": ["A", "B", "C"], "r_Mpc": [0.3, 0.9, 2.0], "v_kms": [-70.0, 300.0, 1000.0]}
    assert told(tmp_path, nebulae=nebulae)["expansion"]["columns"] == {
        "name": "object",
        "distance": "r_Mpc",
        "velocity": "v_kms",
    }


def test_a_heliocentric_redshift_alone_is_left_open(tmp_path: Path) -> None:
    flow = {"SN": ["a", "b", "c"], "zhel": [0.03, 0.05, 0.1], "mB": [15.0, 16.0, 18.0], "e_mB": 0.1}
    columns = told(tmp_path, flow=flow)["expansion"]["columns"]
    assert columns["redshift"] == (
        "undecided: zhel, although its name says that the Sun is at rest?"
    )
    assert "redshift_heliocentric" not in columns


@pytest.mark.parametrize("suffix", ["fits", "vot", "parquet"])
def test_other_formats_give_the_same_columns(tmp_path: Path, suffix: str) -> None:
    table = Table.read(sample_ladder().parent / "cepheids.ecsv")
    table["OH"].unit = None  # FITS and VOTable know no dex
    empty = [np.ma.getmaskarray(table[name]) for name in table.colnames]
    table = table[~np.logical_or.reduce(empty)]
    table.write(tmp_path / "t.ecsv")
    # astropy 8.0.2 may crash when it writes VOTable as text
    binary = {"format": "votable", "tabledata_format": "binary"} if suffix == "vot" else {}
    table.write(tmp_path / f"t.{suffix}", **binary)
    mine, theirs = (
        draft_ladder([tmp_path / f"t.{each}"], tmp_path).text for each in (suffix, "ecsv")
    )
    assert mine == theirs.replace("t.ecsv", f"t.{suffix}")


@pytest.mark.parametrize(
    ("name", "stem", "error"),
    [
        ("e_Vmag", "vmag", True),
        ("errV", "v", True),
        ("V_err", "v", True),
        ("sigma(V)", "v", True),
        ("parallax_mas", "parallax", False),
        ("e_plx_EDR3_mas", "plxedr3", True),
        ("period_d", "period", False),
        ("Edge", "edge", False),
        ("error", "error", True),
    ],
)
def test_stems(name: str, stem: str, error: bool) -> None:
    assert stem_of(name) == (stem, error)


@pytest.mark.parametrize(
    ("name", "label"),
    [("Vmag", "V"), ("V_mag", "V"), ("phot_g_mean_mag", "g"), ("mWH", "mWH"), ("m36", "m36"),
     ("V_minus_I", "V-I"), ("mag_H", "H"), ("F160Wmag", "F160W")],
)  # fmt: skip
def test_labels_of_bands(name: str, label: str) -> None:
    assert label_of(name) == label


@settings(max_examples=60)
@given(
    names=st.lists(st.text(min_size=1, max_size=8), min_size=5, max_size=5, unique=True),
    cell=st.text(min_size=1, max_size=8),
)
def test_whatever_stands_in_a_table_the_draft_is_toml(names: list[str], cell: str) -> None:
    columns = dict(zip(names, list(stars(6).values()), strict=True))
    table = table_in_memory({**columns, "logP": columns[names[2]], "Host": [cell, "b"] * 3}, "x")
    made = draft_of({Path(f"{cell.replace('/', '_')}.csv"): table}, Path())
    assert tomllib.loads(made.text)["cepheids"]["columns"]
    assert "\x1b" not in made.summary()


# --- words -------------------------------------------------------------------------------


def test_nothing_is_overwritten(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "my.toml"
    path.write_text("mine")
    table = sample_ladder().parent / "flow.ecsv"
    assert main(["draft", str(table), "--out", str(path)]) == 2
    assert path.read_text() == "mine"
    assert capsys.readouterr().err == (
        f"ladderfit: {path}: found a file or folder of that name; expected a name that is free, "
        "as nothing is overwritten; choose another name, or move the old one away\n"
    )


def test_every_bad_table_is_told_at_once(tmp_path: Path) -> None:
    for name in ("a", "b"):
        pd.DataFrame(stars()).to_csv(tmp_path / f"{name}.csv", index=False)
    pd.DataFrame({"x": [1.0, 2.0], "y": ["u", "v"]}).to_csv(tmp_path / "c.csv", index=False)
    a, b, c, d = (tmp_path / f"{name}.csv" for name in "abcd")
    with pytest.raises(InputError) as caught:
        write_draft([a, d, a], tmp_path / "out.toml")
    assert str(caught.value).splitlines() == [
        f"{d}: found no such file; expected a table; correct the path",
        f"{a}: found the same table twice; expected each once; name it once",
    ]
    with pytest.raises(InputError) as caught:
        write_draft([a, b, c], tmp_path / "out.toml")
    assert str(caught.value).splitlines() == [
        f"{b}: found a second table of Cepheids in galaxies, after {a}; expected one of each "
        "kind; put the rows of both into one table, or leave one out",
        f"{c}: found no periods, redshifts, distance moduli or peak magnitudes among 'x', 'y'; "
        "expected a table of Cepheids in galaxies, of Cepheids with parallaxes, of supernovae in "
        "galaxies, of objects that follow the expansion, of geometric distance moduli of "
        "galaxies; name its columns after what they hold, or leave the table out",
    ]
    assert not (tmp_path / "out.toml").exists()


def test_the_command_says_what_it_guessed(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    table, path = sample_ladder().parent / "parallax_stars.ecsv", tmp_path / "my.toml"
    assert main(["draft", str(table), "--out", str(path)]) == 0
    said = capsys.readouterr().out.splitlines()
    assert said[0] == f"{table}: Cepheids with parallaxes, as it has periods and parallaxes"
    assert (
        "  parallax        plx              named like a parallax, in mas, 0.2276 to 2.315" in said
    )
    assert said[-5] == "Undecided:"
    assert said[-1] == (
        f"Written to {path}; decide what is undecided in it, then: ladderfit calibrate {path}"
    )
    assert main(["calibrate", str(path)]) == 2
    errors = capsys.readouterr().err.splitlines()
    assert errors[0] == (
        f"ladderfit: {path}, key anchors.parallaxes.corrected: found "
        '"undecided: true if a zero-point recipe is applied already, false to apply one?"; '
        "expected a decision; write what is meant in place of the whole text"
    )
    assert len(errors) == 2


def test_tables_are_needed(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as caught:
        main(["draft", "--out", "x.toml"])
    assert caught.value.code == 2
    assert "the following arguments are required: TABLE" in capsys.readouterr().err
