"""The report: one page that runs nothing, fetches nothing, and hides no choice."""

from __future__ import annotations

import base64
import hashlib
import re
import shutil
import subprocess
from html.parser import HTMLParser
from pathlib import Path

import hostile
import pandas as pd
import pytest
from astropy.table import Table
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.text import Text
from small_ladders import small_ladder

from ladderfit import plots, schema
from ladderfit.errors import InputError
from ladderfit.ladder import build_ladder
from ladderfit.plots.moduli import moduli_figure
from ladderfit.plots.relation import relation_figure
from ladderfit.priors import Normal
from ladderfit.report import html
from ladderfit.report.budget import alternative_tables
from ladderfit.report.choices import entries
from ladderfit.report.write import renew_report, write_report
from ladderfit.result import Result
from ladderfit.sampling.run import draw
from ladderfit.store import read_result, write_result

PIXEL = base64.b64decode(
    "iVBORw0KGgoAAAANSUhEUgAAAAEAAAABCAQAAAC1HAwCAAAAC0lEQVR42mNkYAAAAAYAAjCB0C8AAAAASUVORK5CYII="
)


class Page(HTMLParser):
    """What a browser would make of a page."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.words: list[str] = []
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))

    def handle_data(self, data: str) -> None:
        self.words.append(data)

    @property
    def text(self) -> str:
        return " ".join(" ".join(self.words).split())


def written(result: Result, folder: Path) -> str:
    folder.mkdir()
    write_result(result, folder)
    (folder / "figures").mkdir()
    (folder / "figures" / "corner.png").write_bytes(PIXEL)
    write_report(result, folder)
    return (folder / "report.html").read_text("utf-8")


@pytest.fixture(scope="module")
def result() -> Result:
    ladder = small_ladder("all rungs").change({"priors.slope": {"normal": [-3.2, 0.4]}})
    return draw(ladder, seed=4, draws=600)


@pytest.fixture(scope="module")
def page(result: Result, tmp_path_factory: pytest.TempPathFactory) -> str:
    return written(result, tmp_path_factory.mktemp("report") / "a result")


def dangers(text: str) -> list[str]:
    """Everything in a page that runs, fetches, or could be made to."""
    page, found = Page(text), []
    for tag, attributes in page.tags:
        if tag in ("script", "iframe", "object", "embed", "form", "link", "base", "svg", "input"):
            found.append(f"<{tag}>")
        for name, value in attributes.items():
            inside = (value or "").startswith(("#", "data:image/png;base64,"))
            if name.startswith("on") or name == "style":
                found.append(f"{tag} {name}=")
            elif name in ("src", "href", "action", "srcset", "poster") and not inside:
                found.append(f"{tag} {name}={value}")
    return found


@pytest.mark.parametrize(
    "bad",
    [
        "<script>1</script>",
        "<img src=x onerror=alert(1)>",
        '<a href="javascript:alert(1)">',
        '<link rel="stylesheet" href="https://example.org/a.css">',
        '<p style="background:url(x)">',
    ],
)
def test_dangers_are_found(bad: str) -> None:
    """Negative controls."""
    assert dangers(bad)


def test_the_page_runs_and_fetches_nothing(page: str) -> None:
    assert not dangers(page)
    assert "://" not in re.sub(r"data:image/png;base64,[\w+/=]+", "", page)
    policies = [a["content"] or "" for t, a in Page(page).tags if a.get("http-equiv")]
    assert len(policies) == 1
    assert policies[0].startswith("default-src 'none'; style-src 'sha256-")
    assert "script-src" not in policies[0]
    style = page.split("<style>")[1].split("</style>", maxsplit=1)[0]
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
    assert f"'sha256-{digest}'" in policies[0]  # else a browser would not apply it


def test_the_page_holds_numbers_choices_and_provenance(page: str, result: Result) -> None:
    seen = Page(page).text
    for key in schema.flat(result.choices.to_mapping()):
        section = schema.split(key)[0]
        if section not in ("priors", "alternatives"):
            assert key in seen or key.rsplit(".", 1)[0] in seen, key
    for name in result.headline:
        assert str(result.choices.prior(name)) in seen
    for source in (result.source.sources if result.source else {}).values():
        assert source.sha256 in seen
    assert "ladderfit calibrate --again 'a result'" in seen  # a blank is quoted
    for host in result.ladder.hosts:
        assert host in seen
    assert "Pareto k" in seen
    for kept in result.ladder.kept.values():
        assert f"{kept.total:,}" in seen


def test_every_choice_is_listed_and_defaults_are_told_from_choices(result: Result) -> None:
    listed = {entry.key: entry for entry in entries(result.choices)}
    for key, value in schema.flat(result.choices.to_mapping()).items():
        section = schema.split(key)[0]
        if section not in ("priors", "alternatives") and value not in ([], {}):
            assert any(key == known or key.startswith(f"{known}.") for known in listed), key
    assert listed["relation.curvature"].default
    assert not listed["cepheids.columns"].default
    changed = result.choices.change({"relation.curvature": True, "relation.pivot": 12.0})
    after = {entry.key: entry for entry in entries(changed)}
    assert not after["relation.curvature"].default
    assert (after["relation.pivot"].value, after["relation.pivot"].default) == ("12", False)
    assert after["sampling.seed"].default


def test_a_stated_prior_is_marked_as_chosen(page: str, result: Result) -> None:
    assert result.choices.prior("slope") == Normal(-3.2, 0.4)
    rows = re.findall(r"<tr><td><code>(\w+)</code></td>\n<td>([^<]*)</td>\n<td>(.*?)</td>", page)
    marks = {name: Page(mark).text for name, _, mark in rows}
    assert marks["slope"] == "chosen"
    assert marks["zero_point"] == "default"


def test_doubtful_draws_are_called_so(result: Result, tmp_path: Path) -> None:
    few = draw(result.ladder, seed=1, draws=150)
    assert "fewer than 400 effective draws" in Page(written(few, tmp_path / "few")).text


def test_names_that_attack_are_only_shown(tmp_path: Path) -> None:
    attacked = draw(hostile.ladder(), seed=4, draws=400)
    text = written(attacked, tmp_path / "attacked")
    assert not dangers(text)
    seen = Page(text).text
    for name in (hostile.SCRIPT, hostile.FORMULA, hostile.SPECIALS):
        assert name in seen
    assert hostile.SCRIPT not in text


def test_symbols_become_html() -> None:
    assert html.mathtext(r"$t_\mathrm{SN}$") == "<i>t</i><sub>SN</sub>"
    assert html.mathtext(r"$\Delta M_0$") == "Δ<i>M</i><sub>0</sub>"
    assert html.unit("km/s/Mpc") == "km s<sup>−1</sup> Mpc<sup>−1</sup>"


# --- alternatives, and a report made again ------------------------------------------------


def alternatives(folder: Path) -> Path:
    """Tables such as `ladderfit alternatives` leaves, with made-up numbers."""
    folder.mkdir()
    systematics = pd.DataFrame(
        {
            "axis": ["relation.pivot", "all axes"],
            "parameter": ["slope", "slope"],
            "fits": [2, 2],
            "largest": [-0.0213, -0.0213],
            "largest_in_errors": [-1.25, -1.25],
            "of": ["=cmd()", "relation.pivot = 12"],
            "spread": [0.011, 0.011],
            "unit": ["mag/dex", "mag/dex"],
        }
    )
    budget = pd.DataFrame({"source": ["anchors", "all"], "slope": [0.1, 0.2]})
    budget["slope_share"] = [0.25, 1.0]
    for name, frame in (("systematics", systematics), ("budget", budget)):
        Table.from_pandas(frame).write(folder / f"{name}.ecsv", format="ascii.ecsv")
    return folder


def test_alternatives_enter_the_report(result: Result, tmp_path: Path) -> None:
    folder = tmp_path / "result"
    before = written(result, folder)
    assert "error budget" not in Page(before).text
    renew_report(result, folder, more=alternative_tables(alternatives(tmp_path / "tried")))
    seen = Page((folder / "report.html").read_text("utf-8")).text
    assert "Other choices, and the error budget" in seen
    assert "−0.021 −1.2" in seen  # shift in mag/dex, and in errors
    for name in ("systematics", "error_budget"):
        for suffix in ("tex", "csv", "ecsv"):
            assert (folder / "tables" / f"{name}.{suffix}").is_file()
    assert "'=cmd()" in (folder / "tables" / "systematics.csv").read_text("utf-8")
    assert not [path for path in folder.iterdir() if path.name.startswith(".")]


def test_folders_without_alternatives_are_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"systematics\.ecsv: found no such file"):
        alternative_tables(tmp_path)


def test_a_failed_report_leaves_the_old_one(result: Result, tmp_path: Path) -> None:
    folder = tmp_path / "result"
    before = written(result, folder)
    (folder / "provenance.json").write_text("{", "utf-8")
    with pytest.raises(InputError, match="provenance that cannot be read"):
        renew_report(result, folder)
    assert (folder / "report.html").read_text("utf-8") == before
    assert (folder / "tables" / "parameters.tex").is_file()


def test_a_result_without_its_tables_still_has_a_report(result: Result, tmp_path: Path) -> None:
    written(result, tmp_path / "result")
    alone = read_result(tmp_path / "result")
    assert alone.source is None  # its tables lay in memory
    renew_report(alone, tmp_path / "result")
    seen = Page((tmp_path / "result" / "report.html").read_text("utf-8")).text
    assert "missing or have changed" in seen


@pytest.mark.skipif(shutil.which("chromium") is None, reason="no chromium here")
@pytest.mark.browser
def test_a_browser_prints_the_page_without_complaint(page: str, tmp_path: Path) -> None:
    path = tmp_path / "report.html"
    path.write_text(page, "utf-8")
    done = subprocess.run(
        [
            "chromium",
            "--headless",
            "--no-sandbox",
            "--disable-gpu",
            "--enable-logging=stderr",
            "--no-pdf-header-footer",
            f"--print-to-pdf={tmp_path / 'report.pdf'}",
            path.as_uri(),
        ],
        capture_output=True,
        text=True,
        check=False,
        timeout=120,
    )
    assert (tmp_path / "report.pdf").stat().st_size > 10_000
    assert "CONSOLE" not in done.stderr, done.stderr  # a policy that stops the style would say so


@pytest.mark.parametrize("width", [plots.COLUMN, plots.WIDTH])
def test_names_that_attack_are_only_drawn(width: float) -> None:
    """Hosts as labels of figures: shown letter by letter, none read as mathematics."""
    names = {**hostile.HOSTS, "Q07": r"$\frac{a}{0}$_^%"}
    plain, tables = hostile.choices(), hostile.tables()
    for section in ("cepheids", "supernovae"):
        column = tables[section]["Galaxy"]
        tables[section]["Galaxy"] = column.replace(hostile.HOSTS["Q07"], names["Q07"])
    attacked = draw(build_ladder(plain, tables), seed=4, draws=200)
    for maker in (moduli_figure, relation_figure):
        figure = maker(attacked, width=width)
        assert figure is not None
        FigureCanvasAgg(figure).draw()
        shown = [t.get_text().replace(r"\$", "$") for t in figure.findobj(Text)]
        for name in names.values():
            assert any(name in text for text in shown), name
