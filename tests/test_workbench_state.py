"""The session behind the workbench, without widgets."""

from __future__ import annotations

from pathlib import Path

import builders
import numpy as np
import pytest

import ladderfit as lf
from ladderfit.anchors import anchor_weights
from ladderfit.errors import InputError, LadderfitError
from ladderfit.ladder import Ladder, build_ladder, read_ladder
from ladderfit.result import Result
from ladderfit.sampling.warm import WarmDrawer
from ladderfit.shipped import sample_ladder
from ladderfit.workbench.aside import BY_HAND, aside_residuals, entry_of, toggled, with_reason
from ladderfit.workbench.columns import against_column, numeric_columns
from ladderfit.workbench.rungs import everything, overlaps, rungs, rungs_present
from ladderfit.workbench.state import TRIAL_DRAWS, Session, save_ladder
from ladderfit.workbench.why import prior_driven, signed, trust, why

FEW = 600


class Counting(WarmDrawer):
    """A drawer that remembers how many draws were asked for."""

    def __init__(self) -> None:
        super().__init__()
        self.asked: list[int | None] = []

    def draw(self, ladder: Ladder, *, draws: int | None = None, seed: int | None = None) -> Result:
        self.asked.append(draws)
        return super().draw(ladder, draws=FEW if draws is None else draws, seed=seed)


@pytest.fixture(scope="module")
def ladder() -> Ladder:
    return build_ladder(builders.choices(), builders.tables())


@pytest.fixture
def session(ladder: Ladder) -> Session:
    made = Session(ladder, Counting())
    made.start()
    return made


def test_a_trial_draws_few_and_leaves_no_trace(session: Session) -> None:
    assert session.attempt({"cepheids.periods": [7.0, 100.0]})
    assert session._drawer.asked == [None, TRIAL_DRAWS]  # type: ignore[attr-defined]
    assert session.settled.choices.cepheids.periods == (5.0, 100.0)  # type: ignore[union-attr]
    assert session.ladder.choices.cepheids.periods == (7.0, 100.0)  # type: ignore[union-attr]
    assert not session.can_undo


def test_undo_and_redo_give_the_same_choices_and_numbers(session: Session) -> None:
    first = session.result
    assert session.settle({"cepheids.periods": [8.0, 100.0]})
    second = session.result
    assert first is not None
    assert second is not None
    assert session.before is first
    assert session.undo()
    assert session.settled.choices == first.choices
    assert session.result is first
    assert session.before is second
    assert session.can_redo
    assert session.redo()
    assert session.settled.choices == second.choices
    assert session.result is second
    assert not session.can_redo


def test_old_posteriors_are_drawn_again(session: Session) -> None:
    """Memory stays bounded: only the last few posteriors are kept."""
    first = session.result
    for step in range(10):
        session.settle({"cepheids.periods": [5.1 + 0.1 * step, 100.0]})
    assert sum(step.result is not None for step in session._undo) == 8
    for _ in range(10):
        assert session.undo()
    assert first is not None
    assert session.result is not None
    assert session.result is not first
    assert session.settled.choices == first.choices
    allowed = 5.0 * first.sd("slope") * np.sqrt(2.0 / FEW)
    assert abs(session.result.mean("slope") - first.mean("slope")) < allowed


def test_a_new_change_forgets_what_was_undone(session: Session) -> None:
    session.settle({"cepheids.periods": [8.0, 100.0]})
    session.undo()
    session.settle({"cepheids.periods": [6.0, 100.0]})
    assert not session.can_redo
    assert session.undo()
    assert not session.undo()


def test_a_change_that_cannot_be_made(session: Session) -> None:
    kept = session.result
    assert not session.settle({"cepheids.periods": [100.0, 6.0]})
    assert session.trouble is not None
    assert not session.trouble.made
    assert session.trouble.words == (
        "Found [100, 6]; expected a lower and a higher bound in days; swap or correct the bounds."
    )
    assert session.result is kept
    assert session.settled.choices.cepheids.periods == (5.0, 100.0)  # type: ignore[union-attr]
    assert session.can_undo
    assert session.undo()
    assert session.trouble is None
    assert not session.can_undo


