"""Claims files: digits, what is shared, and the wording of every problem."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from ladderfit.errors import InputError
from ladderfit.review import claims_from, read_claims
from ladderfit.shipped import shipped

TEXT = """
title = "Two papers"
paper = "Quillon"
system = "S1"

[magnitude]
wesenheit = {band = "H", colour = ["V", "I"], ratio = 0.386}

[method]
hosts = ["Tavin"]
clip = 3.0

[[claim]]
quantity = "zero_point"
value = 12.70
error = 0.02
apparent = true

[[claim]]
quantity = "hubble_constant"
value = 73
error = 1e0
paper = "Osk"
magnitude = {band = "H"}
method = {clip = 2.5, periods = [5, inf]}
"""


@pytest.fixture
def file(tmp_path: Path) -> Path:
    path = tmp_path / "claims.toml"
    path.write_text(TEXT, encoding="utf-8")
    return path


def test_digits_are_those_of_the_file(file: Path) -> None:
    first, second = read_claims(file).claims
    assert (first.decimals, first.error_decimals) == (2, 2)  # the zero of 12.70 counts
    assert first.printed == "12.70 ± 0.02 mag"
    assert first.half_unit == pytest.approx(0.005)
    assert (second.decimals, second.error_decimals) == (0, 0)
    assert second.printed == "73 ± 1 km/s/Mpc"


def test_what_stands_before_the_claims_holds_for_all(file: Path) -> None:
    claims = read_claims(file)
    first, second = claims.claims
    assert claims.system == "S1"
    assert (first.paper, second.paper) == ("Quillon", "Osk")
    assert (first.method.clip, second.method.clip) == (3.0, 2.5)
    assert second.method.hosts == ("Tavin",)
    assert second.method.periods == (5.0, float("inf"))
    assert first.magnitude.wesenheit is not None
    assert second.magnitude.wesenheit is None  # replaced by the band, not added to it
    assert second.magnitude.band == "H"


def test_a_mapping_keeps_the_digits_of_python() -> None:
    (claim,) = claims_from({"claim": [{"quantity": "slope", "value": -3.31}]}).claims
    assert claim.decimals == 2
    assert claim.printed == "−3.31 mag/dex"
    (exact,) = claims_from({"claim": [{"quantity": "slope", "value": -3.3, "decimals": 3}]}).claims
    assert exact.printed == "−3.300 mag/dex"


SLOPE = {"quantity": "slope", "value": -3.3}


def problems(*entries: Any, **head: Any) -> list[str]:
    with pytest.raises(InputError) as caught:
        claims_from({**head, "claim": list(entries)})
    return [str(problem) for problem in caught.value.problems]


@pytest.mark.parametrize(
    ("entry", "words"),
    [
        ({**SLOPE, "eror": 0.1}, "key claim[1].eror: found an unknown key"),
        ({"quantity": "slope"}, "key claim[1].value: found nothing; expected the published value"),
        ({**SLOPE, "quantity": "slop"}, "did you mean 'slope'?"),
        ({**SLOPE, "value": "-3.3"}, "key claim[1].value: found '-3.3'; expected a finite number"),
        ({**SLOPE, "error": 0.0}, "key claim[1].error: found 0; expected an error above 0"),
        ({**SLOPE, "stars": 0}, "key claim[1].stars: found 0; expected 1 or more"),
        ({**SLOPE, "pivot": 0.0}, "key claim[1].pivot: found 0; expected a period in days"),
        ({**SLOPE, "apparent": True}, "key claim[1].apparent: found apparent = true for a slope"),
        ({**SLOPE, "intrinsic": True}, "key claim[1].intrinsic"),
        (
            {"quantity": "zero_point", "value": 12.7},
            "found an absolute magnitude of 12.7; expected one below 3 mag, or an apparent "
            "magnitude marked as such; add apparent = true",
        ),
        ({"quantity": "modulus", "value": 18.5}, "key claim[1].host: found nothing"),
        ({"quantity": "scatter", "value": -0.1}, "key claim[1].value: found -0.1"),
        ({**SLOPE, "method": {"clip": 0.0}}, "key claim[1].method.clip: found 0"),
        ({**SLOPE, "method": {"periods": [9.0, 5.0]}}, "key claim[1].method.periods"),
        ({**SLOPE, "method": {"fixed": {"slop": 1.0}}}, "key claim[1].method.fixed"),
        ({**SLOPE, "method": {"break": -1.0}}, "key claim[1].method.break"),
        (
            {**SLOPE, "method": {"fit": "both errors", "weights": "none"}},
            "key claim[1].method.weights: found a line with both errors, yet no weights",
        ),
        (
            {**SLOPE, "transformation": {"slope": 0.1}},
            "key claim[1].transformation.source: found nothing; expected where the "
            "transformation comes from",
        ),
        (
            {"quantity": "scatter", "value": 0.1, "transformation": {"source": "x"}},
            "key claim[1].transformation: found a transformation of a scatter",
        ),
        (
            {
                **SLOPE,
                "magnitude": {"band": "H", "wesenheit": {"band": "H", "colour": "C", "ratio": 1}},
            },
            "key claim[1].magnitude: found both band and wesenheit",
        ),
        (7, "key claim[1]: found 7; expected a table of keys"),
        ({**SLOPE, "value": "undecided: which?"}, "expected a decision"),
    ],
)
def test_each_problem_has_its_words(entry: Any, words: str) -> None:
    (line,) = problems(entry)
    assert words in line


def test_every_problem_is_told_at_once() -> None:
    lines = problems({"quantity": "slope"}, {**SLOPE, "stars": -1}, ttle="x")
    assert len(lines) == 3
    assert any("claim[2].stars" in line for line in lines)


def test_no_claim() -> None:
    (line,) = problems()
    assert line == (
        "key claim: found nothing; expected one [[claim]] or more; "
        "add [[claim]] with quantity and value"
    )


@pytest.mark.parametrize(
    ("text", "words"),
    [(None, "found no such file"), (b"\xff", "not UTF-8"), (b"a = ", "found a syntax error")],
)
def test_files_that_cannot_be_read(tmp_path: Path, text: bytes | None, words: str) -> None:
    path = tmp_path / "claims.toml"
    if text is not None:
        path.write_bytes(text)
    with pytest.raises(InputError, match=words) as caught:
        read_claims(path)
    assert str(path) in str(caught.value)


def test_the_sample_has_claims() -> None:
    claims = read_claims(shipped("sample_data") / "claims.toml")
    assert len(claims.claims) == 6
    assert claims.claims[4].method.words == (
        "least squares (not stated); no weights; 5 to 60 d; fundamental mode; hosts Tavin; "
        "no metallicity term"
    )
