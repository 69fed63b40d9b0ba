"""Tables for print and for machines: digits, covariances, grammar, and names that attack."""

from __future__ import annotations

import csv
import io
import shutil
import subprocess
from pathlib import Path

import hostile
import latex_grammar
import numpy as np
import pytest
from astropy.table import Table
from hypothesis import given
from hypothesis import strategies as st
from small_ladders import small_ladder

from ladderfit.names import with_group
from ladderfit.report.cells import PaperTable, Quoted, Words, quoted, text_column
from ladderfit.report.files import tables_of, write_tables
from ladderfit.report.latex import PACKAGES, latex
from ladderfit.report.latex_text import escaped, unit
from ladderfit.report.machine import comma_separated, harmless
from ladderfit.result import Result
from ladderfit.rounding import MINUS, rounded_arms
from ladderfit.sampling.run import draw

FORMULA_STARTS = ("=", "+", "-", "@")


@pytest.fixture(scope="module")
def result() -> Result:
    return draw(small_ladder("all rungs"), seed=4, draws=600)


@pytest.fixture(scope="module")
def attacked() -> Result:
    return draw(hostile.ladder(), seed=4, draws=400)


def by_name(result: Result) -> dict[str, PaperTable]:
    return {table.name: table for table in tables_of(result)}


# --- numbers -----------------------------------------------------------------------------


def test_unequal_errors_keep_the_places_of_the_smaller() -> None:
    assert str(rounded_arms(0.1234, 0.0311, 0.0528)) == f"0.123 +0.053 {MINUS}0.031"
    assert str(rounded_arms(-1.0, 0.5, 0.08)) == f"{MINUS}1.00 +0.08 {MINUS}0.50"
    assert str(rounded_arms(2.0, 0.0, 0.1)) == "2"


def test_symmetric_draws_are_not_called_skew_and_skew_ones_are() -> None:
    """Of 200 normal posteriors none is called skew; of 200 half-normal ones nearly all."""
    rng = np.random.default_rng(8)
    normal = [quoted(rng.normal(size=1000)).asymmetric for _ in range(200)]
    skew = [quoted(np.abs(rng.normal(size=1000)) ** 1.5).asymmetric for _ in range(200)]
    assert sum(normal) == 0
    assert np.mean(skew) > 0.99
    found = quoted(np.abs(rng.normal(size=4000)) ** 1.5)
    assert found.value - found.below == pytest.approx(0.0898, abs=0.02)  # |z|^1.5 at 16 %


def test_tables_hold_what_was_drawn(result: Result) -> None:
    tables = by_name(result)
    parameters = {c.name: c.values for c in tables["parameters"].columns}
    for place, name in enumerate(parameters["parameter"]):
        assert parameters["mean"][place] == pytest.approx(result.mean(str(name)), rel=1e-12)
        assert parameters["q84"][place] == pytest.approx(np.quantile(result.draws[str(name)], 0.84))
    covariance = tables["covariance"]
    names = [str(name) for name in covariance.columns[0].values]
    matrix = np.stack([column.values for column in covariance.columns[2:]])
    expected = np.cov(np.stack([result.draws[name] for name in names]))
    np.testing.assert_allclose(matrix, expected, rtol=1e-9, atol=1e-18)
    moduli = {c.name: c.values for c in tables["moduli"].columns}
    for host, distance in zip(moduli["host"], moduli["distance"], strict=True):
        draws = 10.0 ** (0.2 * result.draws[with_group("modulus", str(host))] - 5.0)
        assert distance == pytest.approx(quoted(draws).value)


def test_residuals_are_data_minus_model_star_by_star(result: Result) -> None:
    table = by_name(result)["residuals_cepheids"]
    found = {c.name: c.values for c in table.columns}
    assert len(table) == len(result.ladder.cepheids or ())
    np.testing.assert_allclose(found["residual"], found["data"] - found["model"], atol=1e-12)
    np.testing.assert_allclose(found["standardised"], found["residual"] / found["expected"])


def test_files_read_back(result: Result, tmp_path: Path) -> None:
    for table in tables_of(result):
        write_tables([table], tmp_path, "Small ladder")
        back = Table.read(tmp_path / f"{table.name}.ecsv", format="ascii.ecsv")
        assert len(back) == len(table)
        for column in table.columns:
            np.testing.assert_array_equal(back[column.name], column.values, table.name)
            assert str(back[column.name].unit or "") == column.unit
        rows = list(csv.reader(io.StringIO((tmp_path / f"{table.name}.csv").read_text("utf-8"))))
        assert len(rows) == len(table) + 1
        assert (tmp_path / f"{table.name}.tex").is_file() == bool(table.head)


# --- LaTeX -------------------------------------------------------------------------------


def test_units_have_exponents() -> None:
    assert unit("km/s/Mpc") == r"km\,s$^{-1}$\,Mpc$^{-1}$"
    assert unit("mag/dex2") == r"mag\,dex$^{-2}$"
    assert unit("") == ""


