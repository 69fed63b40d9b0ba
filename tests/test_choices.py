"""Choices: checked, frozen, written back, changed by dotted keys, compared."""

from __future__ import annotations

import dataclasses
from typing import Any

import numpy as np
import pytest
from builders import choices
from hypothesis import given
from hypothesis import strategies as st

from ladderfit import schema
from ladderfit.choices import Choices
from ladderfit.errors import InputError
from ladderfit.priors import HalfNormal, LogNormal, Normal


def small() -> Choices:
    return Choices.from_mapping(choices(tables=True))


NUMBERS = st.floats(-1e6, 1e6)
WIDTHS = st.floats(1e-3, 1e3)
PRIORS = st.one_of(
    st.tuples(NUMBERS, WIDTHS).map(lambda p: {"normal": list(p)}),
    WIDTHS.map(lambda scale: {"half_normal": scale}),
    st.tuples(WIDTHS, WIDTHS).map(lambda p: {"log_normal": list(p)}),
    st.tuples(NUMBERS, WIDTHS).map(lambda p: {"uniform": [p[0], p[0] + p[1]]}),
    NUMBERS.map(lambda value: {"fixed": value}),
)
NAMES = st.text(st.characters(exclude_categories=("C", "Z")), min_size=1, max_size=12)
CHANGES: dict[str, st.SearchStrategy[Any]] = {
    "title": st.text(st.characters(exclude_categories=("C",)), max_size=30),
    "cepheids.periods": st.tuples(st.floats(0, 9), st.floats(10, 400)).map(list),
    "cepheids.magnitude.wesenheit.ratio": st.floats(0.0, 5.0),
    "cepheids.magnitude.wesenheit.colour": st.sampled_from([["V", "I"], ["V", "H"], "V"]),
    "cepheids.set_aside": st.lists(
        st.fixed_dictionaries({"star": NAMES, "reason": NAMES}, optional={"host": NAMES}),
        max_size=4,
    ),
    "relation.pivot": st.floats(0.1, 100.0),
    "relation.metallicity": st.sampled_from(["none", {"reference": 0.0, "scale": "[Fe/H]"}]),
    "anchors.geometric": st.dictionaries(
        NAMES,
        st.fixed_dictionaries(
            {"modulus": st.floats(0.0, 40.0), "error": WIDTHS, "use": st.booleans()}
        ),
        max_size=3,
    ),
    "anchors.parallaxes": st.just(None),
    "anchors.parallaxes.use": st.booleans(),
    "hosts.distance_prior": st.sampled_from(["flat in modulus", "uniform in volume"]),
    "supernovae": st.just(None),
    "expansion.q0": st.floats(-2.0, 2.0),
    "expansion.redshifts": st.sampled_from([[0.0, 0.1], [0.01, float("inf")]]),
    "priors.slope": PRIORS,
    "priors.zero_point": PRIORS,
    "sampling.draws": st.integers(100, 10_000_000),
    "sampling.seed": st.integers(0, 2**31),
    "alternatives": st.sampled_from(
        [{"cepheids.periods": [[10.0, 100.0], [5.0, 60.0]]}, {"relation.metallicity": ["none"]}]
    ),
}


@st.composite
def changes(draw: st.DrawFn) -> dict[str, Any]:
    keys = draw(st.lists(st.sampled_from(sorted(CHANGES)), unique=True, max_size=6))
    if "anchors.parallaxes" in keys:
        keys = [key for key in keys if key != "anchors.parallaxes.use"]
    return {key: draw(CHANGES[key]) for key in keys}


@given(changes())
def test_mapping_there_and_back(wanted: dict[str, Any]) -> None:
    changed = small().change(wanted)
    again = Choices.from_mapping(changed.to_mapping())
    assert again == changed
    assert again.to_mapping() == changed.to_mapping()


@given(changes())
def test_change_there_and_back(wanted: dict[str, Any]) -> None:
    before = small()
    mapping = before.to_mapping()

    def value_before(key: str) -> Any:
        found: Any = mapping
        for part in schema.split(key):
            found = found.get(part) if isinstance(found, dict) else None
        return found

    changed = before.change(wanted)
    back = changed.change({key: value_before(key) for key in wanted})
    assert back == before
    assert back.difference(before) == {}


@given(changes())
def test_difference_names_what_was_changed(wanted: dict[str, Any]) -> None:
    before = small()
    after = before.change(wanted)
    difference = after.difference(before)
    for key, (old, new) in difference.items():
        assert old != new
        assert any(key == change or key.startswith(change + ".") for change in wanted)
    assert {k: (b, a) for k, (a, b) in before.difference(after).items()} == difference


@given(st.lists(st.text(max_size=6), min_size=1, max_size=4))
def test_dotted_keys_there_and_back(parts: list[str]) -> None:
    dotted = ""
    for part in parts:
        dotted = schema.join(dotted, part) if dotted else schema.join("", part)
    assert schema.split(dotted) == parts


def test_a_host_with_a_dot_is_quoted() -> None:
    plain = choices(tables=True)
    plain["anchors"]["geometric"]["N 42.5"] = {"modulus": 29.4, "error": 0.03}
    changed = Choices.from_mapping(plain).change({'anchors.geometric."N 42.5".use': False})
    assert changed.anchors.geometric["N 42.5"].use is False
    assert changed.value('anchors.geometric."N 42.5".error') == 0.03


def test_a_change_is_a_copy() -> None:
    before = small()
    after = before.change({"relation.pivot": 6.0})
    assert (before.relation.pivot, after.relation.pivot) == (10.0, 6.0)
    with pytest.raises(dataclasses.FrozenInstanceError):
        before.title = "x"  # type: ignore[misc]


