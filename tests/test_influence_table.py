"""The table of leave-one-out: what is in it, in which order, and what is said."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from small_ladders import small_ladder

import ladderfit as lf
from ladderfit.influence import Influence, leave_one_out
from ladderfit.influence.given import coordinates
from ladderfit.posterior.joint import posterior
from ladderfit.result import Result
from ladderfit.sampling.run import draw


@cache
def drawn(name: str) -> Result:
    return draw(small_ladder(name), draws=2000)


@cache
def influence(name: str) -> Influence:
    return leave_one_out(drawn(name))


def test_every_object_has_its_row() -> None:
    found, ladder = influence("all rungs").table, small_ladder("all rungs")
    counts = found["kind"].value_counts()
    assert counts["Cepheid"] == len(ladder.cepheids)
    assert counts["parallax star"] == len(ladder.parallax_stars)
    assert counts["supernova"] == len(ladder.peaks)
    assert counts["in the expansion"] == len(ladder.flow)
    assert counts["host"] == len(ladder.hosts)
    stars = found[found["kind"] == "Cepheid"]
    assert stars["name"].tolist() == ladder.cepheids.star.tolist()
    assert stars["host"].tolist() == [ladder.hosts[h] for h in ladder.cepheids.host]


def test_sorted_by_the_size_of_a_shift() -> None:
    found = influence("all rungs")
    sizes = found.by("hubble_constant")["hubble_constant"].abs().to_numpy()
    assert np.all(np.diff(sizes) <= 0.0)
    assert set(found.by("slope", kind="supernova")["kind"]) == {"supernova"}
    with pytest.raises(KeyError, match="scatter"):
        found.by("scatter")


def test_shifts_in_errors() -> None:
    found, result = influence("all rungs"), drawn("all rungs")
    table = found.table
    expected = table["slope"] / result.sd("slope")
    np.testing.assert_allclose(table["slope_in_errors"], expected)
    assert found.errors["slope"] == result.sd("slope")


def test_the_last_anchor_cannot_be_spared() -> None:
    found = influence("one anchor")
    (row,) = found.table[found.table["kind"] == "host"].to_dict("records")
    assert row["how"] == "undetermined"
    assert np.isnan(row["zero_point"])
    assert found.by("zero_point").iloc[0]["kind"] == "host"
    assert "Without the host Tavin the distance scale is undetermined." in found.sentences()


def outlying() -> Result:
    """A ladder one of whose parallax stars is far off its parallax."""
    ladder = small_ladder("parallaxes")
    columns = ladder.table("anchors.parallaxes").columns
    table = {name: np.array(column.values) for name, column in columns.items()}
    table["plx"][0] += 25.0 * table["e_plx"][0]
    tables = {"anchors.parallaxes": table}
    return draw(lf.build_ladder(ladder.choices.to_mapping(), tables), draws=2000)


def test_heavy_weights_are_refitted() -> None:
    result = outlying()
    refitted = leave_one_out(result).by("zero_point")
    loose = leave_one_out(result, refit=False)
    row = refitted.iloc[0]
    assert row["name"] == "S000" and row["k"] > 0.7
    assert row["how"] == "refitted"
    assert loose.table.loc[row.name, "how"] == "not trusted"
    assert "drawn anew" in " ".join(leave_one_out(result).sentences())
    assert "too heavy to trust" in " ".join(loose.sentences())


def test_sentences_name_the_largest() -> None:
    found = influence("all rungs")
    first = found.by("hubble_constant")
    single = first[first["kind"] != "host"].iloc[0]
    text = next(t for t in found.sentences() if "single objects" in t and "Hubble" in t)
    assert single["name"] in text
    assert "km/s/Mpc" in text


def test_same_seed_same_table() -> None:
    first, second = (leave_one_out(drawn("anchors")).table for _ in range(2))
    assert first.equals(second)


def test_nothing_in_phi_is_exact() -> None:
    """With fixed scatters there are no weights: shifts have no Monte Carlo error."""
    found = influence("fixed scatter").table
    stars = found[found["kind"] == "Cepheid"]
    assert stars["zero_point_mcse"].max() < 1e-12
    assert stars["zero_point"].abs().min() > 0.0


def test_draws_go_back_to_their_coordinates() -> None:
    """Whatever the priors: folded, bounded, logarithmic, plain."""
    ladder = small_ladder("other scatter priors")
    result = draw(ladder, draws=400)
    joint = posterior(ladder)
    z = coordinates(joint, result, 400)
    for name in joint.split.phi_names:
        np.testing.assert_allclose(joint.split.value(name, z), result.draws[name], rtol=1e-9)


def test_thinning_is_even() -> None:
    result = drawn("anchors")
    joint = posterior(result.ladder)
    few = coordinates(joint, result, 500)
    every = coordinates(joint, result, 2000)
    np.testing.assert_array_equal(few, every[::4])


def test_unknown_kinds_and_progress() -> None:
    with pytest.raises(ValueError, match="unknown kinds Quasar"):
        leave_one_out(drawn("anchors"), kinds=["Quasar"])
    told: list[tuple[str, float]] = []
    leave_one_out(drawn("anchors"), kinds=["host"], progress=lambda *news: told.append(news))
    assert told[-1] == ("host", 1.0)


def test_from_the_top() -> None:
    assert lf.leave_one_out is leave_one_out
