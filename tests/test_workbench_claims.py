"""Claims of a claims file beside the live posterior."""

from __future__ import annotations

import html
import re
from pathlib import Path

import builders
import numpy as np
import pytest

pytestmark = [
    pytest.mark.filterwarnings("ignore::DeprecationWarning"),  # inside ipywidgets
]

from ladderfit.choices import Choices  # noqa: E402
from ladderfit.ladder import read_ladder  # noqa: E402
from ladderfit.ladder_file import write_choices  # noqa: E402
from ladderfit.rounding import MINUS  # noqa: E402
from ladderfit.workbench import Workbench  # noqa: E402

CLAIMS = """\
title = "Three <b>papers</b>"
[[claim]]
quantity = "slope"
value = -3.10
error = 0.05
paper = "Ottoline & Brask"
[[claim]]
quantity = "zero_point"
value = 11.60
error = 0.02
apparent = true
host = "Tavin"
pivot = 20.0
paper = "Quillon"
[[claim]]
quantity = "hubble_constant"
value = 80.0
[[claim]]
quantity = "scatter"
value = 0.07
intrinsic = true
[[claim]]
quantity = "scatter"
value = 0.12
[[claim]]
quantity = "modulus"
value = 31.2
host = "Merrow"
[[claim]]
quantity = "slope"
value = -3.2
paper = "Hallowin"
magnitude = {wesenheit = {band = "H", colour = ["V", "I"], ratio = 0.41}}
[[claim]]
quantity = "zero_point"
value = -6.3
method = {mode = "overtone"}
"""


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    made = tmp_path_factory.mktemp("ladder")
    builders.write_tables(made)
    plain = builders.choices(tables=True) | {"sampling": {"draws": 600}}
    write_choices(Choices.from_mapping(plain), made / "mine.toml")
    (made / "claims.toml").write_text(CLAIMS)
    (made / "bad_claims.toml").write_text('[[claim]]\nquantity = "slop"\nvalue = "x"\n')
    (made / "torn.toml").write_text("[[claim]\n")
    (made / "other.toml").write_text("[truth]\nslope = -3.3\n")
    return made


