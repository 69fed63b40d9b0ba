"""The words of every complaint about bad input: where, what, what instead, what to do."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from astropy.table import Table
from builders import choices, tables, write_tables

from ladderfit.choices import Choices
from ladderfit.errors import InputError, Problem, nearest
from ladderfit.ladder import Ladder, build_ladder, read_ladder
from ladderfit.ladder_file import write_choices

Edit = Callable[[dict[str, pd.DataFrame]], None]


class Workshop:
    """A small ladder on disk that tests spoil before it is read."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.tables = {key: table.astype(object) for key, table in tables().items()}
        self.choices = choices(tables=True)

    def file(self, name: str) -> str:
        return str(self.folder / name)

    def cell(self, section: str, row: int, column: str, value: Any) -> None:
        self.tables[section].loc[row - 1, column] = value

    def write(self) -> Path:
        write_tables(self.folder, self.tables)
        path = self.folder / "ladder.toml"
        if not path.exists():
            write_choices(Choices.from_mapping(self.choices), path)
        return path

    def complaints(self) -> list[str]:
        path = self.write()
        with pytest.raises(InputError) as caught:
            read_ladder(path)
        return str(caught.value).splitlines()


@pytest.fixture
def workshop(tmp_path: Path) -> Workshop:
    return Workshop(tmp_path)


def test_unspoilt(workshop: Workshop) -> None:
    assert isinstance(read_ladder(workshop.write()), Ladder)


def test_missing_ladder_file(tmp_path: Path) -> None:
    with pytest.raises(InputError) as caught:
        read_ladder(tmp_path / "ladder.toml")
    assert str(caught.value) == (
        f"{tmp_path / 'ladder.toml'}: found no such file; expected a ladder file; correct the path"
    )


def test_missing_table(workshop: Workshop) -> None:
    path = workshop.write()
    (workshop.folder / "flow.csv").unlink()
    with pytest.raises(InputError) as caught:
        read_ladder(path)
    assert str(caught.value) == (
        f"{workshop.file('flow.csv')}, key expansion.table: found no such file; "
        "expected a table; correct the path, which is relative to the ladder file's folder"
    )


def test_table_is_a_folder(workshop: Workshop) -> None:
    workshop.choices["expansion"]["table"] = "."
    (line,) = workshop.complaints()
    assert "key expansion.table: found a folder; expected a table" in line


def test_unknown_extension(workshop: Workshop) -> None:
    workshop.choices["expansion"]["table"] = "flow.pickle"
    (workshop.folder / "flow.pickle").write_bytes(b"\x80\x04.")
    (line,) = workshop.complaints()
    assert "key expansion.table: found the extension '.pickle'; expected one of .csv," in line
    assert line.endswith("rename or convert the table")


def test_unreadable_table(workshop: Workshop) -> None:
    workshop.choices["expansion"]["table"] = "flow.fits"
    (workshop.folder / "flow.fits").write_bytes(b"no table at all")
    (line,) = workshop.complaints()
    assert line.startswith(f"{workshop.file('flow.fits')}, key expansion.table: found OSError: ")
    assert line.endswith("; expected a readable table; repair or replace the file")


def test_table_with_ragged_rows(workshop: Workshop) -> None:
    workshop.choices["expansion"]["table"] = "ragged.csv"
    (workshop.folder / "ragged.csv").write_text("SN,zcmb,mB,e_mB\na,0.05,16,0.1\nb,0.05,16,0.1,9\n")
    (line,) = workshop.complaints()
    assert "key expansion.table: found ParserError: " in line
    assert "Expected 4 fields in line 3, saw 5" in line


@pytest.mark.parametrize("place", [2, 3])
def test_first_row_longer_than_the_header(workshop: Workshop, place: int) -> None:
    rows = ["a,0.05,16,0.1", "b,0.05,16,0.1"]
    rows[place - 2] += ",9"
    workshop.choices["expansion"]["table"] = "ragged.csv"
    (workshop.folder / "ragged.csv").write_text("\n".join(["SN,zcmb,mB,e_mB", *rows]) + "\n")
    (line,) = workshop.complaints()
    assert "; expected a readable table; repair or replace the file" in line


def test_table_of_no_bytes(workshop: Workshop) -> None:
    workshop.choices["expansion"]["table"] = "empty.csv"
    (workshop.folder / "empty.csv").write_text("")
    assert workshop.complaints() == [
        f"{workshop.file('empty.csv')}, key expansion.table: found an empty file; "
        "expected a readable table; repair or replace the file"
    ]


def test_table_without_rows(workshop: Workshop) -> None:
    workshop.tables["expansion"] = workshop.tables["expansion"].iloc[:0]
    assert workshop.complaints() == [
        f"{workshop.file('flow.csv')}, key expansion.table: found a table without rows; "
        "expected at least one row; fill the table, or name another"
    ]


