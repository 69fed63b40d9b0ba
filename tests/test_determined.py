"""What no data determine is named, and what only a prior determines is said."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from small_ladders import SMALL, TRUTH, small_ladder

from ladderfit.errors import SamplingError, UndeterminedError
from ladderfit.ladder import Ladder
from ladderfit.posterior.determined import undetermined
from ladderfit.posterior.joint import posterior
from ladderfit.sampling.run import draw

NO_GEOMETRY = {f"anchors.geometric.{host}.use": False for host in ("Tavin", "Orrel", "Meril")}
TWO_OFF = {f"anchors.geometric.{host}.use": False for host in ("Tavin", "Orrel")}


def refused(ladder: Ladder) -> str:
    """The one line with which a ladder is refused."""
    with pytest.raises(UndeterminedError) as caught:
        draw(ladder, seed=1)
    (line,) = str(caught.value).splitlines()
    return line


def names_of(ladder: Ladder) -> set[str]:
    return set(undetermined(posterior(ladder)))


# --- undetermined ------------------------------------------------------------------------


@pytest.mark.parametrize("name", SMALL)
def test_a_complete_ladder_has_nothing_undetermined(name: str) -> None:
    assert names_of(small_ladder(name)) == set()


def test_cepheids_without_an_anchor() -> None:
    ladder = small_ladder("anchors").change(TWO_OFF)
    moduli = {f"modulus[{host}]" for host in ("Q07", "Tavin", "Orrel")}
    assert names_of(ladder) == {"zero_point", *moduli}
    line = refused(ladder)
    assert "no anchor in use, so undetermined: zero point at the pivot" in line
    assert "distance modulus (3 hosts)" in line
    assert "key anchors" in line
    assert "priors.zero_point" in line
    assert "slope" not in line


def test_one_host_is_one_host() -> None:
    line = refused(small_ladder("one anchor").change({"anchors.geometric.Tavin.use": False}))
    assert "distance modulus (1 host)" in line


def test_one_anchor_left_is_enough() -> None:
    ladder = small_ladder("anchors").change({"anchors.geometric.Tavin.use": False})
    assert names_of(ladder) == set()
    assert draw(ladder, seed=1, draws=200).size == 200


def test_all_rungs_without_an_anchor() -> None:
    """No H0 is made up from default priors."""
    ladder = small_ladder("all rungs").change({**NO_GEOMETRY, "anchors.parallaxes.use": False})
    found = names_of(ladder)
    assert {"zero_point", "peak_magnitude", "hubble_constant"} <= found
    assert not found & {"slope", "metallicity"}
    line = refused(ladder)
    for words in ("zero point at the pivot", "standard peak magnitude", "Hubble constant"):
        assert words in line


def test_parallaxes_alone_anchor_all_rungs() -> None:
    assert names_of(small_ladder("all rungs").change(NO_GEOMETRY)) == set()


def test_an_expansion_without_a_stated_peak() -> None:
    ladder = small_ladder("expansion alone").change({"priors.peak_magnitude": None})
    assert names_of(ladder) == {"peak_magnitude", "hubble_constant"}
    line = refused(ladder)
    assert "standard peak magnitude, Hubble constant" in line
    assert "priors.peak_magnitude" in line


def test_a_gap_between_the_rungs() -> None:
    """Anchored Cepheids and an expansion, but no supernova in a host: only H0 hangs in the air."""
    changes = {"supernovae": None, "anchors.geometric.Meril": None}
    ladder = small_ladder("all rungs").change(changes)
    assert names_of(ladder) == {"peak_magnitude", "hubble_constant"}
    line = refused(ladder)
    assert "no anchor for these, so undetermined: standard peak magnitude" in line
    assert "zero point" not in line


# --- determined by a prior that is stated ------------------------------------------------


@pytest.mark.parametrize(
    "prior",
    [{"normal": [-5.9, 0.3]}, {"uniform": [-8.0, -4.0]}, {"fixed": -5.9}],
    ids=lambda prior: next(iter(prior)),
)
def test_a_slope_may_be_had_without_an_anchor(prior: dict[str, Any]) -> None:
    """With a zero point stated, and no other slope than with one anchor."""
    ladder = small_ladder("one anchor")
    changes = {"anchors.geometric.Tavin.use": False, "priors.zero_point": prior}
    anchored = draw(ladder, seed=1, draws=4000)
    alone = draw(ladder.change(changes), seed=2, draws=4000)
    gap = alone.mean("slope") - anchored.mean("slope")
    assert abs(gap) < 5.0 * np.sqrt(2.0 / 4000) * anchored.sd("slope")
    assert alone.sd("slope") == pytest.approx(anchored.sd("slope"), rel=0.1)


def test_a_stated_hubble_constant_carries_the_ladder_downwards() -> None:
    """Flow, peaks and Cepheids rest on it: the zero point follows."""
    changes = {
        **NO_GEOMETRY,
        "anchors.parallaxes.use": False,
        "priors.hubble_constant": {"log_normal": [71.0, 0.02]},
    }
    ladder = small_ladder("all rungs").change(changes)
    assert names_of(ladder) == set()
    result = draw(ladder, seed=1, draws=1000)
    assert abs(result.mean("zero_point") - TRUTH["zero_point"]) < 3.0 * result.sd("zero_point")
    assert result.sd("zero_point") < 0.2


# --- where the data add nothing to a prior -----------------------------------------------


def test_a_stated_peak_comes_back_as_it_was_stated() -> None:
    result = draw(small_ladder("expansion alone"), seed=1)
    (note,) = result.diagnostics.notes
    assert "The data add nothing to the prior of the standard peak magnitude" in note
    assert "(peak_magnitude)" in note
    assert "normal(-19.25, 0.05)" in note
    assert result.diagnostics.informed["peak_magnitude"] == pytest.approx(1.0, abs=0.05)
    assert result.diagnostics.informed["hubble_constant"] < 0.1


def test_a_stated_zero_point_too() -> None:
    changes = {**TWO_OFF, "priors.zero_point": {"normal": [-5.9, 0.3]}}
    notes = draw(small_ladder("anchors").change(changes), seed=1).diagnostics.notes
    assert any("add nothing to the prior of the zero point at the pivot" in note for note in notes)


def test_an_offset_that_the_parallaxes_do_not_inform() -> None:
    changes = {"priors.parallax_offset": {"normal": [0.0, 0.0005]}}
    notes = draw(small_ladder("all rungs").change(changes), seed=1).diagnostics.notes
    assert any("the residual parallax offset (parallax_offset)" in note for note in notes)


def test_two_stated_priors_in_conflict_are_not_called_uninformed() -> None:
    """H0 and the peak magnitude both stated, at odds: neither stays where it was put."""
    changes = {
        "priors.peak_magnitude": {"normal": [-18.8, 0.05]},
        "priors.hubble_constant": {"log_normal": [71.0, 0.05]},
    }
    result = draw(small_ladder("expansion alone").change(changes), seed=1)
    assert not any("add nothing" in note for note in result.diagnostics.notes)
    assert abs(result.mean("peak_magnitude") + 18.8) > 2.0 * 0.05


@pytest.mark.parametrize("name", ["anchors", "flow", "all rungs", "velocities", "zero scatters"])
def test_informed_ladders_carry_no_note(name: str) -> None:
    """The negative control."""
    result = draw(small_ladder(name), seed=1)
    assert result.diagnostics.notes == ()
    assert max(result.diagnostics.informed.values()) < np.sqrt(0.9)


def test_a_posterior_against_a_bound_is_said() -> None:
    (note,) = draw(small_ladder("slope at a bound"), seed=1).diagnostics.notes
    assert "presses against a bound of its prior uniform(-3.25, -2.9)" in note


@pytest.mark.filterwarnings("ignore::RuntimeWarning")
def test_sums_that_overflow_are_said() -> None:
    ladder = small_ladder("anchors").change({"anchors.geometric.Tavin.error": 1e-170})
    with pytest.raises(SamplingError, match="absurd numbers"):
        draw(ladder, seed=1)
