"""The list of supernovae set aside: nothing of the ladder file's own list is lost."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import builders
import pytest

pytestmark = [
    pytest.mark.filterwarnings("ignore::DeprecationWarning"),  # inside ipywidgets
]

from ladderfit.choices import Choices  # noqa: E402
from ladderfit.ladder import Ladder, build_ladder, read_ladder  # noqa: E402
from ladderfit.ladder_file import write_choices  # noqa: E402
from ladderfit.workbench import Workbench  # noqa: E402
from ladderfit.workbench.aside import BY_HAND, with_chosen  # noqa: E402

WHOLE = {"host": "Q07", "reason": "a peculiar galaxy"}
ONE = {"name": "2091a", "host": "Orrel", "reason": "one epoch"}


def ladder_with(*entries: dict[str, str]) -> Ladder:
    plain = builders.choices()
    plain["supernovae"]["set_aside"] = list(entries)
    tables = builders.tables()
    tables["supernovae"].loc[3] = ["2095d", "Tavin", 0.0, 0.1]
    tables["supernovae"].loc[3, "mB"] = 18.49 - 19.3
    return build_ladder(plain, tables).change({"sampling.draws": 600})


def list_of(bench: Workbench) -> Any:
    controls = bench.panel.controls["supernovae"]
    return next(c.widget for c in controls if getattr(c.widget, "rows", 0) > 1)


def aside(bench: Workbench) -> list[dict[str, Any]]:
    known = bench.ladder.choices.supernovae.set_aside  # type: ignore[union-attr]
    parts = ("name", "host", "reason")
    return [{k: getattr(e, k) for k in parts if getattr(e, k) is not None} for e in known]


@pytest.fixture(autouse=True)
def _elsewhere(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A workbench writes beside its notebook."""
    monkeypatch.chdir(tmp_path)


def test_a_whole_host_is_shown_kept_taken_back_and_set_aside_again() -> None:
    bench = Workbench(ladder_with(WHOLE))
    found = list_of(bench)
    assert [words for words, _ in found.options][-1] == "all of Q07"
    assert found.label == ("all of Q07",)
    found.label = ("2091a", "all of Q07")
    assert bench.session.trouble is None, bench.foot.trust.value
    assert aside(bench) == [WHOLE, {"name": "2091a", "reason": BY_HAND}]
    assert bench.ladder.kept["supernovae"].kept == 1
    found.label = ("2091a",)
    assert bench.ladder.kept["supernovae"].kept == 3
    found.label = ("all of Q07",)
    assert bench.ladder.kept["supernovae"].kept == 2


def test_entries_keep_their_order_reason_and_host() -> None:
    bench = Workbench(ladder_with(ONE, WHOLE))
    found = list_of(bench)
    assert found.label == ("2091a", "all of Q07")
    found.label = ("2091a", "2091b", "all of Q07")
    assert aside(bench) == [ONE, WHOLE, {"name": "2091b", "reason": BY_HAND}]
    bench.foot.undo.click()
    assert aside(bench) == [ONE, WHOLE]
    assert found.label == ("2091a", "all of Q07")


def test_what_the_list_does_not_offer_stays() -> None:
    plain = builders.choices(tables=True)
    plain["supernovae"]["set_aside"] = [ONE, WHOLE]
    choices = Choices.from_mapping(plain)
    offered = [("name", "2091b")]
    (changed,) = with_chosen(choices, "supernovae", offered, offered).values()
    assert changed == [ONE, WHOLE, {"name": "2091b", "reason": BY_HAND}]
    (left,) = with_chosen(choices, "supernovae", offered, []).values()
    assert left == [ONE, WHOLE]


def test_a_whole_host_goes_through_the_saved_ladder_file(tmp_path: Path) -> None:
    builders.write_tables(tmp_path)
    plain = builders.choices(tables=True)
    plain["supernovae"]["set_aside"] = [{"host": "Orrel", "reason": "faint"}]
    plain["sampling"] = {"draws": 600}
    write_choices(Choices.from_mapping(plain), tmp_path / "mine.toml")
    bench = Workbench(read_ladder(tmp_path / "mine.toml"))
    list_of(bench).label = ("2091b", "all of Orrel")
    bench.foot.save.click()
    (saved,) = [path for path in tmp_path.glob("*.toml") if path.name != "mine.toml"]
    known = read_ladder(saved).choices.supernovae.set_aside  # type: ignore[union-attr]
    assert [(e.host, e.name) for e in known] == [("Orrel", None), (None, "2091b")]
