"""Tables in every format: the same numbers, units converted, empty cells known."""

from __future__ import annotations

import pickle
import warnings
from collections.abc import Callable
from pathlib import Path
from typing import Any

import astropy.units as u
import numpy as np
import pandas as pd
import pytest
from astropy.io import fits
from astropy.table import MaskedColumn, QTable, Table

from ladderfit.errors import InputError
from ladderfit.inputs import kinds
from ladderfit.inputs.table_files import read_table
from ladderfit.inputs.table_memory import table_in_memory
from ladderfit.inputs.tables import DataTable

PERIODS = [5.25, 10.125, 31.5]
PARALLAXES = [0.5, float("nan"), -0.125]
NAMES = ["007", "S 2", "x#3"]
BIG = [4_000_000_000_000_000_001, 4_000_000_000_000_000_002, 4_000_000_000_000_000_003]


def astropy_table() -> Table:
    parallax = MaskedColumn(
        [0.5, 0.0, -0.125], name="plx", unit=u.mas, mask=[False, True, False], dtype=float
    )
    table = Table({"ID": NAMES, "P": PERIODS, "big": BIG})
    table["P"].unit = u.d
    table["plx"] = parallax
    return table


def write_csv(path: Path) -> None:
    path.write_text(
        "# a comment\n\nID,P,big,plx\n"
        f'007,5.25,{BIG[0]},0.5\nS 2, 10.125 ,{BIG[1]},\n"x#3",31.5,{BIG[2]},-0.125\n'
    )


def write_astropy(layout: str, **options: str) -> Callable[[Path], None]:
    def write(path: Path) -> None:
        astropy_table().write(path, format=layout, **options)

    return write


def write_parquet(path: Path) -> None:
    frame = pd.DataFrame({"ID": NAMES, "P": PERIODS, "big": BIG, "plx": [0.5, None, -0.125]})
    frame.to_parquet(path)


FORMATS: dict[str, Callable[[Path], None]] = {
    "t.csv": write_csv,
    "t.ecsv": write_astropy("ascii.ecsv"),
    "t.fits": write_astropy("fits"),
    "t.vot": write_astropy("votable", tabledata_format="binary"),
    "t.parquet": write_parquet,
    "t.mrt": write_astropy("ascii.mrt"),
    "t.txt": write_astropy("ascii.basic"),
}


@pytest.fixture(params=FORMATS)
def table(request: pytest.FixtureRequest, tmp_path: Path) -> DataTable:
    path = tmp_path / request.param
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # what writers of other formats have to say
        FORMATS[request.param](path)
    return read_table(path, "cepheids.table")


def test_every_format_gives_the_same(table: DataTable) -> None:
    assert table.rows == 3
    assert list(table.numbers("P", kinds.PERIOD).values) == PERIODS
    parallax = table.numbers("plx", kinds.PARALLAX)
    np.testing.assert_array_equal(parallax.values, PARALLAXES)
    assert list(parallax.missing) == [False, True, False]
    assert not parallax.faulty.size
    assert list(table.texts("ID").values) == NAMES
    assert list(table.texts("big").values) == [str(number) for number in BIG]


def test_another_process_needs_no_file(table: DataTable) -> None:
    """What a sweep hands to its workers, which may be on another machine."""
    handed = pickle.dumps(table)
    Path(table.name).unlink()
    test_every_format_gives_the_same(pickle.loads(handed))


def test_hash_is_that_of_the_file(table: DataTable) -> None:
    import hashlib

    assert table.sha256 == hashlib.sha256(Path(table.name).read_bytes()).hexdigest()


MEMORY: dict[str, Callable[[], Any]] = {
    "DataFrame": lambda: pd.DataFrame({"ID": NAMES, "P": PERIODS, "big": BIG, "plx": PARALLAXES}),
    "nullable DataFrame": lambda: pd.DataFrame(
        {"ID": NAMES, "P": PERIODS, "big": BIG, "plx": pd.array([0.5, None, -0.125], "Float64")}
    ),
    "Table": astropy_table,
    "QTable": lambda: QTable(astropy_table()),
    "arrays": lambda: {
        "ID": NAMES,
        "P": PERIODS * u.d,
        "big": np.array(BIG),
        "plx": np.ma.masked_invalid(PARALLAXES),
    },
    "lists": lambda: {"ID": NAMES, "P": PERIODS, "big": BIG, "plx": [0.5, None, -0.125]},
}


