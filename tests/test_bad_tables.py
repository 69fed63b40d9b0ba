"""The words of every complaint about a bad table: where, what, what instead, what to do."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from astropy.table import Table
from builders import choices, tables
from workshop import Workshop

from ladderfit.errors import InputError
from ladderfit.ladder import Ladder, build_ladder, read_ladder


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


def test_an_absurd_number(workshop: Workshop) -> None:
    workshop.cell("cepheids", 7, "Hmag", "-2.1e227")
    (line,) = workshop.complaints()
    assert "found '-2.1e227'; expected a magnitude in mag, a number below 1e+30 in size" in line


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
    options = {"tabledata_format": "binary"} if suffix == "vot" else {}  # as text can crash
    table.write(workshop.folder / name, format=layout, **options)
    workshop.choices["anchors"]["parallaxes"]["table"] = name
    assert workshop.complaints() == [
        f"{workshop.file(name)}, column 'plx': found no unit; expected a parallax, in mas or "
        "what converts to it; state the column's unit in the table (mas, say)"
    ]
