"""What a draft left open, settled in the ladder file: questions, answers, comments, words."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

import ladderfit as lf
from ladderfit.cli import main
from ladderfit.draft.example import write_example
from ladderfit.draft.questions import Question
from ladderfit.draft.settle import Settling, open_keys
from ladderfit.errors import InputError
from ladderfit.ladder_file import read_choices
from ladderfit.shipped import sample_ladder

FIRST = {  # an answer to each question of the example, by its key
    "ratio": "0.386",
    "corrected": "yes",
    "scale": "[O/H]",
    "reference": "0,",
    "modulus": "18.453",
    "redshift": "z:",
    "redshift_heliocentric": "z_hel:",
}


@pytest.fixture
def example(tmp_path: Path) -> Settling:
    tables = write_example(tmp_path / "tables")
    return Settling(tmp_path / "my.toml", tables)


def asked(settling: Settling, key: str) -> Question:
    (found,) = [question for question in settling.questions if question.place[-1] == key]
    return found


def answer(settling: Settling, key: str, begins: str) -> None:
    question = asked(settling, key)
    (option,) = [o for o in (*question.options, *question.others) if o.words.startswith(begins)]
    settling.choose(question, option)


def settle_all(settling: Settling) -> None:
    for key, begins in FIRST.items():
        answer(settling, key, begins)


def file_of(settling: Settling) -> dict[str, Any]:
    return tomllib.loads(settling.file.read_text(encoding="utf-8"))


def told(settling: Settling) -> dict[str, str]:
    """The answer on show of each question; a question mark while it is open."""
    shown = {}
    for question in settling.questions:
        chosen = settling.chosen(question)
        words = settling.stated(question) if chosen is None else chosen.words
        shown[question.place[-1]] = "?" if settling.is_open(question) else words
    return shown


def test_the_example_asks_and_its_answers_are_those_of_the_sample(example: Settling) -> None:
    """Settled as the sample's own ladder file says, the same stars give the same numbers."""
    assert [question.place[-1] for question in example.questions] == list(FIRST)
    assert set(told(example).values()) == {"?"}
    settle_all(example)
    assert example.open == []
    theirs = lf.read_ladder(sample_ladder()).change(
        {
            "cepheids.set_aside": [],
            "cepheids.periods": None,
            "anchors.parallaxes.periods": None,
            "priors": {},
            "alternatives": {},
        }
    )
    mine = lf.draw(example.ladder(), seed=2, draws=2000)
    want = lf.draw(theirs, seed=2, draws=2000)
    shifts = mine.shift_from(want)["in_errors"]
    assert abs(shifts[["slope", "hubble_constant", "peak_magnitude"]]).max() < 0.05
    # the negative control: the other modulus is another ladder
    answer(example, "modulus", "18.41")
    other = lf.draw(example.ladder(), seed=2, draws=2000)
    assert abs(other.shift_from(want)["in_errors"]["zero_point"]) > 0.2


def test_the_state_is_the_file(example: Settling, tmp_path: Path) -> None:
    settle_all(example)
    example.note(asked(example, "ratio"), "as in\nour \x1b[1mearlier # paper")
    before = told(example)
    assert "?" not in before.values()
    alone = Settling(example.file)  # finds all tables but that of moduli, which became numbers
    assert told(alone) == {key: words for key, words in before.items() if key != "modulus"}
    again = Settling(example.file, sorted(tmp_path.glob("tables/*.csv")))
    assert told(again) == before
    note = again.pages.note(asked(again, "ratio").place)
    assert note.startswith("as in our ")
    assert note.endswith("earlier # paper")
    assert "\x1b" not in example.file.read_text()
    again.note(asked(again, "ratio"), "")
    assert again.pages.note(asked(again, "ratio").place) == ""
    assert file_of(again) == file_of(example)


def test_an_edit_by_hand_is_taken_up_and_kept(example: Settling) -> None:
    settle_all(example)
    text = example.file.read_text().replace("ratio = 0.386", "ratio = 0.4  # ours")
    example.file.write_text("# by hand\n" + text)
    answer(example, "corrected", "no")  # reads the file before it writes
    after = example.file.read_text()
    assert after.startswith("# by hand\n")
    assert "ratio = 0.4  # ours" in after
    assert told(example)["ratio"] == "0.4"
    assert told(example)["corrected"] == "no, apply one"