def test_column_name_twice(workshop: Workshop) -> None:
    workshop.choices["expansion"]["table"] = "twice.csv"
    (workshop.folder / "twice.csv").write_text("SN,zcmb,mB,mB\na,0.05,16,0.1\n")
    (line,) = workshop.complaints()
    assert "found the column name 'mB' twice; expected a readable table" in line


def test_missing_column_with_the_nearest(workshop: Workshop) -> None:
    workshop.choices["cepheids"]["columns"]["period"] = "Per"
    workshop.choices["cepheids"]["magnitude"]["errors"]["V"] = "eV"
    workshop.choices["anchors"]["parallaxes"]["magnitude"] = choices()["cepheids"]["magnitude"]
    file = workshop.file("cepheids.csv")
    assert workshop.complaints() == [
        f"{file}, column 'Per', key cepheids.columns.period: found no such column; "
        "expected the column that holds the period; did you mean 'P'?",
        f"{file}, column 'eV', key cepheids.magnitude.errors.V: found no such column; "
        "expected the column that holds the error of V; did you mean 'e_V'?",
    ]


def test_text_in_a_number_column(workshop: Workshop) -> None:
    workshop.cell("cepheids", 5, "P", "12,5")
    workshop.cell("cepheids", 9, "P", "long")
    assert workshop.complaints() == [
        f"{workshop.file('cepheids.csv')}, row 5, column 'P': found '12,5' "
        "(and 1 more such row); expected a period in d, a finite number; "
        "correct the cell, or leave it empty where the value is missing"
    ]


def test_text_in_a_number_column_of_ecsv(workshop: Workshop) -> None:
    workshop.choices["expansion"]["table"] = "flow.ecsv"
    frame = tables()["expansion"]
    frame.loc[1, "mB"] = 12.0
    Table.from_pandas(frame).write(workshop.folder / "flow.ecsv")
    text = (workshop.folder / "flow.ecsv").read_text().replace(" 12.0 ", " faint ")
    (workshop.folder / "flow.ecsv").write_text(text)
    assert workshop.complaints() == [
        f"{workshop.file('flow.ecsv')}, row 2, column 'mB': found 'faint'; "
        "expected a number, as the header declares; "
        "correct the cell, or leave it empty where the value is missing"
    ]


@pytest.mark.parametrize("cell", ["nan", "NaN", "inf", "-Infinity", "1e999"])
def test_nan_or_infinite(workshop: Workshop, cell: str) -> None:
    workshop.cell("cepheids", 7, "Hmag", cell)
    assert workshop.complaints() == [
        f"{workshop.file('cepheids.csv')}, row 7, column 'Hmag': found {cell!r}; "
        "expected a magnitude in mag, a finite number; "
        "correct the cell, or leave it empty where the value is missing"
    ]


def test_nan_in_ecsv(workshop: Workshop) -> None:
    workshop.choices["expansion"]["table"] = "flow.ecsv"
    frame = Table.from_pandas(tables()["expansion"])
    frame["zcmb"][3] = np.nan
    frame.write(workshop.folder / "flow.ecsv")
    (line,) = workshop.complaints()
    assert "row 4, column 'zcmb': found 'nan'; expected a redshift, a finite number" in line


def test_infinite_in_memory() -> None:
    given = tables()
    given["supernovae"].loc[2, "mB"] = np.inf
    with pytest.raises(InputError) as caught:
        build_ladder(choices(), given)
    assert str(caught.value) == (
        "the table given for supernovae, row 3, column 'mB': found 'inf'; "
        "expected a magnitude in mag, a finite number; "
        "correct the cell, or leave it empty where the value is missing"
    )


@pytest.mark.parametrize("period", [0.0, -3.5])
def test_period_not_above_zero(workshop: Workshop, period: float) -> None:
    workshop.cell("cepheids", 4, "P", period)
    assert workshop.complaints() == [
        f"{workshop.file('cepheids.csv')}, row 4, column 'P': found {period:g}; "
        "expected a period above 0; correct the cell, empty it, or set the row aside"
    ]


@pytest.mark.parametrize(
    ("section", "file", "column"),
    [
        ("cepheids", "cepheids.csv", "e_V"),
        ("anchors.parallaxes", "parallax_stars.csv", "e_plx"),
        ("supernovae", "supernovae.csv", "e_mB"),
        ("expansion", "flow.csv", "e_mB"),
    ],
)
@pytest.mark.parametrize("error", [0.0, -0.1])
def test_error_not_above_zero(
    workshop: Workshop, section: str, file: str, column: str, error: float
) -> None:
    workshop.cell(section, 2, column, error)
    workshop.cell(section, 3, column, error)
    assert workshop.complaints() == [
        f"{workshop.file(file)}, row 2, column {column!r}: found {error:g} "
        "(and 1 more such row); expected an error above 0; "
        "correct the cell, empty it, or set the row aside"
    ]