def test_the_last_anchor(session: Session) -> None:
    session.settle({"anchors.geometric.Tavin.use": False})
    kept = session.result
    assert not session.settle({"anchors.parallaxes.use": False})
    assert session.trouble is not None
    assert session.trouble.made
    assert session.trouble.words.startswith("Found no anchor in use, so undetermined: zero point")
    assert session.result is kept
    with pytest.raises(LadderfitError, match="nothing to pin"):
        session.pin()
    assert session.settle({"anchors.geometric.Orrel.use": True})
    assert session.trouble is None


def test_pin(session: Session) -> None:
    first = session.pinned
    assert first is session.result
    session.settle({"cepheids.periods": [8.0, 100.0]})
    assert session.pinned is first
    session.pin()
    assert session.pinned is session.result


def test_confirmed_numbers_are_those_of_a_fit_from_nothing(session: Session) -> None:
    session.settle({"cepheids.periods": [8.0, 100.0]})
    assert session.confirm()
    fresh = lf.draw(session.settled)
    assert session.result is not None
    for name in fresh.draws:
        np.testing.assert_array_equal(session.result.draws[name], fresh.draws[name])


def test_weights_are_what_a_moved_anchor_moves(ladder: Ladder) -> None:
    """Against a fit with the anchor moved; tolerance from the Monte Carlo error of both."""
    draws = 8000
    both = ladder.change({"anchors.geometric.Orrel.use": True})
    base = lf.draw(both, draws=draws)
    weights = anchor_weights(base)
    assert weights is not None
    assert sum(weights.by_name().values()) == pytest.approx(1.0)
    for name in ("Tavin", "Orrel"):
        key = f"anchors.geometric.{name}.modulus"
        step = 0.1
        moved = lf.draw(both.change({key: both.choices.value(key) + step}), draws=draws)
        found = -(moved.mean("zero_point") - base.mean("zero_point")) / step
        error = base.sd("zero_point") * np.sqrt(2.0 / draws) / step
        spread = base.sd("zero_point") * base.sd(f"modulus[{name}]")
        error += spread / both.choices.value(key.replace("modulus", "error")) ** 2 / draws**0.5
        assert abs(weights.geometric[name] - found) < 4.0 * error
        assert weights.geometric[name] > 8.0 * error  # or the comparison says nothing


def test_one_anchor_carries_all(ladder: Ladder) -> None:
    alone = lf.draw(ladder.change({"anchors.parallaxes.use": False}), draws=4000)
    weights = anchor_weights(alone)
    assert weights is not None
    assert weights.parallaxes is None
    assert weights.geometric["Tavin"] == pytest.approx(1.0, abs=0.08)


def test_why_names_the_anchor_and_its_weight(session: Session) -> None:
    session.settle({"anchors.geometric.Orrel.use": True})
    session.settle({"anchors.geometric.Tavin.use": False})
    assert session.before is not None
    assert session.result is not None
    words = why(session.before, session.result)
    assert "Tavin's weight" in words
    assert "% to 0" in words
    assert words.endswith(".")


def test_why_counts_stars(session: Session) -> None:
    session.settle({"cepheids.periods": [8.0, 100.0]})
    assert session.before is not None
    assert session.result is not None
    assert "Cepheids instead of 36" in why(session.before, session.result)


def test_signed() -> None:
    assert [signed(x) for x in (0.84, -0.84, 0.0, -0.01)] == ["+0.8", "−0.8", "0.0", "0.0"]


def test_trust_and_a_prior_that_does_the_work(session: Session) -> None:
    assert session.result is not None
    good, words = trust(session.result)
    assert good
    assert words.startswith("Trustworthy: ")
    assert prior_driven(session.result) == ""
    session.settle(
        {
            "anchors.parallaxes.use": False,
            "anchors.geometric.Tavin.use": False,
            "priors.hubble_constant": {"log_normal": [70.0, 0.2]},
        }
    )
    good, words = trust(session.result)
    assert not good
    assert words == "The data add nothing to the prior of the Hubble constant log-normal(70, 0.2)."


def test_a_saved_ladder_reads_back(session: Session, tmp_path: Path) -> None:
    written = save_ladder(session.settled, tmp_path / "mine.toml")  # tables in memory
    assert written == tmp_path / "mine" / "ladder.toml"
    assert len(read_ladder(written).cepheids) == 36  # type: ignore[arg-type]


