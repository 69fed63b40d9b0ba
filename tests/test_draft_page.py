"""The page that settles a draft, driven in Python: values set, buttons clicked."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import pandas as pd
import pytest

pytestmark = [
    pytest.mark.filterwarnings("ignore::DeprecationWarning"),  # inside ipywidgets
]

from ladderfit.draft.example import write_example  # noqa: E402
from ladderfit.workbench.draft_page import DraftPage, Refused, settle_in_page  # noqa: E402
from ladderfit.workbench.question_box import QuestionBox  # noqa: E402

SCRIPT = "<script>alert(1)</script>"


@pytest.fixture
def page(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> DraftPage:
    monkeypatch.chdir(tmp_path)
    found = settle_in_page("my.toml", write_example("tables"))
    assert isinstance(found, DraftPage)
    return found


def box(page: DraftPage, key: str) -> QuestionBox:
    (found,) = [one for one in page.boxes if one.question.place[-1] == key]
    return found


def settle(page: DraftPage) -> None:
    for one in page.boxes:
        one.options.value = one.question.options[0]


def in_file() -> dict[str, Any]:
    return tomllib.loads(Path("my.toml").read_text(encoding="utf-8"))


def test_answers_go_into_the_file_and_the_boxes_stay(page: DraftPage) -> None:
    boxes = list(page.boxes)
    assert page.go.disabled
    assert page.ladder is None
    assert "7 questions, 0 settled" in page.head.value
    ratio = box(page, "ratio")
    assert ratio.reason.disabled
    ratio.field.value = "abc"
    assert ratio.message.value.count("<div") == 1
    assert "expected a number such as 0.39" in ratio.message.value
    ratio.field.value = "0.4"
    assert ratio.message.value == ""
    assert "lf-settled" in ratio.widget._dom_classes
    assert in_file()["cepheids"]["magnitude"]["wesenheit"]["ratio"] == 0.4
    ratio.reason.value = "measured by us"
    assert "ratio = 0.4  # measured by us" in Path("my.toml").read_text()
    ratio.options.value = ratio.question.options[0]
    assert ratio.field.value == ""
    assert ratio.reason.value == "measured by us"
    page.title.value = "Our survey"
    assert in_file()["title"] == "Our survey"
    settle(page)
    assert [id(one) for one in page.boxes] == [id(one) for one in boxes]
    assert not page.go.disabled
    assert "7 questions, 7 settled" in page.head.value
    again = settle_in_page("my.toml", sorted(Path("tables").glob("*.csv")))
    assert isinstance(again, DraftPage)
    assert [one.words.value for one in again.boxes] == [one.words.value for one in page.boxes]
    assert box(again, "ratio").reason.value == "measured by us"


def test_an_answer_that_makes_another_question_idle(page: DraftPage) -> None:
    scale, reference = box(page, "scale"), box(page, "reference")
    scale.options.value = scale.question.options[-1]
    assert "No longer asked" in reference.words.value
    assert reference.options.disabled
    scale.options.value = scale.question.options[0]
    assert "Undecided" in reference.words.value
    assert not reference.options.disabled


def test_the_workbench_opens_on_the_file(page: DraftPage) -> None:
    page.go.click()
    assert page.bench is None
    settle(page)
    page.go.click()
    assert page.bench is not None
    assert page.slot.children == (page.bench.widget,)
    assert page.bench.ladder.path == Path("my.toml")
    assert "ladderfit calibrate my.toml" in page.said.value
    box(page, "corrected").options.value = box(page, "corrected").question.options[1]
    assert "earlier answers; open it anew" in page.said.value


def test_what_does_not_fit_is_said_beside_its_question(page: DraftPage) -> None:
    settle(page)
    text = Path("my.toml").read_text()
    Path("my.toml").write_text(text.replace("error = 0.025", "error = -1.0"))
    page.go.click()
    assert page.bench is None
    assert "key anchors.geometric.Tavin.error: found -1" in box(page, "modulus").message.value
    Path("my.toml").write_text(text)
    flow = box(page, "redshift")
    (peaks,) = [one for one in flow.question.others if one.words.startswith("peak:")]
    flow.others.value = peaks
    assert flow.options.value is None
    page.go.click()
    assert page.bench is None
    assert "none of 272 rows left: 272 outside the redshift range" in page.said.value
    assert page.said.value.count("<div") == 1
    assert not page.go.disabled


def test_a_file_edited_or_taken_away(page: DraftPage) -> None:
    text = Path("my.toml").read_text()
    question = 'ratio = "undecided: 0.386 (Riess et al. 2019), or another?"'
    assert question in text
    Path("my.toml").write_text(text.replace(question, "ratio = 0.41"))
    page.again.click()
    assert box(page, "ratio").field.value == "0.41"
    Path("my.toml").unlink()
    box(page, "corrected").options.value = box(page, "corrected").question.options[0]
    assert "put it back" in box(page, "corrected").message.value


def test_tables_that_cannot_be_used(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    pd.DataFrame({SCRIPT: [1.0, 2.0], "y": ["u", "v"]}).to_csv("odd.csv", index=False)
    found = settle_in_page("my.toml", ["odd.csv", "nowhere.csv"])
    assert isinstance(found, Refused)
    assert found.ladder is None
    said = found.widget.children[1].value
    assert said.count('role="alert"') == 1  # the missing file is told first
    assert "nowhere.csv" in said
    found = settle_in_page("my.toml", ["odd.csv"])
    said = found.widget.children[-1].value
    assert SCRIPT not in said
    assert "&lt;script&gt;" in said
    assert not Path("my.toml").exists()


def test_names_from_tables_are_text(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    columns = {SCRIPT: ["a", "b"], "zA": [0.03, 0.05], "zB": [0.031, 0.051], "mB": [15.0, 16.0]}
    pd.DataFrame({**columns, "e_mB": [0.1, 0.1]}).to_csv("flow.csv", index=False)
    page = settle_in_page("my.toml", ["flow.csv"])
    assert isinstance(page, DraftPage)
    for part in (page.head, page.said, *(one.words for one in page.boxes)):
        assert SCRIPT not in part.value
    assert SCRIPT not in str(page.widget.children[0].children[3].value)
