"""What must not change a posterior: order, labels, pivot, units, and objects that tell nothing.

Log densities are compared at points of phi, all else integrated out, not draws.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd
import pytest
from astropy.table import Table
from hypothesis import given, settings
from hypothesis import strategies as st
from relation_ladders import (
    ERRORS_OF_PARALLAX_STARS,
    TERMS,
    Made,
    log_densities,
    made,
    points,
    shape_of,
)

from ladderfit.errors import UndeterminedError
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.physics.overtones import PERIOD_RATIOS, fundamental_log_period
from ladderfit.posterior.determined import check_determined, undetermined
from ladderfit.posterior.joint import posterior

SEEDS = st.integers(0, 10**6)
FEW = settings(max_examples=6)
EXACT = 1e-8  # the same sums in another order

terms = pytest.mark.parametrize("term", TERMS)


def changes_of(term: str, *, parallaxes: bool) -> dict[str, Any]:
    more = ERRORS_OF_PARALLAX_STARS if parallaxes and term == "errors of the inputs" else {}
    return {**TERMS[term], **more}


def with_terms(seed: int, term: str) -> tuple[Made, dict[str, Any], np.random.Generator]:
    """A ladder (every other one without parallaxes), the changes that give it a term."""
    parallaxes = seed % 2 == 0
    return (
        made(seed, parallaxes=parallaxes),
        changes_of(term, parallaxes=parallaxes),
        np.random.default_rng(seed),
    )


def compare(
    before: Ladder,
    after: Ladder,
    rng: np.random.Generator,
    *,
    tolerance: float,
    free: bool = False,
    held: tuple[str, ...] = (),
) -> None:
    """The same log densities at the same values; up to a constant where `free`.

    Parameters `held` have one value at all points.
    """
    ours, theirs = posterior(before), posterior(after)
    assert set(ours.split.phi_names) == set(theirs.split.phi_names)
    places = points(rng, ours.split.phi_names)
    places = [{**place, **{name: places[0][name] for name in held}} for place in places]
    a, b = log_densities(ours, places), log_densities(theirs, places)
    assert np.all(np.isfinite(a))
    assert np.ptp(a) > 1e-3  # the points tell densities apart
    if free:
        a, b = shape_of(a), shape_of(b)
    np.testing.assert_allclose(b, a, rtol=0.0, atol=tolerance)


@terms
@FEW
@given(seed=SEEDS)
def test_order_of_rows(term: str, seed: int) -> None:
    found, changes, rng = with_terms(seed, term)
    mixed = found.copy()
    for key, table in mixed.tables.items():
        mixed.tables[key] = table.sample(frac=1.0, random_state=seed).reset_index(drop=True)
    before, after = found.built(changes), mixed.built(changes)
    compare(before, after, rng, tolerance=EXACT)
    assert_same_moduli(before, after, {host: host for host in before.hosts})


@terms
@FEW
@given(seed=SEEDS)
def test_names_of_hosts(term: str, seed: int) -> None:
    """Other names, and so another order of hosts in every mapping."""
    found, changes, rng = with_terms(seed, term)
    new = {"Tavin": "Zz 9", "Orrel": 'a "b".c', "Q07": "M"}
    other = found.copy()
    other.tables["cepheids"]["Galaxy"] = other.tables["cepheids"]["Galaxy"].map(new)
    renamed = build_ladder(_renamed(found.built(changes).choices.to_mapping(), new), other.tables)
    before = found.built(changes)
    compare(before, renamed, rng, tolerance=EXACT)
    assert_same_moduli(before, renamed, new)


def _renamed(value: Any, new: Mapping[str, str]) -> Any:
    if isinstance(value, dict):
        return {new.get(key, key): _renamed(inner, new) for key, inner in value.items()}
    if isinstance(value, list):
        return [_renamed(inner, new) for inner in value]
    return new.get(value, value) if isinstance(value, str) else value


def assert_same_moduli(before: Ladder, after: Ladder, names: Mapping[str, str]) -> None:
    """Mean moduli given phi, host by host."""
    ours, theirs = posterior(before), posterior(after)
    place = points(np.random.default_rng(1), ours.split.phi_names, 1)[0]
    means = []
    for found in (ours, theirs):
        solution = found.solution(found.coordinates(place)[None, :])
        cross, local = solution.moments.cross, solution.moments.local
        expected = np.einsum("bhk,bk->bh", cross[:, :, :-1], solution.coefficients)
        centre = (cross[:, :, -1] - expected) / local
        moduli = found.frame.modulus(centre, solution.coefficients)[0]
        means.append(dict(zip(found.ladder.hosts, moduli, strict=True)))
    for host, name in names.items():
        assert means[1][name] == pytest.approx(means[0][host], abs=1e-7)


@pytest.mark.parametrize("term", ["plain", "break", "uniform in volume", "errors of the inputs"])
@FEW
@given(seed=SEEDS, pivot=st.floats(4.0, 40.0))
def test_pivot(term: str, seed: int, pivot: float) -> None:
    """The zero point is stated elsewhere on the same line; nothing else changes."""
    found, changes, rng = with_terms(seed, term)
    changes |= {"priors.zero_point": {"normal": [-5.9, 1e4]}}  # tells nothing at either pivot
    before = found.built(changes)
    after = found.built({**changes, "relation.pivot": pivot})
    ours, theirs = posterior(before), posterior(after)
    places = points(rng, ours.split.phi_names)
    moved = [moved_to(pivot, place, term) for place in places]
    a, b = log_densities(ours, places), log_densities(theirs, moved)
    np.testing.assert_allclose(b, a, rtol=0.0, atol=1e-5)
    if ours.split.theta:  # given phi, theta moves by the same rule
        z, z_moved = (
            np.stack([p.coordinates(each) for each in at])
            for p, at in ((ours, places), (theirs, moved))
        )
        for first, second, place in zip(
            ours.solution(z).coefficients,
            theirs.solution(z_moved).coefficients,
            places,
            strict=True,
        ):
            whole = {**dict(zip(ours.split.coefficients, first, strict=True)), **place}
            expected = moved_to(pivot, whole, term)
            got = dict(zip(theirs.split.coefficients, second, strict=True))
            for name, value in got.items():
                assert value == pytest.approx(expected[name], abs=1e-6)


def moved_to(pivot: float, place: Mapping[str, float], term: str) -> dict[str, float]:
    """Parameter values for another pivot; the line itself stays."""
    if "zero_point" not in place:
        return dict(place)
    step = np.log10(pivot / 10.0)
    bend = np.log10(18.0 / 10.0) if term == "break" else np.inf
    zero = place["zero_point"] + place["slope"] * min(step, bend)
    if step > bend:
        zero += place["slope_beyond"] * (step - bend)
    return {**place, "zero_point": zero}


@terms
@FEW
@given(seed=SEEDS)
def test_units(term: str, seed: int) -> None:
    """Hours, thousandths of a magnitude and microarcseconds instead of d, mag and mas."""
    found, changes, rng = with_terms(seed, term)
    other = {key: in_other_units(table) for key, table in found.tables.items()}
    after = build_ladder(found.choices, other).change(changes)
    compare(found.built(changes), after, rng, tolerance=1e-7)


def in_other_units(frame: pd.DataFrame) -> Table:
    table = Table.from_pandas(frame)
    for names, factor, unit in (
        (("P", "e_P"), 24.0, "h"),
        (("W", "e_W"), 1e3, "mmag"),
        (("plx", "e_plx"), 1e3, "uas"),
    ):
        for name in names:
            if name in table.colnames:
                table[name] = table[name] * factor
                table[name].unit = unit
    return table


@terms
@FEW
@given(seed=SEEDS, period=st.floats(5.0, 60.0), brightness=st.floats(-3.0, 3.0))
def test_a_host_with_one_star_tells_nothing(
    term: str, seed: int, period: float, brightness: float
) -> None:
    """Its modulus is free and flat: only a constant."""
    found, changes, rng = with_terms(seed, term)
    if term == "uniform in volume":
        changes = {k: v for k, v in changes.items() if k != "hosts.distance_prior"}
    if term == "errors of the inputs":  # a measured metallicity says something of the spread
        changes = {k: v for k, v in changes.items() if not k.endswith("metallicity_error")}
    more = found.copy()
    row = {**more.tables["cepheids"].iloc[0], "ID": "new", "Galaxy": "Lone", "P": period}
    row |= {"W": 25.0 + brightness, "e_P": 0.2}
    more.tables["cepheids"] = _with_row(more.tables["cepheids"], row)
    compare(found.built(changes), more.built(changes), rng, tolerance=1e-6, free=True)


def _with_row(table: pd.DataFrame, *rows: Mapping[str, Any]) -> pd.DataFrame:
    return pd.concat([table, pd.DataFrame(list(rows))[table.columns]], ignore_index=True)


@terms
@FEW
@given(seed=SEEDS, size=st.integers(2, 5))
def test_a_host_of_huge_errors_tells_nothing(term: str, seed: int, size: int) -> None:
    found, changes, rng = with_terms(seed, term)
    if term == "uniform in volume":  # an unknown distance then grows without a bound
        changes = {k: v for k, v in changes.items() if k != "hosts.distance_prior"}
    more = found.copy()
    rows = [
        {**row, "ID": f"n{i}", "Galaxy": "Dim", "e_W": 1e4, "e_OH": 1e4}
        for i, row in more.tables["cepheids"].iloc[:size].iterrows()
    ]
    more.tables["cepheids"] = _with_row(more.tables["cepheids"], *rows)
    compare(found.built(changes), more.built(changes), rng, tolerance=1e-5, free=True)


@terms
@FEW
@given(seed=SEEDS, host=st.sampled_from(["Tavin", "Q07"]))
def test_a_star_of_a_huge_error_tells_nothing(term: str, seed: int, host: str) -> None:
    found, changes, rng = with_terms(seed, term)
    more = found.copy()
    row = {**more.tables["cepheids"].iloc[3], "ID": "new", "Galaxy": host}
    row |= {"W": row["W"] + 3.0, "e_W": 1e4, "e_OH": 1e4}
    more.tables["cepheids"] = _with_row(more.tables["cepheids"], row)
    compare(found.built(changes), more.built(changes), rng, tolerance=1e-5, free=True)


@terms
@FEW
@given(seed=SEEDS)
def test_a_parallax_star_of_a_huge_error_tells_nothing(term: str, seed: int) -> None:
    """Under a prior flat in modulus."""
    found, changes, rng = with_terms(2 * seed, term)
    more = found.copy()
    table = more.tables["anchors.parallaxes"]
    row = {**table.iloc[0], "ID": "new", "e_OH": 1e4, "e_plx": 1e6}
    more.tables["anchors.parallaxes"] = _with_row(table, row)
    compare(found.built(changes), more.built(changes), rng, tolerance=1e-5, free=True)


@terms
@FEW
@given(seed=SEEDS)
def test_a_parallax_without_a_magnitude_tells_the_offset_alone(term: str, seed: int) -> None:
    """A parallax p that is flat in modulus has the density 1 / (p - offset)."""
    found, changes, rng = with_terms(2 * seed, term)
    more = found.copy()
    table = more.tables["anchors.parallaxes"]
    row = {**table.iloc[0], "ID": "new", "e_OH": 1e4, "e_W": 1e4, "plx": 2.0, "e_plx": 1e-4}
    more.tables["anchors.parallaxes"] = _with_row(table, row)
    before, after = found.built(changes), more.built(changes)
    compare(before, after, rng, tolerance=1e-5, free=True, held=("parallax_offset",))
    place = points(rng, posterior(before).split.phi_names, 1)[0]
    places = [{**place, "parallax_offset": offset} for offset in (-0.05, 0.0, 0.05)]
    gained = log_densities(after, places) - log_densities(before, places)
    np.testing.assert_allclose(
        shape_of(gained), -np.log([1.0, 2.0 / 2.05, 1.95 / 2.05]), rtol=0.0, atol=1e-5
    )


@pytest.mark.parametrize("name", PERIOD_RATIOS)
@FEW
@given(seed=SEEDS)
def test_a_converted_overtone_is_a_fundamental_star(name: str, seed: int) -> None:
    found, _, rng = with_terms(seed, "plain")
    by_hand = found.copy()
    for table in by_hand.tables.values():
        over = (table["Mode"] == "1O").to_numpy()
        converted = fundamental_log_period(np.log10(table["P"]), PERIOD_RATIOS[name])
        table["P"] = np.where(over, 10.0**converted, table["P"])
        table["Mode"] = "F"
    sections = [
        "cepheids",
        *(["anchors.parallaxes"] if "parallaxes" in found.choices["anchors"] else []),
    ]
    convert = {f"{section}.overtones": "convert" for section in sections}
    convert |= {f"{section}.conversion": name for section in sections}
    drop = {f"{section}.overtones": "drop" for section in sections}
    compare(found.built(convert), by_hand.built(drop), rng, tolerance=EXACT)


@FEW
@given(seed=SEEDS)
def test_two_slopes_that_agree_are_one(seed: int) -> None:
    """With parallax stars every coefficient is in phi, so the slopes can be set."""
    found, _, rng = with_terms(2 * seed, "plain")
    one, two = (posterior(found.built(changes)) for changes in ({}, {"relation.break": 14.0}))
    places = points(rng, one.split.phi_names)
    both = [{**place, "slope_beyond": place["slope"]} for place in places]
    prior = two.ladder.choices.prior("slope_beyond")
    extra = prior.log_density(np.array([place["slope"] for place in places]))
    np.testing.assert_allclose(
        log_densities(two, both) - extra, log_densities(one, places), rtol=0.0, atol=EXACT
    )
    apart = [{**place, "slope_beyond": place["slope"] + 0.3} for place in places]
    assert np.abs(log_densities(two, apart) - log_densities(two, both)).max() > 0.1


@FEW
@given(seed=SEEDS)
def test_a_huge_shared_error_leaves_the_difference_of_two_anchors(seed: int) -> None:
    """Both anchors moved together change nothing; one of them moved does."""
    found = made(seed, parallaxes=False)
    loads = {"Tavin": 1.0, "Orrel": 1.0}
    shared = {"anchors.shared_errors": {"model": {"error": 30.0, "loads": loads}}}
    shared |= {"anchors.geometric.Orrel.use": True}
    before = found.built({**shared, "priors.zero_point": {"normal": [-5.9, 1e-3]}})
    moved = {"anchors.geometric.Tavin.modulus": 18.49 + 1.0}
    moved |= {"anchors.geometric.Orrel.modulus": 20.25 + 1.0}
    rng = np.random.default_rng(seed)
    compare(before, before.change(moved), rng, tolerance=5e-2, free=True)
    apart = before.change({"anchors.geometric.Tavin.modulus": 19.49})
    place = points(rng, posterior(before).split.phi_names, 1)
    assert abs(log_densities(before, place) - log_densities(apart, place))[0] > 1.0


def test_an_ordinary_star_does_tell_something() -> None:
    """A negative control of the comparison."""
    found, rng = made(3, parallaxes=False), np.random.default_rng(3)
    more = found.copy()
    row = {**more.tables["cepheids"].iloc[3], "ID": "new", "e_W": 0.05}
    more.tables["cepheids"] = _with_row(more.tables["cepheids"], row)
    with pytest.raises(AssertionError, match="Not equal to tolerance"):
        compare(found.built(), more.built(), rng, tolerance=1e-5, free=True)


@pytest.mark.parametrize(
    ("changes", "lonely"),
    [
        ({"cepheids.periods": [9.0, 100.0]}, "overtone_offset"),
        (
            {
                "groups": {"near": {"parallax_stars": True}},
                "relation.zero_points": ["near"],
                "anchors.parallaxes.use": False,
            },
            "zero_point_offset[near]",
        ),
    ],
)
def test_a_term_that_no_star_informs_leaves_the_scale_alone(
    changes: dict[str, Any], lonely: str
) -> None:
    found = made(4)
    for table in found.tables.values():
        table["P"] = np.where(table["Mode"] == "1O", 8.0, np.maximum(table["P"], 9.5))
    whole = posterior(found.built({**changes, "anchors.parallaxes.overtones": "drop"}))
    assert undetermined(whole) == (lonely,)
    check_determined(whole)
    without = whole.ladder.change({"anchors.geometric.Tavin.use": False})
    if without.parallax_stars is None:
        with pytest.raises(UndeterminedError, match="no anchor in use"):
            check_determined(posterior(without))


def test_a_zero_point_of_its_own_for_the_anchor_takes_the_scale_away() -> None:
    """Unless a prior of it is stated: the one to state is named."""
    group = {"groups": {"near": {"hosts": ["Tavin"]}}, "relation.zero_points": ["near"]}
    ladder = made(5, parallaxes=False).built(group)
    with pytest.raises(UndeterminedError, match=r'\(priors."zero_point_offset\[near\]"\)'):
        check_determined(posterior(ladder))
    stated = ladder.change({"priors.zero_point_offset": {"normal": [0.0, 0.03]}})
    check_determined(posterior(stated))