@pytest.mark.parametrize("build", MEMORY.values(), ids=MEMORY)
def test_every_kind_in_memory_gives_the_same(build: Callable[[], Any]) -> None:
    table = table_in_memory(build(), "cepheids")
    assert list(table.numbers("P", kinds.PERIOD).values) == PERIODS
    parallax = table.numbers("plx", kinds.PARALLAX)
    np.testing.assert_array_equal(parallax.values, PARALLAXES)
    assert list(parallax.missing) == [False, True, False]
    assert list(table.texts("ID").values) == NAMES
    assert list(table.texts("big").values) == [str(number) for number in BIG]


def test_arrays_are_copied() -> None:
    period = np.array(PERIODS)
    table = table_in_memory({"P": period}, "cepheids")
    period[0] = -1.0
    assert table.numbers("P", kinds.PERIOD).values[0] == PERIODS[0]
    with pytest.raises(ValueError, match="read-only"):
        table.numbers("P", kinds.PERIOD).values[0] = 1.0


def test_hash_in_memory_follows_contents() -> None:
    def hashed(**columns: Any) -> str:
        return table_in_memory(columns, "cepheids").sha256

    assert hashed(a=[1.0, 2.0]) == hashed(a=[1.0, 2.0])
    assert hashed(a=[1.0, 2.0]) != hashed(a=[1.0, 3.0])
    assert hashed(a=[1.0, 2.0]) != hashed(b=[1.0, 2.0])
    assert hashed(a=BIG[:1]) != hashed(a=BIG[1:2])
    assert hashed(a=["x", "y"]) != hashed(a=["xy", ""])
    assert hashed(a=[1.0] * u.d) != hashed(a=[1.0] * u.h)


CONVERSIONS = [
    (kinds.PERIOD, "h", 24.0, 1.0),
    (kinds.PERIOD, "yr", 1.0, 365.25),
    (kinds.PARALLAX, "arcsec", 0.001, 1.0),
    (kinds.PARALLAX, "uas", 250.0, 0.25),
    (kinds.MAGNITUDE, "mmag", 12500.0, 12.5),
    (kinds.MAGNITUDE, "mag", 12.5, 12.5),
    (kinds.MAGNITUDE, "mag(AB)", 12.5, 12.5),
    (kinds.METALLICITY, "dex", 0.25, 0.25),
    (kinds.METALLICITY, "", 0.25, 0.25),
    (kinds.LOG_PERIOD, "dex(d)", 1.25, 1.25),
    (kinds.LOG_PERIOD, "dex(h)", 1.0, 1.0 - np.log10(24.0)),
    (kinds.LOG_PERIOD, "dex", 1.25, 1.25),
    (kinds.DISTANCE, "kpc", 2500.0, 2.5),
    (kinds.VELOCITY, "m/s", 5000.0, 5.0),
    (kinds.REDSHIFT, "%", 5.0, 0.05),
]


@pytest.mark.parametrize(
    ("kind", "unit", "given", "expected"),
    CONVERSIONS,
    ids=[f"{k.words}, {n}" for k, n, *_ in CONVERSIONS],
)
def test_units_are_converted(kind: kinds.Kind, unit: str, given: float, expected: float) -> None:
    column = Table({"x": [given]})
    column["x"].unit = u.Unit(unit)
    table = table_in_memory(column, "cepheids")
    assert table.unit_problem("x", kind) is None
    assert table.numbers("x", kind).values[0] == pytest.approx(expected, rel=1e-14)


@pytest.mark.parametrize(
    ("kind", "unit"),
    [
        (kinds.PERIOD, "mas"),
        (kinds.PERIOD, "dex(d)"),
        (kinds.PARALLAX, "d"),
        (kinds.PARALLAX, "pc"),
        (kinds.MAGNITUDE, "dex"),
        (kinds.MAGNITUDE, "Jy"),
        (kinds.METALLICITY, "mag"),
        (kinds.METALLICITY, "d"),
        (kinds.LOG_PERIOD, "d"),
        (kinds.DISTANCE, "mag"),
        (kinds.VELOCITY, "km"),
        (kinds.REDSHIFT, "km/s"),
        (kinds.REDSHIFT, "nonsense"),
    ],
)
def test_other_units_are_refused(kind: kinds.Kind, unit: str) -> None:
    column = Table({"x": [1.0]})
    column["x"].unit = u.Unit(unit, parse_strict="silent")
    problem = table_in_memory(column, "cepheids").unit_problem("x", kind)
    assert problem is not None
    assert f"the unit '{unit.replace('km/s', 'km / s')}'" in problem.found


def test_parquet_keeps_the_units_astropy_wrote(tmp_path: Path) -> None:
    table = Table({"P": [24.0], "x": [1.0]})
    table["P"].unit = u.h
    table.write(tmp_path / "t.parquet")
    read = read_table(tmp_path / "t.parquet", "cepheids.table")
    assert list(read.numbers("P", kinds.PERIOD).values) == [1.0]
    assert read.unit_problem("x", kinds.PARALLAX) is not None


