"""Anchors against each other: alone, left out, free of one another."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from small_ladders import small_ladder

import ladderfit as lf
from ladderfit.anchors import (
    PARALLAXES,
    AnchorComparison,
    compare_anchors,
    free_zero_points,
    only_anchor,
)
from ladderfit.names import with_group
from ladderfit.sampling.run import draw

DRAWS = 2000


@cache
def compared(name: str) -> AnchorComparison:
    return compare_anchors(small_ladder(name), draws=DRAWS)


def test_each_alone_and_each_left_out_are_refits_of_the_choices() -> None:
    ladder, found = small_ladder("all rungs"), compared("all rungs")
    assert [case.anchor for case in found.cases] == ["Tavin", "Orrel", "Meril", PARALLAXES]
    table = found.table()

    without = draw(ladder.change({"anchors.geometric.Orrel.use": False}), draws=DRAWS)
    alone = draw(
        ladder.change(
            {
                "anchors.geometric.Orrel.use": False,
                "anchors.geometric.Meril.use": False,
                "anchors.parallaxes.use": False,
            }
        ),
        draws=DRAWS,
    )

    assert table.loc["Orrel", "hubble_constant_without"] == without.mean("hubble_constant")
    assert table.loc["Tavin", "zero_point_alone_sd"] == alone.sd("zero_point")
    moved = without.mean("zero_point") - found.base.mean("zero_point")
    expected = moved / found.base.sd("zero_point")
    assert table.loc["Orrel", "zero_point_without_in_errors"] == pytest.approx(expected)
    assert table["weight"].sum() == pytest.approx(1.0, abs=0.02)  # what is left is the priors'


def test_an_anchor_left_out_moves_the_zero_point_against_its_tension() -> None:
    """Leaving out an anchor that is too far makes the stars of the others no brighter."""
    table = compared("all rungs").table()
    geometric = table.drop(index=PARALLAXES)
    too_far = geometric["difference"] > 0.0
    fainter = geometric["zero_point_without"] > compared("all rungs").base.mean("zero_point")
    assert (too_far == fainter).all()


def test_free_zero_points_widen_and_shrink_to_the_common_one() -> None:
    ladder = small_ladder("anchors and parallaxes")
    base = draw(ladder, draws=DRAWS)
    sizes = []
    for spread in (1e-4, 0.1, 0.3):
        freed, named = free_zero_points(ladder, spread)
        assert set(named) == {"Tavin", "Orrel", PARALLAXES}
        result = draw(freed, draws=DRAWS)
        sizes.append(result.sd("zero_point"))
        offset = result.draws[with_group("zero_point_offset", named["Tavin"])]
        assert np.std(offset) < 1.1 * spread
    assert sizes[0] == pytest.approx(base.sd("zero_point"), rel=0.1)
    assert sizes[0] < sizes[1] < sizes[2]
    assert sizes[1] > 0.1 / np.sqrt(3.0)  # three anchors, each free by 0.1 mag


def test_own_offsets_show_who_pulls() -> None:
    """An anchor whose modulus is too large makes its stars brighter than the others'."""
    ladder = small_ladder("anchors").change({"anchors.geometric.Tavin.modulus": 18.9})
    table = compare_anchors(ladder, draws=DRAWS).table()
    assert table.loc["Tavin", "own_offset"] < 0.0 < table.loc["Orrel", "own_offset"]
    assert table.loc["Tavin", "tension"] > 3.0


def test_disagreement_is_said() -> None:
    ladder = small_ladder("anchors").change({"anchors.geometric.Tavin.modulus": 18.9})
    found = compare_anchors(ladder, draws=DRAWS)
    text = " ".join(found.sentences())
    assert "and the other anchors disagree" in text
    assert "disagree" not in " ".join(compared("all rungs").sentences())


def test_a_single_anchor_cannot_be_left_out() -> None:
    (case,) = compared("one anchor").cases
    assert case.without is None and case.tension is None
    assert case.alone is compared("one anchor").base
    assert "The distance scale is undetermined without Tavin." in case.notes


def test_without_cepheids_no_zero_point_is_free() -> None:
    found = compared("no Cepheids")
    assert found.free is None
    assert "No anchor has Cepheids of its own" in " ".join(found.sentences())
    assert found.followed == ("peak_magnitude", "hubble_constant")


def test_the_only_anchor_in_use() -> None:
    ladder = only_anchor(small_ladder("anchors and parallaxes"), PARALLAXES)
    assert not ladder.geometric and ladder.parallax_stars is not None
    assert only_anchor(ladder, PARALLAXES) is ladder


def test_anchors_are_compared_from_the_top() -> None:
    assert lf.compare_anchors is compare_anchors