def test_without_a_metallicity_term_and_back(example: Settling) -> None:
    settle_all(example)
    answer(example, "scale", "no metallicity term")
    assert file_of(example)["relation"]["metallicity"] == "none"
    assert not example.is_open(asked(example, "reference"))
    assert example.ladder().choices.relation is not None
    answer(example, "scale", "[Fe/H]")
    assert example.is_open(asked(example, "reference"))
    example.type(asked(example, "reference"), " -0.5 ")
    assert file_of(example)["relation"]["metallicity"] == {"scale": "[Fe/H]", "reference": -0.5}


def test_a_galaxy_left_out_and_back(example: Settling) -> None:
    settle_all(example)
    before = file_of(example)
    answer(example, "modulus", "leave this galaxy out")
    assert list(file_of(example)["anchors"]["geometric"]) == ["Orsell"]
    assert not example.pages.can_note(asked(example, "modulus").place)
    answer(example, "modulus", "18.41 \u00b1 0.06 mag, eclipsing binaries")
    found = file_of(example)["anchors"]["geometric"].pop("Tavin")
    assert found == {"modulus": 18.41, "error": 0.06}
    del before["anchors"]["geometric"]["Tavin"]
    after = file_of(example)
    del after["anchors"]["geometric"]["Tavin"]
    assert after == before


# --- questions of other tables -----------------------------------------------------------


def settling_of(folder: Path, **tables: dict[str, Any]) -> Settling:
    paths = []
    for name, columns in tables.items():
        pd.DataFrame(columns).to_csv(folder / f"{name}.csv", index=False)
        paths.append(folder / f"{name}.csv")
    return Settling(folder / "my.toml", paths)


def stars(n: int = 30, **more: Any) -> dict[str, Any]:
    rng = np.random.default_rng(1)
    return {
        "Name": [f"S{i:02d}" for i in range(n)],
        "Gal": np.repeat(["Tavin", "Orrel", "Q07"], n // 3),
        "logP": rng.uniform(0.5, 1.8, n).round(4),
        "e_J": rng.uniform(0.02, 0.1, n).round(3),
        **more,
    }


def test_one_band_or_an_index(tmp_path: Path) -> None:
    bands = {name: np.linspace(16.0, 26.0, 30) for name in ("J", "K")}
    settling = settling_of(tmp_path, cepheids=stars(**bands, e_K=0.03))
    question = asked(settling, "band")
    assert [option.words for option in question.options] == ["J", "K"]
    with pytest.raises(InputError, match=r"found 'J-K'; expected an index such as H"):
        settling.type(question, "J-K")
    settling.type(question, "K - 0.69 (J - K)")
    light = file_of(settling)["cepheids"]["magnitude"]
    assert light["wesenheit"] == {"band": "K", "colour": ["J", "K"], "ratio": 0.69}
    assert "band" not in light
    assert told(settling)["band"] == "K - 0.69 (J - K)"
    assert settling.ladder().choices.cepheids is not None
    answer(settling, "band", "J")
    light = file_of(settling)["cepheids"]["magnitude"]
    assert light["band"] == "J"
    assert "wesenheit" not in light


def test_the_error_follows_the_column_it_belongs_to(tmp_path: Path) -> None:
    more = {"W": np.linspace(3.0, 9.0, 30), "e_W": 0.02, "plx_err": 0.03}
    two = {"plx_a": np.linspace(0.3, 3.0, 30), "plx_b_mas": np.linspace(0.2, 3, 30)}
    near = {k: v for k, v in stars(**more, **two).items() if k not in ("Gal", "e_J")}
    settling = settling_of(tmp_path, near=near)
    question = asked(settling, "parallax_error")
    assert question.words == "Which column of near.csv holds the errors of the parallaxes?"
    assert [option.words for option in question.options] == ["plx_err: 0.03 throughout"]
    for key, begins in (("parallax", "plx_b_mas"), ("parallax_error", "plx_err")):
        answer(settling, key, begins)
    answer(settling, "corrected", "yes")
    assert settling.open == []
    assert settling.ladder().parallax_stars is not None


def test_names_of_galaxies_once_told_bring_their_own_questions(tmp_path: Path) -> None:
    light = {"W": np.linspace(3.0, 9.0, 30), "e_W": 0.03, "plx": np.linspace(0.3, 3.0, 30)}
    moduli = {"a": ["Tavin", "Orrel", "Orrel"], "b": ["x", "y", "z"], "mu": [18.5, 29.4, 29.5]}
    near = {k: v for k, v in stars(**light, e_plx=0.02).items() if k not in ("e_J", "Gal")}
    settling = settling_of(tmp_path, near=near, moduli={**moduli, "e_mu": 0.03})
    answer(settling, "corrected", "yes")
    answer(settling, "geometric", "a: Tavin, Orrel")
    found = file_of(settling)["anchors"]["geometric"]
    assert found["Tavin"] == {"modulus": 18.5, "error": 0.03}
    assert ("anchors", "geometric", "Orrel", "modulus") in settling.open
    for question in settling.questions:
        if settling.is_open(question):
            settling.type(question, "29.45" if question.place[-1] == "modulus" else "0.05")
    assert settling.open == []
    assert read_choices(settling.file).anchors.geometric["Orrel"].modulus == 29.45


def test_terms_of_the_peaks(tmp_path: Path) -> None:
    n = 40
    flow = {
        "SN": [f"n{i}" for i in range(n)],
        "zcmb": np.linspace(0.02, 0.12, n),
        "mB": np.linspace(14.0, 19.0, n),
        "e_mB": 0.1,
        "x1": np.linspace(-2.0, 2.0, n),
        "e_x1": 0.1,
        "c": np.linspace(-0.1, 0.2, n),
        "e_c": 0.02,
        "logmass": np.linspace(9.0, 11.0, n),
    }
    settling = settling_of(tmp_path, flow=flow)
    answer(settling, "width", "no: fit a term")
    answer(settling, "colour", "yes: no term")
    answer(settling, "host_mass", "no: fit a term, step 10")
    assert file_of(settling)["peak_relation"] == {
        "width": {"reference": 0.0},
        "colour": "none",
        "host_mass": {"step": 10.0},
    }
    assert told(settling)["host_mass"] == "no: fit a term, step 10"
    assert read_choices(settling.file).peak_relation is not None


# --- words -------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("typed", "words"),
    [("abc", "found 'abc'; expected a number such as 0.39"), ("inf", "expected a finite number")],
)
def test_what_is_no_number(example: Settling, typed: str, words: str) -> None:
    before = example.file.read_bytes()
    with pytest.raises(InputError, match=words):
        example.type(asked(example, "ratio"), typed)
    assert example.file.read_bytes() == before