def test_redshift_not_above_zero(workshop: Workshop) -> None:
    workshop.cell("expansion", 2, "zcmb", -0.001)
    assert workshop.complaints() == [
        f"{workshop.file('flow.csv')}, row 2, column 'zcmb': found -0.001; "
        "expected a redshift above 0; correct the cell, empty it, or set the row aside"
    ]


def test_duplicated_star(workshop: Workshop) -> None:
    workshop.cell("cepheids", 30, "ID", "Q07-026")
    workshop.cell("cepheids", 1, "ID", "Q07-026")  # in another host: another star
    assert workshop.complaints() == [
        f"{workshop.file('cepheids.csv')}, row 30, column 'ID': found the star 'Q07-026' again, "
        "first in row 26; expected each once; remove, rename or set aside one of the two; "
        "or leave columns.star out, where the stars have no names of their own"
    ]


def test_duplicated_parallax_star(workshop: Workshop) -> None:
    workshop.cell("anchors.parallaxes", 3, "ID", "S01")
    (line,) = workshop.complaints()
    assert "row 3, column 'ID': found the star 'S01' again, first in row 1" in line


def test_supernova_repeated_with_the_same_peak(workshop: Workshop) -> None:
    for column, value in (("SN", "2091b"), ("mB", 11.7)):
        workshop.cell("supernovae", 3, column, value)
    (line,) = workshop.complaints()
    assert "row 3, column 'SN': found the supernova '2091b' again, first in row 2" in line


def test_supernova_with_two_light_curves_is_fine(workshop: Workshop) -> None:
    workshop.cell("supernovae", 3, "SN", "2091b")
    assert len(read_ladder(workshop.write()).kept) == 4


def test_supernova_in_an_unknown_host(workshop: Workshop) -> None:
    workshop.cell("supernovae", 2, "Galaxy", "Q08")
    assert workshop.complaints() == [
        f"{workshop.file('supernovae.csv')}, row 2, column 'Galaxy': found the unknown host 'Q08'; "
        "expected a host of the Cepheids, or one with a geometric anchor; did you mean 'Q07'?"
    ]


def test_host_without_anchor_or_cepheid(workshop: Workshop) -> None:
    for row in range(13, 37):
        workshop.cell("cepheids", row, "P", 3.0)
    assert workshop.complaints() == [
        f"{workshop.file('supernovae.csv')}, key supernovae.table: found none of 3 rows left: "
        "3 in a host without Cepheid or anchor in use; expected at least one supernova in a host "
        "with a Cepheid or an anchor in use; widen or correct supernovae.table"
    ]


def test_anchor_in_no_table(workshop: Workshop) -> None:
    anchors = workshop.choices["anchors"]["geometric"]
    anchors["Tavinn"] = anchors.pop("Tavin")
    (line,) = workshop.complaints()
    assert line == (
        f"{workshop.file('ladder.toml')}, key anchors.geometric.Tavinn: "
        "found a galaxy that is in no table; "
        "expected a host of the Cepheids or the supernovae; "
        "did you mean 'Tavin'? or set use = false"
    )


def test_wrong_kind_of_unit(workshop: Workshop) -> None:
    table = Table.from_pandas(tables()["cepheids"])
    table["P"].unit = "mas"
    table["Hmag"].unit = "Jy"
    table.write(workshop.folder / "cepheids.ecsv")
    workshop.choices["cepheids"]["table"] = "cepheids.ecsv"
    file = workshop.file("cepheids.ecsv")
    remedy = "name the right column, or correct its unit"
    assert workshop.complaints() == [
        f"{file}, column 'P': found the unit 'mas'; "
        f"expected a period, in d or what converts to it; {remedy}",
        f"{file}, column 'Hmag': found the unit 'Jy'; "
        f"expected a magnitude, in mag or what converts to it; {remedy}",
    ]


@pytest.mark.parametrize("suffix", ["ecsv", "fits", "vot"])
def test_missing_unit_where_it_matters(workshop: Workshop, suffix: str) -> None:
    name = f"parallax_stars.{suffix}"
    table = Table.from_pandas(tables()["anchors.parallaxes"])
    table["P"].unit = "d"
    table["e_plx"].unit = "mas"
    layout = {"vot": "votable", "ecsv": "ascii.ecsv"}.get(suffix, suffix)
    table.write(workshop.folder / name, format=layout)
    workshop.choices["anchors"]["parallaxes"]["table"] = name
    assert workshop.complaints() == [
        f"{workshop.file(name)}, column 'plx': found no unit; expected a parallax, in mas or "
        "what converts to it; state the column's unit in the table (mas, say)"
    ]


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
