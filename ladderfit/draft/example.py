"""Tables as a person may have them: CSV without units, two values for one anchor."""

from __future__ import annotations

import csv
from collections.abc import Iterable, Sequence
from pathlib import Path

from ladderfit.inputs.table_files import read_table
from ladderfit.inputs.tables import DataTable
from ladderfit.shipped import shipped

_STARS = {"ID": "star", "Galaxy": "galaxy", "P": "period"}
_BANDS = {f"{b}mag": b for b in "VIH"} | {f"e_{b}": f"{b}_err" for b in "VIH"}
_SOLAR = 8.69  # 12+log(O/H) to which the metallicities are stated
_MODULI = (
    ("Tavin", 18.453, 0.025, "water masers"),
    ("Tavin", 18.41, 0.06, "eclipsing binaries"),
    ("Orsell", 29.431, 0.032, "water masers"),
)


def write_example(folder: str | Path) -> list[Path]:
    """Write the sample's objects as five CSV files; those already there stay as they are.

    Fundamental pulsators only; metallicities are stated relative to 12+log(O/H) = 8.69.
    The survey is invented and its data are simulated; so is the second modulus of Tavin.

    Parameters
    ----------
    folder : str or Path
        Made if absent.

    Returns
    -------
    list of Path

    Raises
    ------
    LadderfitError
        If the installation lacks the sample.
    OSError
        If the folder cannot be written.
    """
    folder = Path(folder)
    folder.mkdir(parents=True, exist_ok=True)
    wanted = {
        "cepheids": ("cepheids", _STARS | {"OH": "met"} | _BANDS),
        "parallax_stars": (
            "near_cepheids",
            {"ID": "star", "P": "period", "OH": "met", **_BANDS, "plx": "plx", "e_plx": "plx_err"},
        ),
        "supernovae": (
            "supernovae",
            {"SN": "name", "Galaxy": "galaxy", "mB": "peak", "e_mB": "peak_err"},
        ),
        "flow": (
            "flow",
            {"SN": "name", "zcmb": "z", "zhel": "z_hel", "mB": "peak", "e_mB": "peak_err"},
        ),
    }
    written = []
    for source, (name, columns) in wanted.items():
        table = read_table(shipped("sample_data") / f"{source}.ecsv", "")
        written.append(
            _write(folder / f"{name}.csv", list(columns.values()), _rows(table, columns))
        )
    head = ["galaxy", "mu", "mu_err", "method"]
    written.append(_write(folder / "moduli.csv", head, _MODULI))
    return written


def _rows(table: DataTable, columns: dict[str, str]) -> Iterable[list[str]]:
    cells = {name: table.texts(name) for name in columns}
    mode = table.texts("Mode") if "Mode" in table.columns else None
    for row in range(table.rows):
        if mode is None or mode.cell(row) == "F":
            yield [_cell(name, text.cell(row)) for name, text in cells.items()]


def _cell(name: str, text: str) -> str:
    try:
        return f"{float(text) - _SOLAR:.3f}" if name == "OH" else text
    except ValueError:
        return ""


def _write(path: Path, head: Sequence[str], rows: Iterable[Sequence[object]]) -> Path:
    if not path.exists():
        with path.open("x", encoding="utf-8", newline="") as stream:
            csv.writer(stream, lineterminator="\n").writerows([head, *rows])
    return path
