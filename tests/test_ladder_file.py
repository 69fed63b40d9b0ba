"""The ladder file: read, written, and written into with its comments alive."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import pytest
from builders import choices
from hypothesis import HealthCheck, given, settings
from test_choices import changes

from ladderfit.choices import Choices
from ladderfit.errors import InputError, LadderfitError
from ladderfit.ladder_file import as_written, read_choices, write_choices

COMMENTED = """\
# A ladder of invented galaxies.
title = "Commented ladder"   # the title

[cepheids]                   # stars in galaxies
table   = "cepheids.csv"
columns = {star = "ID", host = "Galaxy", period = "P", metallicity = "OH", mode = "Mode"}
periods = [5.0, 100.0]       # d
# stars left out
set_aside = [
    {star = "Q07-030", reason = "blended"},   # seen by eye
    {star = "Q07-031", reason = "crowded"},   # doubtful
]

[cepheids.magnitude]
wesenheit = {band = "H", colour = ["V", "I"], ratio = 0.386}   # the index
bands     = {H = "Hmag", V = "Vmag", I = "Imag"}     # mag
errors    = {H = "e_H",  V = "e_V",  I = "e_I"}

[relation]
pivot = 10.0                 # d
metallicity = {reference = 8.69, scale = "12+log(O/H)"}   # the term

# Anchors: one so far.
[anchors.geometric.Tavin]
modulus = 18.49              # mag
error   = 0.025
use     = true               # switch

[anchors.geometric."N 42.5"] # a dot in its name
modulus = 29.4
error   = 0.03

[priors]
slope = {normal = [-3.3, 0.5]}   # mag/dex

