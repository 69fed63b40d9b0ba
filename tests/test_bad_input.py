"""The words of every complaint about choices, cuts and tables in memory."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pandas as pd
import pytest
from builders import choices, tables
from workshop import Workshop

from ladderfit.errors import InputError, Problem, nearest
from ladderfit.ladder import build_ladder, read_ladder
from ladderfit.ladder_file import write_choices

Edit = Callable[[dict[str, pd.DataFrame]], None]


@pytest.fixture
def workshop(tmp_path: Path) -> Workshop:
    return Workshop(tmp_path)


def test_unknown_key(workshop: Workshop) -> None:
    path = workshop.write()
    path.write_text(path.read_text().replace("pivot = ", "pivott = "))
    with pytest.raises(InputError) as caught:
        read_ladder(path)
    words = str(caught.value)
    assert words.startswith(
        f"{path}, key relation.pivott: found an unknown key; expected one of pivot, metallicity"
    )
    assert words.endswith("; did you mean 'pivot'?")


def test_unknown_section(workshop: Workshop) -> None:
    path = workshop.write()
    path.write_text(path.read_text() + "\n[supernova]\ntable = 'x.csv'\n")
    with pytest.raises(InputError) as caught:
        read_ladder(path)
    (problem,) = caught.value.problems
    assert (problem.key, problem.remedy) == ("supernova", "did you mean 'supernovae'?")


CONTRADICTIONS: dict[str, tuple[Callable[[dict[str, Any]], Any], str]] = {
    "band and index": (
        lambda c: c["cepheids"]["magnitude"].update(band="H"),
        "key cepheids.magnitude: found both band and wesenheit; expected one of them; remove one",
    ),
    "neither band nor index": (
        lambda c: c["cepheids"]["magnitude"].pop("wesenheit"),
        "key cepheids.magnitude: found neither band nor wesenheit; expected one of them; "
        'add band = "H" or wesenheit = {...}',
    ),
    "table and intercept": (
        lambda c: c["expansion"].update(intercept={"value": 0.7, "error": 0.01}),
        "key expansion.table: found both a table and an intercept; expected one of them; "
        "remove one of the two",
    ),
    "period and its logarithm": (
        lambda c: c["cepheids"]["columns"].update(log_period="logP"),
        "key cepheids.columns: found both period and log_period; expected one of period (d) and "
        "log_period (log10 of the period in d); name exactly one of the two columns",
    ),
    "term without its column": (
        lambda c: c["cepheids"]["columns"].pop("metallicity"),
        "key cepheids: found no metallicity column, yet the relation has a metallicity term; "
        'expected columns.metallicity; name the column, or set relation.metallicity = "none"',
    ),
    "two ratios for one zero point": (
        lambda c: c["anchors"]["parallaxes"].update(
            magnitude={
                **c["cepheids"]["magnitude"],
                "wesenheit": {"band": "H", "colour": ["V", "I"], "ratio": 0.4},
            }
        ),
        "key anchors.parallaxes.magnitude: found an index on H with the ratio 0.4, "
        "where the Cepheids have an index on H with the ratio 0.386; "
        "expected the same magnitude for both, as they share one zero point; "
        "give both sections the same band, or the same index and ratio",
    ),
    "uncorrected parallaxes": (
        lambda c: c["anchors"]["parallaxes"].update(corrected=False),
        "key anchors.parallaxes.corrected: found the zero-point recipe, without columns for it; "
        "expected columns.g_magnitude, columns.nu_eff, columns.ecliptic_latitude; "
        "name the columns, or set corrected = true if the recipe is already applied",
    ),
}


@pytest.mark.parametrize(("spoil", "words"), CONTRADICTIONS.values(), ids=CONTRADICTIONS)
def test_contradictory_choices(spoil: Callable[[dict[str, Any]], Any], words: str) -> None:
    plain = choices()
    spoil(plain)
    with pytest.raises(InputError) as caught:
        build_ladder(plain, tables())
    assert str(caught.value) == words


def test_a_cut_that_leaves_nothing(workshop: Workshop) -> None:
    workshop.cell("cepheids", 1, "Mode", "1O")
    workshop.cell("cepheids", 2, "OH", "")
    workshop.choices["cepheids"]["periods"] = [300.0, 400.0]
    assert workshop.complaints() == [
        f"{workshop.file('cepheids.csv')}, key cepheids.periods: "
        "found none of 36 rows left: 1 missing metallicity; 1 overtone; "
        "34 outside the period range; expected at least one Cepheid; "
        "widen or correct cepheids.overtones and cepheids.periods"
    ]


def test_a_redshift_range_that_leaves_nothing(workshop: Workshop) -> None:
    workshop.choices["expansion"]["redshifts"] = [0.5, 0.6]
    (line,) = workshop.complaints()
    assert "key expansion.redshifts: found none of 20 rows left: 20 outside the redshift" in line


def test_unknown_mode(workshop: Workshop) -> None:
    workshop.cell("cepheids", 6, "Mode", "2O")
    workshop.cell("cepheids", 8, "Mode", "RR")
    assert workshop.complaints() == [
        f"{workshop.file('cepheids.csv')}, row 6, column 'Mode': found the mode '2O' "
        "(and 1 more such row); expected F, FU, fundamental or 0; or 1O, FO, O, overtone or 1; "
        "correct the label, empty it, or set the star aside"
    ]


def test_setting_aside_an_unknown_star(workshop: Workshop) -> None:
    workshop.choices["cepheids"]["set_aside"] = [{"star": "Q07-36", "reason": "blended"}]
    assert workshop.complaints() == [
        f"{workshop.file('cepheids.csv')}, key cepheids.set_aside: found 'Q07-36' (entry 1); "
        "expected a star of this table; did you mean 'Q07-036'?"
    ]


def test_setting_aside_an_ambiguous_star(workshop: Workshop) -> None:
    workshop.cell("cepheids", 1, "ID", "Q07-026")
    workshop.choices["cepheids"]["set_aside"] = [{"star": "Q07-026", "reason": "blended"}]
    (line,) = workshop.complaints()
    assert line.endswith(
        "found 'Q07-026', which is in Q07, Tavin (entry 1); expected one star; add host = NAME"
    )


def test_setting_aside_an_unknown_host(workshop: Workshop) -> None:
    workshop.choices["cepheids"]["set_aside"] = [{"host": "Q7", "reason": "crowded"}]
    assert workshop.complaints() == [
        f"{workshop.file('cepheids.csv')}, key cepheids.set_aside: found 'Q7' (entry 1); "
        "expected a host of this table; did you mean 'Q07'?"
    ]


def test_setting_aside_the_wrong_kind(workshop: Workshop) -> None:
    workshop.choices["supernovae"]["set_aside"] = [{"star": "2091a", "reason": "odd"}]
    (line,) = workshop.complaints()
    assert "key supernovae.set_aside: found an entry of another kind (entry 1)" in line
    assert "expected name = NAME" in line


def test_an_endless_name(workshop: Workshop) -> None:
    workshop.cell("cepheids", 6, "ID", "x" * 5000)
    assert workshop.complaints() == [
        f"{workshop.file('cepheids.csv')}, row 6, column 'ID': found a star of 5,000 characters; "
        "expected at most 200; name the right column, or correct the cell"
    ]


def test_every_table_is_judged_at_once(workshop: Workshop) -> None:
    workshop.cell("cepheids", 4, "P", -1.0)
    workshop.cell("cepheids", 5, "e_V", 0.0)
    workshop.cell("anchors.parallaxes", 2, "plx", "small")
    workshop.cell("expansion", 3, "mB", "bright")
    places = [line.split(": found")[0] for line in workshop.complaints()]
    assert places == [
        f"{workshop.file('cepheids.csv')}, row 4, column 'P'",
        f"{workshop.file('cepheids.csv')}, row 5, column 'e_V'",
        f"{workshop.file('parallax_stars.csv')}, row 2, column 'plx'",
        f"{workshop.file('flow.csv')}, row 3, column 'mB'",
    ]


IN_MEMORY: list[tuple[dict[str, Any], str]] = [
    (
        {"cephids": {}},
        "found a table for 'cephids'; expected tables for sections of the choices, among "
        "cepheids, anchors.parallaxes, supernovae, expansion; did you mean 'cepheids'?",
    ),
    (
        {"expansion": [1, 2]},
        "key expansion: found a list; expected a pandas DataFrame, an astropy Table or a "
        "mapping of arrays of one length; pass one of these, with at least one row",
    ),
    (
        {"expansion": {"SN": ["a"], "zcmb": [0.1, 0.2]}},
        "key expansion: found columns of different lengths {'SN': 1, 'zcmb': 2}; "
        "expected a pandas DataFrame, an astropy Table or a mapping of arrays of one length; "
        "pass one of these, with at least one row",
    ),
    (
        {"expansion": {}},
        "key expansion: found a table without rows; expected a pandas DataFrame, an astropy "
        "Table or a mapping of arrays of one length; pass one of these, with at least one row",
    ),
]


@pytest.mark.parametrize(("given", "words"), IN_MEMORY)
def test_tables_in_memory(given: dict[str, Any], words: str) -> None:
    with pytest.raises(InputError) as caught:
        build_ladder(choices(), {**tables(), **given})
    assert words in str(caught.value).splitlines()


def test_a_table_for_a_section_that_is_not_chosen() -> None:
    plain = choices()
    del plain["expansion"]
    with pytest.raises(InputError, match="'expansion', which the choices do not have"):
        build_ladder(plain, tables())


def test_a_table_that_was_never_given(tmp_path: Path) -> None:
    built = build_ladder(choices(), tables())
    write_choices(built.choices, tmp_path / "ladder.toml")
    with pytest.raises(InputError) as caught:
        read_ladder(tmp_path / "ladder.toml")
    assert "key cepheids.table: found no table of that section in memory" in str(caught.value)
    assert "write it to a file and name the file" in str(caught.value)


def test_errors_survive_a_process_pool() -> None:
    import pickle

    error = InputError(Problem("a", "b", "c", file="f", row=2))
    assert pickle.loads(pickle.dumps(error)).problems == error.problems


def test_a_message_is_one_line() -> None:
    assert str(Problem("two\nlines", "b", "c", file="f")) == "f: found two lines; expected b; c"


@pytest.mark.parametrize(
    ("word", "known", "hint"),
    [
        ("Galxy", ["Galaxy", "P"], "did you mean 'Galaxy'?"),
        ("tavin", ["Tavin", "Orrel"], "did you mean 'Tavin'?"),
        ("zzz", ["b", "a"], "known: 'a', 'b'"),
        ("zzz", [], "known: nothing"),
    ],
)
def test_nearest_words(word: str, known: list[str], hint: str) -> None:
    assert nearest(word, known) == hint