def test_without_its_table_an_anchor_is_asked_from_the_words_of_the_draft(
    example: Settling,
) -> None:
    alone = Settling(example.file)
    found = asked(alone, "modulus")
    assert found.words == "What is the modulus of Tavin?"
    assert [o.words for o in found.options[:-1]] == ["18.453 mag", "18.41 mag"]
    answer(alone, "modulus", "18.41")
    answer(alone, "error", "0.06")
    assert file_of(alone)["anchors"]["geometric"]["Tavin"] == {"modulus": 18.41, "error": 0.06}
    assert told(alone)["modulus"] == "18.41 mag"  # asked on, to be changed


def test_a_file_of_other_tables(example: Settling, tmp_path: Path) -> None:
    others = [path for path in sorted(tmp_path.glob("tables/*.csv")) if path.stem != "flow"]
    with pytest.raises(InputError, match=r"names another table, .*flow\.csv; expected one of"):
        Settling(example.file, others)
    with pytest.raises(InputError, match="neither a file nor tables"):
        Settling(tmp_path / "none.toml")


def test_a_file_that_cannot_be_read_any_more_is_left_alone(example: Settling) -> None:
    example.file.write_text("no = toml = at all")
    with pytest.raises(InputError, match="no ladder file"):
        answer(example, "corrected", "yes")
    assert example.file.read_text() == "no = toml = at all"
    example.file.unlink()
    with pytest.raises(InputError, match="put it back"):
        answer(example, "corrected", "yes")
    assert not example.file.exists()


def test_the_workbench_opens_a_draft_on_its_questions(
    example: Settling, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    started: list[str] = []

    def launch(folder: Path, *, port: int | None, browser: bool, first: str) -> int:
        started.append(first)
        return 0

    monkeypatch.chdir(example.file.parent)
    monkeypatch.setattr("ladderfit.launcher.launch", launch)
    assert main(["workbench", "my.toml"]) == 0
    assert "my.toml is a draft; what is undecided is asked in 05_" in capsys.readouterr().out
    settle_all(example)
    assert open_keys(example.file) == []
    assert main(["workbench", "my.toml"]) == 0
    assert started == ["05_your_own_tables.ipynb", "01_calibrate.ipynb"]