[alternatives]
"cepheids.periods" = [[10.0, 100.0], [5.0, 60.0]]   # cuts
"""
COMMENTS = [line.split("#", 1)[1].strip() for line in COMMENTED.splitlines() if "#" in line]


@pytest.fixture
def commented(tmp_path: Path) -> Path:
    path = tmp_path / "ladder.toml"
    path.write_text(COMMENTED, encoding="utf-8")
    return path


def lines_changed(path: Path) -> tuple[set[str], set[str]]:
    """Lines of the commented file that are gone, and lines that are new."""
    before, after = COMMENTED.splitlines(), path.read_text(encoding="utf-8").splitlines()
    return set(before) - set(after), set(after) - set(before)


def test_nothing_changed_nothing_touched(commented: Path) -> None:
    write_choices(read_choices(commented), commented)
    assert commented.read_text(encoding="utf-8") == COMMENTED


def test_one_value(commented: Path) -> None:
    write_choices(read_choices(commented).change({"cepheids.periods": [10, 100]}), commented)
    gone, new = lines_changed(commented)
    assert gone == {"periods = [5.0, 100.0]       # d"}
    assert new == {"periods = [10.0, 100.0]       # d"}


def test_inside_an_inline_table(commented: Path) -> None:
    changed = read_choices(commented).change({"cepheids.magnitude.wesenheit.ratio": 0.4})
    write_choices(changed, commented)
    _, new = lines_changed(commented)
    assert new == {
        'wesenheit = {band = "H", colour = ["V", "I"], ratio = 0.4}   # the index',
    }


def test_a_switch_and_a_quoted_name(commented: Path) -> None:
    wanted = {"anchors.geometric.Tavin.use": False, 'anchors.geometric."N 42.5".error': 0.04}
    write_choices(read_choices(commented).change(wanted), commented)
    _, new = lines_changed(commented)
    assert new == {"use     = false               # switch", "error   = 0.04"}


def test_a_default_is_written_only_once_it_differs(commented: Path) -> None:
    write_choices(read_choices(commented).change({"sampling.draws": 500}), commented)
    gone, new = lines_changed(commented)
    assert not gone
    assert new == {"[sampling]", "draws = 500"}


def test_an_entry_more_in_a_list(commented: Path) -> None:
    before = read_choices(commented)
    entries = before.value("cepheids.set_aside")
    wanted = {"cepheids.set_aside": [*entries, {"star": "Q07-032", "reason": "faint"}]}
    write_choices(before.change(wanted), commented)
    gone, new = lines_changed(commented)
    assert not gone
    assert [line.strip() for line in new] == ['{reason = "faint", star = "Q07-032"},']


def test_an_entry_less_in_a_list(commented: Path) -> None:
    before = read_choices(commented)
    entries = before.value("cepheids.set_aside")
    write_choices(before.change({"cepheids.set_aside": entries[:1]}), commented)
    text = commented.read_text(encoding="utf-8")
    assert "Q07-031" not in text
    assert '{star = "Q07-030", reason = "blended"},   # seen by eye' in text


def test_sections_come_and_go(commented: Path) -> None:
    before = read_choices(commented)
    wanted = {
        "expansion.intercept": {"value": 0.7, "error": 0.002},
        "anchors.geometric.Tavin": None,
        "relation.metallicity": "none",
        "priors.slope": {"fixed": -3.3},
    }
    write_choices(before.change(wanted), commented)
    text = commented.read_text(encoding="utf-8")
    assert 'metallicity = "none"   # the term' in text
    assert "slope = {fixed = -3.3}   # mag/dex" in text
    assert "Tavin" not in text
    write_choices(before, commented)
    assert read_choices(commented) == before


@given(wanted=changes())
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=40)
def test_new_file_there_and_back(tmp_path: Path, wanted: dict[str, Any]) -> None:
    path = tmp_path / "new.toml"
    path.unlink(missing_ok=True)
    written = Choices.from_mapping(choices(tables=True)).change(wanted)
    write_choices(written, path)
    assert read_choices(path) == written


@given(wanted=changes())
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=50)
def test_commented_file_there_and_back(tmp_path: Path, wanted: dict[str, Any]) -> None:
    path = tmp_path / "ladder.toml"
    path.write_text(COMMENTED, encoding="utf-8")
    before = read_choices(path)
    absent = {"anchors.parallaxes.use", "expansion.q0", "expansion.redshifts"}
    wanted = {key: value for key, value in wanted.items() if key not in absent}
    after = before.change(wanted)
    write_choices(after, path)
    assert read_choices(path) == after
    untouched = {"cepheids", "relation", "anchors", "priors", "alternatives", "title"} - {
        key.split(".")[0] for key in wanted
    }
    text = path.read_text(encoding="utf-8")
    if {"cepheids", "anchors", "relation", "priors", "alternatives", "title"} == untouched:
        assert all(comment in text for comment in COMMENTS)
    write_choices(before, path)
    assert read_choices(path) == before


def test_infinite_bounds(tmp_path: Path) -> None:
    path = tmp_path / "a.toml"
    write_choices(Choices.from_mapping(choices(tables=True)), path)
    mapping = tomllib.loads(path.read_text(encoding="utf-8"))
    assert mapping["anchors"]["parallaxes"]["periods"] == [0.0, float("inf")]


def test_another_file_is_not_overwritten(tmp_path: Path) -> None:
    path = tmp_path / "pyproject.toml"
    path.write_text('[project]\nname = "x"\n')
    with pytest.raises(InputError, match=r"pyproject.toml, key project: found an unknown key"):
        write_choices(Choices.from_mapping(choices(tables=True)), path)
    assert path.read_text() == '[project]\nname = "x"\n'


def test_what_does_not_read_back_is_not_written(
    commented: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    changed = read_choices(commented).change({"relation.pivot": 6.0})
    monkeypatch.setattr("ladderfit.ladder_file._update", lambda *_: None)
    with pytest.raises(LadderfitError, match="do not read back as written"):
        write_choices(changed, commented)
    assert commented.read_text(encoding="utf-8") == COMMENTED


def problem_of(path: Path) -> str:
    with pytest.raises(InputError) as caught:
        read_choices(path)
    return str(caught.value)


def test_syntax_error_names_the_line(tmp_path: Path) -> None:
    path = tmp_path / "a.toml"
    path.write_text('title = "x"\n[cepheids]\nperiods = [5.0, \n')
    words = problem_of(path)
    assert words.startswith(f"{path}: found a syntax error: ")
    assert "line 4" in words or "end of document" in words
    path.write_text('title = "x"\n[cepheids\nperiods = 1\n')
    assert "line 2" in problem_of(path)


def test_no_text(tmp_path: Path) -> None:
    path = tmp_path / "a.toml"
    path.write_bytes(b"title = \xff\n")
    assert problem_of(path) == (
        f"{path}: found bytes that are not UTF-8 text; expected a ladder file; "
        "save the file as UTF-8"
    )


def test_no_file_and_folder(tmp_path: Path) -> None:
    assert "found no such file; expected a ladder file; correct the path" in problem_of(
        tmp_path / "b.toml"
    )
    assert "found a folder; expected a ladder file" in problem_of(tmp_path)


def test_deep_nesting_is_an_ordinary_problem(tmp_path: Path) -> None:
    path = tmp_path / "a.toml"
    path.write_text("title = " + "[" * 5000 + "]" * 5000)
    assert "found" in problem_of(path)


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (None, "(absent)"),
        (True, "true"),
        (5.0, "5"),
        (0.1 + 0.2, "0.3"),
        (float("inf"), "inf"),
        ([5.0, 100], "[5, 100]"),
        ({"star": "a", "x.y": 1}, '{star = "a", "x.y" = 1}'),
        ("none", '"none"'),
    ],
)
def test_short_forms(value: Any, text: str) -> None:
    assert as_written(value) == text