@pytest.fixture
def bench(folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Workbench:
    monkeypatch.chdir(tmp_path)
    made = Workbench(read_ladder(folder / "mine.toml"))
    made.bar.choose("published")
    return made


def rows(bench: Workbench) -> list[list[str]]:
    bench.bar.table.value = True
    found = re.findall(r"<tr>(.*?)</tr>", bench.frame.table.value)
    bench.bar.table.value = False
    return [[html.unescape(c) for c in re.findall(r"<td>(.*?)</td>", row)] for row in found[1:]]


def words(bench: Workbench) -> str:
    return " ".join(text.get_text() for text in bench.picture.figure.texts)


def test_claims_files_beside_the_ladder_are_offered(bench: Workbench) -> None:
    """Those in which claims stand, good or bad; other files and the ladder's own are not."""
    names = [name for name, _ in bench.bar.claims.options]
    assert names == ["claims file ...", "bad_claims.toml", "claims.toml", "torn.toml"]
    assert bench.bar.claims.layout.display == ""
    assert "Pick a claims file above" in words(bench)
    bench.bar.choose("relation")
    assert bench.bar.claims.layout.display == "none"


def test_shifts_are_those_of_the_posterior_on_show(bench: Workbench) -> None:
    """Held against sums over the draws written out; a change of choices moves them."""
    bench.bar.claims.value = "claims.toml"
    assert "went wrong" not in bench.foot.trust.value
    before = rows(bench)
    for changed in (False, True):
        if changed:
            bench.change({"cepheids.periods": [12.0, 100.0]})
        found, draws = rows(bench), bench.result.draws
        level = draws["zero_point"] + np.log10(2.0) * draws["slope"] + draws["modulus[Tavin]"]
        expected = [
            (-3.10 - draws["slope"].mean()) / np.hypot(0.05, draws["slope"].std()),
            (11.60 - level.mean()) / np.hypot(0.02, level.std()),
            (80.0 - draws["hubble_constant"].mean()) / draws["hubble_constant"].std(),
            (0.07 - draws["scatter"].mean()) / draws["scatter"].std(),
        ]
        assert [float(row[1].replace(MINUS, "-")) for row in found] == pytest.approx(
            expected, abs=0.0501
        )
    assert found != before
    assert found[1][0] == "apparent magnitude at 20 d of Tavin [mag]"
    assert found[1][2] == "11.60 ± 0.02"  # with the digits of the paper
    assert found[1][4] == "Quillon"
    bars = bench.picture.figure.axes[0].containers
    assert len(bars) == 2 * len(expected)


def test_claims_of_what_the_ladder_does_not_have_say_so(bench: Workbench) -> None:
    bench.bar.claims.value = "claims.toml"
    bench.bar.table.value = True
    text = html.unescape(re.sub(r"<(?!b>papers)[^>]*>", "\n", bench.frame.table.value))
    assert "Three <b>papers</b>" in text
    assert "<b>papers" not in bench.frame.table.value  # escaped
    left = text.split("Not compared")[1]
    assert "distance modulus of Merrow, 31.2 mag: the ladder has no host Merrow." in left
    assert "scatter, 0.12 mag: a scatter with errors in it is of the paper's own stars" in left
    assert "Hallowin" in left
    assert "the claim has the Wesenheit ratio 0.41, the ladder file 0.386" in left
    assert "overtone pulsators, which have no line of their own in the ladder" in left
    bench.change({"supernovae": None, "expansion": None})
    assert bench.session.trouble is None, bench.foot.trust.value
    text = html.unescape(bench.frame.table.value)
    assert "80.0 km/s/Mpc: the ladder has no expansion." in text


def test_a_bad_file_gives_one_line_for_each_problem(bench: Workbench, folder: Path) -> None:
    bench.bar.claims.value = "bad_claims.toml"
    bench.bar.table.value = True
    text = bench.frame.table.value
    assert text.count('class="lf-bad"') == 2
    assert "claim[1].quantity" in text
    assert "bad_claims.toml" in text
    assert str(folder) not in text
    bench.bar.table.value = False
    assert "claim[1].value" in words(bench)
    assert "claim[1].value" in bench.foot.trust.value
    bench.bar.claims.value = "torn.toml"
    assert "a syntax error" in words(bench)
    (folder / "gone_claims.toml").write_text(CLAIMS)
    bench.frame.show()
    bench.bar.claims.value = "gone_claims.toml"
    assert len(rows(bench)) == 4
    (folder / "gone_claims.toml").unlink()
    bench.frame.show()
    assert "no such file" in words(bench)
    bench.bar.claims.value = ""
    assert "No published value yet" in words(bench)
    assert "went wrong" not in bench.foot.trust.value


def test_a_file_that_changes_is_read_again_and_costs_nothing_elsewhere(
    bench: Workbench, folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = folder / "later_claims.toml"
    path.write_text('[[claim]]\nquantity = "slope"\nvalue = -3.1\n')
    bench.frame.show()
    bench.bar.claims.value = path.name
    assert rows(bench)[0][2] == f"{MINUS}3.1"
    path.write_text('[[claim]]\nquantity = "slope"\nvalue = -3.12345\n')
    bench.frame.show()
    assert rows(bench)[0][2] == f"{MINUS}3.12345"
    path.unlink()
    bench.bar.choose("relation")

    def never(*_: object) -> None:
        raise AssertionError("a view that is closed was worked on")

    monkeypatch.setattr(bench.frame.claims, "beside", never)
    monkeypatch.setattr(bench.frame.claims, "offered", never)
    bench.change({"cepheids.periods": [8.0, 100.0]})
    assert "went wrong" not in bench.foot.trust.value


def test_entered_values_stand_with_the_claims(bench: Workbench) -> None:
    bench.bar.claims.value = "claims.toml"
    bench.bar.table.value = True
    assert bench.entry.name.value == "slope"
    bench.entry.value.value = "-3.26"
    bench.entry.button.click()
    found = rows(bench)
    assert (found[0][2], found[0][4]) == (f"{MINUS}3.26", "entered here")
    assert len(found) == 5


def test_the_picked_file_outlives_the_kernel(bench: Workbench) -> None:
    bench.bar.claims.value = "claims.toml"
    bench.shelf.keeper.flush()
    left = bench.shelf.keeper.left()
    assert left is not None
    assert (left.view, left.claims) == ("published", "claims.toml")