def test_a_saved_sample_keeps_its_comments_and_its_tables(tmp_path: Path) -> None:
    sample = read_ladder(sample_ladder())
    changed = sample.change({"cepheids.periods": [7.0, 80.0]})
    path = save_ladder(changed, tmp_path / "mine.toml")
    again = read_ladder(path)
    assert "observatory, survey and galaxies" in path.read_text()
    difference = again.choices.difference(sample.choices)
    assert {key for key in difference if not key.endswith(".table")} == {"cepheids.periods"}
    assert again.kept == changed.kept
    with pytest.raises(InputError, match="a name that is free"):
        save_ladder(changed, path)
    with pytest.raises(InputError, match="no folder"):
        save_ladder(changed, tmp_path / "nowhere" / "mine.toml")


def test_setting_aside_and_back(session: Session) -> None:
    star = "Orrel-015"
    session.settle(toggled(session.settled, "cepheids", star, "Orrel", " "))
    entry = entry_of(session.settled.choices, "cepheids", star, "Orrel")
    assert entry is not None
    assert (entry.reason, entry.host) == (BY_HAND, None)
    assert len(session.settled.cepheids) == 35  # type: ignore[arg-type]
    assert session.result is not None
    aside = aside_residuals(session.result)
    assert aside is not None
    assert list(aside.name) == [star]
    session.settle(with_reason(session.settled.choices, "cepheids", entry, "blended"))
    entry = entry_of(session.settled.choices, "cepheids", star)
    assert entry is not None
    assert entry.reason == "blended"
    session.settle(toggled(session.settled, "cepheids", star, "Orrel"))
    assert entry_of(session.settled.choices, "cepheids", star) is None
    session.settle(toggled(session.settled, "expansion", "F03", reason="odd"))
    assert session.settled.kept["expansion"].kept == 19


def test_a_star_put_back_is_where_it_was(session: Session) -> None:
    """The residual of a star set aside is that of the line it was not fitted with."""
    session.settle(toggled(session.settled, "cepheids", "Q07-030", "Q07"))
    result = session.result
    assert result is not None
    aside = aside_residuals(result)
    assert aside is not None
    row = builders.tables()["cepheids"].set_index("ID").loc["Q07-030"]
    index = row["Hmag"] - 0.386 * (row["Vmag"] - row["Imag"])
    expected = (
        index
        - result.mean("modulus[Q07]")
        - result.mean("zero_point")
        - result.mean("slope") * (np.log10(row["P"]) - 1.0)
        - result.mean("metallicity") * (row["OH"] - 8.69)
    )
    assert aside.residual[0] == pytest.approx(expected, abs=1e-9)


def test_rungs_and_what_is_off(session: Session) -> None:
    every = everything(session.settled)
    assert rungs_present(session.settled) == ("anchors", "cepheids", "supernovae", "expansion")
    session.settle({"anchors.geometric.Tavin.use": False, "expansion.redshifts": [0.05, 0.15]})
    assert session.result is not None
    found = {rung.key: rung for rung in rungs(session.settled, every, session.result)}
    marks = {mark.name: mark for mark in found["anchors"].marks if mark.kind == "anchor"}
    assert not marks["Tavin"].used
    assert marks["Tavin"].place == pytest.approx(0.2 * 18.49 + 1.0)
    hosts = {mark.name: mark for mark in found["cepheids"].marks}
    assert hosts["Q07"].place == pytest.approx(0.2 * 31.0 + 1.0, abs=0.03)
    flow = found["expansion"].marks
    assert len(flow) == 20
    assert sum(mark.used for mark in flow) == session.settled.kept["expansion"].kept < 20
    shared = overlaps(list(found.values()))
    assert all(low < high for low, high in shared)
    assert len(shared) >= 1


def test_residuals_against_a_column(session: Session) -> None:
    assert session.result is not None
    assert numeric_columns(session.settled, "supernovae") == ["mB", "e_mB"]
    found = against_column(session.result, "cepheids", "OH")
    assert found is not None
    assert (found.data_unit, len(found.x)) == ("mag", 36)
    table = builders.tables()["cepheids"].set_index("ID")
    np.testing.assert_allclose(found.x, table.loc[list(found.residuals.name), "OH"])
    assert against_column(session.result, "cepheids", "Galaxy2") is None