def test_numpy_numbers_are_welcome() -> None:
    changed = small().change(
        {
            "relation.pivot": np.float64(6.0),
            "sampling.seed": np.int64(7),
            "cepheids.periods": np.array([6.0, 60.0]),
            "anchors.geometric.Tavin.use": np.bool_(False),
        }
    )
    assert changed.cepheids is not None
    assert changed.cepheids.periods == (6.0, 60.0)
    assert changed.sampling.seed == 7
    assert changed.anchors.geometric["Tavin"].use is False


def test_priors_in_force() -> None:
    changed = small().change(
        {"priors.slope": {"normal": [-3.2, 0.1]}, "priors.scatter": HalfNormal(0.1)}
    )
    assert changed.prior("slope") == Normal(-3.2, 0.1)
    assert changed.prior("scatter[Q07]") == HalfNormal(0.1)
    assert isinstance(changed.prior("hubble_constant"), LogNormal)
    assert changed.states_prior("slope")
    assert not changed.states_prior("hubble_constant")
    with pytest.raises(KeyError):
        changed.prior("modulus[Tavin]")


def test_defaults_are_written() -> None:
    mapping = Choices.from_mapping(
        {"expansion": {"intercept": {"value": 0.71, "error": 0.002}}}
    ).to_mapping()
    assert mapping["sampling"] == {"sampler": "direct", "draws": 4000, "seed": 1}
    assert mapping["expansion"]["q0"] == -0.55


def test_unknown_value() -> None:
    with pytest.raises(KeyError):
        small().value("cepheids.nothing")


BAD_CHANGES: list[tuple[dict[str, Any], str]] = [
    (
        {"cepheids.periods": [100, 5]},
        "key cepheids.periods: found [100, 5]; "
        "expected a lower and a higher bound in days; swap or correct the bounds",
    ),
    (
        {"cepheids.periods": "all"},
        "key cepheids.periods: found 'all'; "
        "expected a list of 2: shortest and longest period [d]; correct the value",
    ),
    (
        {"cepheids.overtones": "Drop"},
        "key cepheids.overtones: found 'Drop'; expected one of 'drop' ... did you mean 'drop'?",
    ),
    (
        {"anchors.geometric.Tavin.use": "no"},
        "key anchors.geometric.Tavin.use: found 'no'; "
        "expected true or false (whether the anchor takes part); correct the value",
    ),
    (
        {"anchors.geometric.Tavin.modulus": float("inf")},
        "key anchors.geometric.Tavin.modulus: found inf; "
        "expected a finite number (distance modulus [mag]); correct the value",
    ),
    (
        {"anchors.geometric.Tavin.error": 0.0},
        "key anchors.geometric.Tavin.error: found 0; "
        "expected an error above 0 mag; give the standard error",
    ),
    (
        {"anchors.geometric.Tavn.use": False},
        "key anchors.geometric.Tavn.use: found a key of something that is not there; "
        "expected a known key, or all keys of a new entry; "
        "did you mean 'anchors.geometric.Tavin.use'?",
    ),
    (
        {"relation.pivot": -1.0},
        "key relation.pivot: found -1; expected a period in days; write 10.0, say",
    ),
    (
        {"priors.slop": {"normal": [0.0, 1.0]}},
        "key priors.slop: found an unknown parameter; expected one of slope, zero_point, ... "
        "did you mean 'slope'?",
    ),
    (
        {"priors.slope": {"norml": [0.0, 1.0]}},
        "key priors.slope: found the family 'norml'; expected a prior such as "
        "{normal = [mean, sd]}, {half_normal = sd}, {log_normal = [median, sd in mag]}, "
        "{uniform = [low, high]} or {fixed = value}; correct the prior",
    ),
    (
        {"sampling.draws": 5},
        "key sampling.draws: found 5; expected 100 to 10,000,000 draws; write 4000, say",
    ),
    (
        {"alternatives": {"cepheids.periods": [[9.0, 1.0]]}},
        'key alternatives."cepheids.periods": found [9, 1]; '
        "expected a lower and a higher bound in days; swap or correct the bounds",
    ),
    (
        {"cepheids.columns": {"star": "ID", "host": "Galaxy", "period": "P", "metalicity": "OH"}},
        "key cepheids.columns.metalicity: found an unknown role; expected one of host, star, ... "
        "did you mean 'metallicity'?",
    ),
    (
        {"cepheids.set_aside": [{"reason": "blended"}]},
        "key cepheids.set_aside: found no name; expected star = NAME for a Cepheid or "
        "name = NAME for a supernova or host = NAME for all in a galaxy; name one object",
    ),
]


@pytest.mark.parametrize(
    ("wanted", "words"), BAD_CHANGES, ids=[next(iter(c)) for c, _ in BAD_CHANGES]
)
def test_words_of_a_bad_change(wanted: dict[str, Any], words: str) -> None:
    with pytest.raises(InputError) as caught:
        small().change(wanted)
    start, _, end = words.partition(" ... ")  # between them a list that may grow
    lines = str(caught.value).splitlines()
    assert any(line.startswith(start) and line.endswith(end or start) for line in lines), lines


def test_every_problem_is_told_at_once() -> None:
    with pytest.raises(InputError) as caught:
        small().change({"relation.pivot": 0.0, "sampling.seed": -1, "hosts.distance_prior": 3})
    assert [problem.key for problem in caught.value.problems] == [
        "relation.pivot",
        "hosts.distance_prior",
        "sampling.seed",
    ]


def test_no_sections() -> None:
    with pytest.raises(InputError, match="found no data; expected at least one of"):
        Choices.from_mapping({"title": "empty"})
