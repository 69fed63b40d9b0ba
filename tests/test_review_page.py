"""The referee's page, the figures, the command and the folder it makes."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from review_papers import CEPHEIDS, table

import ladderfit as lf
from ladderfit.cli import main
from ladderfit.ladder import Ladder
from ladderfit.plots.review import review_figure
from ladderfit.review import Review, claims_from, read_claims, review
from ladderfit.review.page import html_page, markdown_page
from ladderfit.shipped import sample_ladder, shipped

CLAIMS = shipped("sample_data") / "claims.toml"
UGLY = '<script>alert("x")</script> | *b* $x$ [c](d)'


@pytest.fixture(scope="module")
def found() -> Review:
    return review(lf.read_ladder(sample_ladder()), read_claims(CLAIMS), draws=400)


def test_verdicts_on_the_sample(found: Review) -> None:
    assert [each.names for each in found.claims] == [
        ("reproduced as described",),
        ("stated at another pivot",),
        ("reproduced only under a choice not stated",),
        ("reproduced only under a choice not stated",),
        ("reproduced as described", "its error is too small"),
        ("cannot be judged from this table",),
    ]
    assert "1 cannot be judged from this table" in repr(found)
    assert found.summary().count("\n  ") == 7  # a line for each verdict


def test_the_page_says_everything_in_both_forms(found: Review) -> None:
    for page in (html_page(found), markdown_page(found).replace("\\", "")):
        for each in found.claims:
            assert each.claim.printed in page
            for refit in each.refits:
                assert refit.words in page
        assert "What it rests on" in page
        assert "have to go for the value to move by one of its errors" in page
        assert "SHA-256" in page


@pytest.fixture(scope="module")
def small() -> Ladder:
    """One galaxy and nothing else."""
    stars = table(np.random.default_rng(2)).iloc[:40]
    stars.loc[stars.index[:3], "ID"] = [f"{UGLY}{n}" for n in range(3)]
    return lf.build_ladder({"title": UGLY, "cepheids": CEPHEIDS}, {"cepheids": stars})


ONE = {"title": UGLY, "claim": [{"quantity": "slope", "value": -3.3, "error": 0.1, "paper": UGLY}]}


def test_text_from_files_is_escaped(small: Ladder) -> None:
    made = review(small, claims_from(ONE), draws=0)
    page = html_page(made, {1: b"PNG"})
    assert "<script" not in page
    assert "&lt;script&gt;" in page
    assert page.count("<img") == 1
    assert "default-src 'none'" in page
    assert "http-equiv" in page
    assert "hierarchical fit</td>" not in page
    lines = markdown_page(made).splitlines()
    assert not any("<script" in line.replace("\\<", "") for line in lines)
    widths = {line.replace("\\|", "").count("|") for line in lines if line.startswith("|")}
    assert widths == {5, 9, 8, 3}  # every row of a table has the cells of its head


def test_figures(found: Review) -> None:
    first, pivot, *_, refused = found.claims
    figure = review_figure(first)
    listed, low, high = figure.axes
    labels = [tick.get_text() for tick in listed.get_yticklabels()]
    assert labels[0] == "weights: none"
    assert "hierarchical" in labels
    assert "modes overtone" in labels
    assert listed.get_xlabel() == "slope [mag/dex]"
    assert low.get_xlabel() == "Shortest period [d]"
    assert [tick.get_text() for tick in high.get_xticklabels()][-1] == "none"
    left, right = listed.get_xlim()
    assert all(left < refit.value - refit.spread for refit in first.refits)
    assert all(refit.value + refit.spread < right for refit in first.refits)
    away = review_figure(pivot).axes[0]  # a claim far off is pointed at
    assert any("claim 15.868" in text.get_text() for text in away.texts)
    assert not any("claim" in text.get_text() for text in listed.texts)
    assert review_figure(refused) is None


def test_the_command(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out, claims = tmp_path / "made", tmp_path / "claims.toml"
    head, first, second, *_, refused = CLAIMS.read_text(encoding="utf-8").split("[[claim]]")
    claims.write_text("[[claim]]".join([head, first, second, refused]), encoding="utf-8")
    assert main(["review", str(sample_ladder()), str(claims), "--out", str(out)]) == 0
    told = capsys.readouterr()
    assert "reproduced as described: −3.2502 ± 0.0228 mag/dex from 105 stars" in told.out
    assert told.out.rstrip().endswith(f"Written to {out}")
    assert told.err == ""
    names = {str(path.relative_to(out)) for path in out.rglob("*") if path.is_file()}
    figures = {f"figures/claim-{n:02d}.{kind}" for n in (1, 2) for kind in ("png", "pdf")}
    assert names == {"review.html", "review.md", "verdicts.json", *figures}
    page = (out / "review.html").read_text(encoding="utf-8")
    assert page.count("data:image/png;base64,") == 2
    assert "![" in (out / "review.md").read_text(encoding="utf-8")
    verdicts = json.loads((out / "verdicts.json").read_text(encoding="utf-8"))
    assert verdicts["claims"][1]["verdicts"][0]["name"] == "stated at another pivot"
    # The folder is there: refused in one line, and nothing is touched.
    assert main(["review", str(sample_ladder()), str(claims), "--out", str(out)]) == 2
    assert "nothing is overwritten" in capsys.readouterr().err


def test_the_command_tells_each_problem(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    bad = tmp_path / "bad.toml"
    bad.write_text('[[claim]]\nquantity = "slope"\nvalu = 1\n', encoding="utf-8")
    assert main(["review", str(sample_ladder()), str(bad)]) == 2
    lines = capsys.readouterr().err.splitlines()
    assert len(lines) == 2
    assert all(line.startswith("ladderfit: ") for line in lines)
    assert main(["review", str(tmp_path / "none.toml"), str(CLAIMS)]) == 2
    assert "no such file" in capsys.readouterr().err
    assert list(tmp_path.iterdir()) == [bad]


def test_same_seed_same_page(small: Ladder) -> None:
    first, again, other = (
        markdown_page(review(small, claims_from(ONE), draws=400, seed=seed)) for seed in (1, 1, 2)
    )
    assert first == again
    assert first != other