@given(st.text(max_size=40))
def test_any_text_is_harmless_latex(text: str) -> None:
    made = escaped(text)
    assert made.isascii()
    table = PaperTable("t", text, (), ("Name",), ((Words(text),), (text,)), (text,))
    assert not latex_grammar.faults(latex(table, [text.replace("\n", " ")]))


@pytest.mark.parametrize(
    ("source", "fault"),
    [
        ("a_b", "a bare _"),
        ("100 % of", "a bare %"),
        (r"\write18{rm}", "an unknown command"),
        ("{", "braces do not match"),
        ("$x", "an odd number"),
        (r"\begin{table}", "is not ended"),
        ("é", "not ASCII"),
        ("\\begin{tabular}{@{}ll@{}}\na & b & c \\\\\n\\end{tabular}", "3 cells in 2 columns"),
    ],
)
def test_the_grammar_finds_faults(source: str, fault: str) -> None:
    """Negative controls."""
    assert any(fault in found for found in latex_grammar.faults(source))


@pytest.mark.parametrize("which", ["result", "attacked"])
def test_latex_has_no_faults(which: str, request: pytest.FixtureRequest) -> None:
    for table in tables_of(request.getfixturevalue(which)):
        if table.head:
            assert not latex_grammar.faults(latex(table, ["about"])), table.name


def test_long_tables_run_over_pages() -> None:
    rows = tuple((f"S{i}", "1.0") for i in range(80))
    long = latex(PaperTable("t", "Stars", (), ("Name", "Value"), rows), [])
    assert r"\begin{longtable}" in long
    assert not latex_grammar.faults(long)


@pytest.mark.skipif(
    shutil.which("pdflatex") is None, reason="no pdflatex here: only the grammar is checked"
)
def test_latex_compiles_without_a_warning(result: Result, attacked: Result, tmp_path: Path) -> None:
    body = []
    for folder, found in (("plain", result), ("attacked", attacked)):
        for path in write_tables(tables_of(found), tmp_path / folder, found.choices.title):
            if path.suffix == ".tex":
                body.append(rf"\input{{{folder}/{path.name}}}\clearpage")
    text = (tmp_path / "attacked" / "moduli.tex").read_text("utf-8")
    (tmp_path / "attacked" / "moduli.tex").write_text(text.replace("tab:", "tab:a"), "utf-8")
    labels = "\\let\\label\\relax\\def\\label#1{}"  # both results have the same labels
    packages = "".join(rf"\usepackage{{{name}}}" for name in PACKAGES)
    document = "\n".join(
        [
            rf"\documentclass{{article}}{packages}{labels}\begin{{document}}",
            *body,
            r"\end{document}",
        ]
    )
    (tmp_path / "all.tex").write_text(document, "utf-8")
    for _ in range(3):  # widths of long tables settle
        done = subprocess.run(
            ["pdflatex", "-interaction=nonstopmode", "-halt-on-error", "all.tex"],
            cwd=tmp_path,
            capture_output=True,
            check=False,
        )
        assert done.returncode == 0, done.stdout.decode("latin-1")[-2000:]
    log = (tmp_path / "all.log").read_text("latin-1")
    bad = [line for line in log.splitlines() if "Warning" in line or "full \\hbox" in line]
    assert not bad, bad
    assert not (tmp_path / "all.out").exists()


# --- CSV ---------------------------------------------------------------------------------


@given(st.text(max_size=30))
def test_no_text_is_a_formula(text: str) -> None:
    table = PaperTable("t", "t", (text_column("name", [text]),))
    header, row = csv.reader(io.StringIO(comma_separated(table)))
    assert header == ["name"]
    assert not (row[0] if row else "").lstrip().startswith(FORMULA_STARTS)


def test_ordinary_names_and_numbers_stay_as_they_are() -> None:
    assert harmless("Tav-001") == "Tav-001"
    assert harmless(hostile.FORMULA) == f"'{hostile.FORMULA}"


def test_names_that_attack_survive_in_every_table(attacked: Result, tmp_path: Path) -> None:
    for table in tables_of(attacked):
        write_tables([table], tmp_path, attacked.choices.title)
        for row in csv.reader(io.StringIO((tmp_path / f"{table.name}.csv").read_text("utf-8"))):
            for cell in row:
                number = cell.lstrip("-").replace(".", "").replace("e-", "").isdigit()
                assert number or not cell.startswith(FORMULA_STARTS), (table.name, cell)
        back = Table.read(tmp_path / f"{table.name}.ecsv", format="ascii.ecsv")
        for column in table.columns:
            np.testing.assert_array_equal(back[column.name], column.values, table.name)
    stars = Table.read(tmp_path / "residuals_cepheids.ecsv", format="ascii.ecsv")
    assert {hostile.SCRIPT, hostile.FORMULA, hostile.SPECIALS} <= set(stars["name"])
    assert set(stars["host"]) == set(hostile.HOSTS.values())


def test_a_quoted_number_is_its_rounded_text() -> None:
    assert str(Quoted(70.361, 1.178, 1.178, asymmetric=False)) == "70.4 ± 1.2"