def test_fits_whose_parts_have_no_end(tmp_path: Path) -> None:
    path = tmp_path / "t.fits"
    Table({"P": np.arange(1.0, 361.0)}).write(path)  # 2,880 bytes, and a header of as many
    whole = path.read_bytes()
    before, _, after = whole.partition(b"PCOUNT  =                    0")
    path.write_bytes(before + b"PCOUNT  =                -5760" + after)  # back to itself
    assert read_table(path, "cepheids.table").rows == 360
    path.write_bytes(b"SIMPLE  =          \xd7" + whole[20:])
    with pytest.raises(InputError, match="expected a readable table"):
        read_table(path, "cepheids.table")
    head = fits.PrimaryHDU()
    head.writeto(tmp_path / "empty.fits")
    with pytest.raises(InputError, match="no table in the file"):
        read_table(tmp_path / "empty.fits", "cepheids.table")


def test_parquet_with_text_that_is_none(tmp_path: Path) -> None:
    path = tmp_path / "t.parquet"
    frame = pd.DataFrame({"name": ["Q-01", "Q-02"], "P": [1.0, 2.0]})
    frame.to_parquet(path, compression=None, index=False)
    path.write_bytes(path.read_bytes().replace(b"Q-0", b"Q\xff0"))
    with pytest.raises(InputError, match="expected a readable table"):
        read_table(path, "cepheids.table").texts("name")


def test_a_masked_quantity_survives_ecsv(tmp_path: Path) -> None:
    QTable(astropy_table()).write(tmp_path / "t.ecsv")
    read = read_table(tmp_path / "t.ecsv", "cepheids.table")
    np.testing.assert_array_equal(read.numbers("plx", kinds.PARALLAX).values, PARALLAXES)


@pytest.mark.parametrize("mark", [";", "\t"])
def test_other_separators(tmp_path: Path, mark: str) -> None:
    path = tmp_path / "t.csv"
    path.write_text(mark.join(("ID", "P")) + "\n" + mark.join(("a", "5.5")) + "\n")
    assert list(read_table(path, "k").numbers("P", kinds.PERIOD).values) == [5.5]


def test_byte_order_mark(tmp_path: Path) -> None:
    (tmp_path / "t.csv").write_text("\ufeffP,ID\n5.5,a\n", encoding="utf-8")
    assert list(read_table(tmp_path / "t.csv", "k").columns) == ["P", "ID"]


def test_columns_with_nothing_in_them(tmp_path: Path) -> None:
    (tmp_path / "t.csv").write_text("P,ID\n,a\n,b\n")
    assert read_table(tmp_path / "t.csv", "k").numbers("P", kinds.PERIOD).missing.all()


def test_nothing_is_fetched_from_elsewhere(tmp_path: Path) -> None:
    secret = tmp_path / "secret"
    secret.write_bytes(b"\x00" * 8)
    (tmp_path / "t.vot").write_text(
        '<?xml version="1.0"?><VOTABLE version="1.3" xmlns="http://www.ivoa.net/xml/VOTable/v1.3">'
        '<RESOURCE><TABLE><FIELD name="P" datatype="double"/><DATA><BINARY>'
        f'<STREAM\n href="file://{secret}"/></BINARY></DATA></TABLE></RESOURCE></VOTABLE>'
    )
    with pytest.raises(InputError, match="data that lie in another file or on a server"):
        read_table(tmp_path / "t.vot", "cepheids.table")


@pytest.mark.parametrize("suffix", [".csv", ".ecsv", ".fits", ".vot", ".parquet", ".mrt", ".txt"])
@pytest.mark.parametrize("content", [b"\x00\xff\xfe" * 40, b"SIMPLE  =", b"# %ECSV 1.0\n# ---\n"])
def test_damaged_files_are_ordinary_problems(tmp_path: Path, suffix: str, content: bytes) -> None:
    path = tmp_path / f"t{suffix}"
    path.write_bytes(content)
    with pytest.raises(InputError) as caught:
        read_table(path, "cepheids.table")
    (problem,) = caught.value.problems
    assert problem.file == str(path)
    assert problem.expected in ("a readable table", "at least one row")


def test_a_truncated_fits_file_is_a_problem(tmp_path: Path) -> None:
    path = tmp_path / "t.fits"
    Table({"P": np.arange(5000.0)}).write(path)
    path.write_bytes(path.read_bytes()[:20000])
    with pytest.raises(InputError, match=r"t\.fits, key k: found .*; expected a readable table"):
        read_table(path, "k")
