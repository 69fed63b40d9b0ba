"""The workbench's widgets, driven in Python: values set, buttons clicked."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import builders
import pytest

pytestmark = [
    pytest.mark.filterwarnings("ignore::DeprecationWarning"),  # inside ipywidgets
]

from ladderfit.ladder import Ladder, build_ladder  # noqa: E402
from ladderfit.workbench import Workbench  # noqa: E402
from ladderfit.workbench.tables import all_numbers, strip, table  # noqa: E402
from ladderfit.workbench.views import BY_KEY, offered  # noqa: E402


@pytest.fixture(scope="module")
def ladder() -> Ladder:
    return build_ladder(builders.choices(), builders.tables()).change({"sampling.draws": 600})


@pytest.fixture(autouse=True)
def _elsewhere(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A workbench writes beside its notebook."""
    monkeypatch.chdir(tmp_path)


@pytest.fixture
def bench(ladder: Ladder) -> Workbench:
    return Workbench(ladder)


def control(bench: Workbench, rung: str, words: str) -> Any:
    for found in bench.panel.controls[rung]:
        if words in (getattr(found.widget, "label", "") or found.widget.description):
            return found
    raise AssertionError(words)


def move(found: Any, value: list[float], *, settled: bool) -> None:
    number = found.widget.request.get("number", 0) + 1
    found.widget.value = value
    found.widget.request = {"number": number, "settled": settled, "value": value}


def test_at_most_seven_choices_and_four_views(bench: Workbench) -> None:
    assert all(1 <= len(controls) <= 7 for controls in bench.panel.controls.values())
    for rung in bench.panel.rungs:
        first, more = offered(bench.ladder, rung)
        assert 1 <= len(first) <= 4
        assert sorted({*first, *more}) == sorted([*first, *more])
        assert all(rung in BY_KEY[key].rungs for key in (*first, *more))


def test_views_beyond_four_stand_under_more(bench: Workbench) -> None:
    bench.open("anchors")
    more = [key for _, key in bench.bar.more.options]
    assert more[0] == ""
    assert more[1:] == offered(bench.ladder, "anchors")[1]
    bench.bar.more.value = "priors"
    assert bench.bar.view == "priors"
    assert len(bench.picture.figure.axes) == 2
    bench.bar.choose("relation")
    assert bench.bar.more.value == ""
    bench.open("expansion")
    assert bench.bar.view == "hubble"


def test_drag_and_release(bench: Workbench) -> None:
    periods = control(bench, "cepheids", "Periods")
    before, view = bench.numbers.value, bench.picture.points
    move(periods, [8.0, 100.0], settled=False)
    assert bench.numbers.value != before
    assert "Cepheids instead of 36" in bench.why.value
    assert bench.picture.points is view
    assert bench.result.size == 500
    move(periods, [8.0, 100.0], settled=True)
    assert bench.picture.points is not view
    assert bench.result.size == 600
    assert bench.ladder.choices.cepheids.periods == (8.0, 100.0)  # type: ignore[union-attr]
    bench.foot.undo.click()
    assert bench.ladder.choices.cepheids.periods == (5.0, 100.0)  # type: ignore[union-attr]
    assert periods.widget.value[0] == 5.0


def test_a_bound_that_was_not_moved_stays(ladder: Ladder) -> None:
    bench = Workbench(ladder.change({"cepheids.periods": [5.0, float("inf")]}))
    periods = control(bench, "cepheids", "Periods")
    shown = periods.widget.value
    move(periods, [7.0, shown[1]], settled=True)
    assert bench.ladder.choices.cepheids.periods == (7.0, float("inf"))  # type: ignore[union-attr]


def test_every_control_asks_for_a_change_that_can_be_made(bench: Workbench) -> None:
    """Set each control to another value: choices change, and no control is left behind."""
    for rung, controls in bench.panel.controls.items():
        for found in [inner for control in controls for inner in control.all()]:
            if found.box.layout.display == "none":
                continue
            before = bench.ladder.choices
            widget = found.widget
            if hasattr(widget, "request"):
                low, high = widget.low, widget.high
                middle = low + 0.4 * (high - low)
                value = [middle] if len(widget.value) == 1 else [widget.value[0], middle]
                move(found, value, settled=True)
            elif hasattr(widget, "options"):
                options = [
                    option[1] if isinstance(option, tuple) else option for option in widget.options
                ]
                if isinstance(widget.value, tuple):
                    widget.value = (options[0],)
                else:
                    widget.value = next(o for o in options if o != widget.value)
            else:
                widget.value = not widget.value
            words = f"{rung}: {found.widget}: {bench.foot.trust.value}"
            changed = bench.ladder.choices != before
            assert changed or bench.session.trouble is not None, words
            assert "went wrong" not in bench.foot.trust.value, words
            bench._undo()
            assert bench.ladder.choices == before, words


def test_the_last_anchor_leaves_the_controls_alive(bench: Workbench) -> None:
    control(bench, "anchors", "Tavin").widget.value = False
    alone = bench.numbers.value
    parallaxes = control(bench, "anchors", "Parallaxes")
    parallaxes.widget.value = False
    assert "lf-stale" in bench.widget._dom_classes
    assert "no anchor in use, so undetermined" in parallaxes.message.value
    assert 'role="alert"' in parallaxes.message.value
    assert bench.numbers.value == alone
    parallaxes.widget.value = True
    assert "lf-stale" not in bench.widget._dom_classes
    assert parallaxes.message.value == ""


def test_a_refused_value_is_explained_and_undone(bench: Workbench) -> None:
    periods = control(bench, "cepheids", "Periods")
    move(periods, [90.0, 20.0], settled=True)
    assert "expected a lower and a higher bound in days" in periods.message.value
    assert not bench.foot.undo.disabled
    bench.foot.undo.click()
    assert periods.message.value == ""
    assert periods.widget.value[0] == 5.0


def test_every_view_draws_and_has_a_table(bench: Workbench) -> None:
    """On every rung; what takes many fits is worked out once."""
    bench.change({"alternatives": {"cepheids.periods": [[8.0, 100.0]]}})
    bench.publish("slope", -3.26)
    seen = []
    for rung in bench.panel.rungs:
        bench.open(rung)
        first, more = offered(bench.ladder, rung)
        for view in (*first, *more):
            draw_and_list(bench, view)
            seen.append(view)
    assert set(seen) == {
        view for view in BY_KEY if view not in ("peaks", "outliers")
    }  # none modelled


def draw_and_list(bench: Workbench, view: str) -> None:
    bench.bar.choose(view)
    assert bench.bar.view == view
    assert bench.picture.figure.axes, bench.frame.table.value
    bench.bar.table.value = True
    assert "<table" in bench.frame.table.value, view
    assert "nan" not in bench.frame.table.value.lower().replace("resonan", ""), view
    bench.bar.table.value = False
    assert "went wrong" not in bench.foot.trust.value


def test_png_and_pdf(bench: Workbench, tmp_path: Path) -> None:
    for view in ("relation", "moduli", "corner", "column"):
        bench.bar.choose(view)
        bench.bar.save.click()
        assert (tmp_path / f"{view}-01.png").stat().st_size > 5_000
        assert (tmp_path / f"{view}-01.pdf").stat().st_size > 3_000
        assert f"Saved {view}-01.png and {view}-01.pdf" in bench.foot.trust.value


def test_pointing_and_clicking(bench: Workbench) -> None:
    points = bench.picture.points[0]
    star = str(points.names[4])
    bench._pointed(points, 4, False)
    assert bench.stars.name.value == star
    assert "of the expected spread" in bench.stars.words.value
    bench.stars.reason.value = "too red"
    bench._pointed(points, 4, True)
    (entry,) = bench.ladder.choices.cepheids.set_aside  # type: ignore[union-attr]
    assert (entry.star, entry.reason) == (star, "too red")
    assert bench.stars.button.description == "Put back"
    bench.stars.reason.value = "a blend"
    (entry,) = bench.ladder.choices.cepheids.set_aside  # type: ignore[union-attr]
    assert entry.reason == "a blend"
    bench.stars.button.click()
    assert bench.ladder.choices.cepheids.set_aside == ()  # type: ignore[union-attr]


def test_published_values_and_all_numbers(bench: Workbench) -> None:
    bench.publish("slope", -3.26)
    assert "lf-published" in bench.numbers.value
    bench.bar.numbers.value = True
    assert "−3.26" in bench.frame.table.value or "-3.26" in bench.frame.table.value
    assert "distance modulus, Q07" in bench.frame.table.value
    bench.entry.name.value = "hubble_constant"
    bench.entry.value.value = "seventy"
    bench.entry.button.click()
    assert "expected a value such as 73.0" in bench.entry.message.value
    bench.entry.value.value = "71,3"
    bench.entry.button.click()
    assert bench.published == {"slope": -3.26, "hubble_constant": 71.3}
    bench.entry.value.value = ""
    bench.entry.button.click()
    assert bench.published == {"slope": -3.26}
    bench.publish("slope", None)
    assert "lf-published" not in bench.numbers.value


def test_no_number_is_absurdly_long(bench: Workbench) -> None:
    for text in (strip(bench.result, None, {}), all_numbers(bench.result, None, {})):
        plain = re.sub(r"<svg.*?</svg>", "", text)
        numbers = re.findall(r"\d+\.\d+", re.sub(r"<[^>]*>", " ", plain))
        assert numbers
        assert all(len(number) <= 7 for number in numbers), numbers


def test_text_from_tables_is_escaped(ladder: Ladder) -> None:
    assert "<b>" not in table(("a",), [("<b>",)])
    tables = builders.tables()
    tables["cepheids"].loc[3, "ID"] = "<img src=x onerror=alert(1)>"
    bench = Workbench(build_ladder(builders.choices(), tables).change({"sampling.draws": 600}))
    place = list(bench.picture.points[0].names).index("<img src=x onerror=alert(1)>")
    bench._pointed(bench.picture.points[0], place, False)
    bench.bar.table.value = True
    assert "<img" not in bench.stars.words.value
    assert "<img" not in bench.frame.table.value


def test_a_ladder_of_the_expansion_alone() -> None:
    tables = {"expansion": builders.tables()["expansion"]}
    choices = {
        "expansion": builders.CHOICES["expansion"],
        "priors": {"peak_magnitude": {"normal": [-19.3, 0.05]}},
    }
    bench = Workbench(build_ladder(choices, tables).change({"sampling.draws": 600}))
    assert bench.panel.rungs == ("expansion",)
    assert bench.bar.view == "hubble"
    control(bench, "expansion", "Redshifts")
    with pytest.raises(ValueError, match="no rung 'cepheids'"):
        bench.open("cepheids")


def test_parallax_stars_alone() -> None:
    choices = {
        "relation": {"pivot": 10.0},
        "anchors": {
            "parallaxes": {
                **builders.CHOICES["anchors"]["parallaxes"],
                "magnitude": builders.CHOICES["cepheids"]["magnitude"],
            }
        },
    }
    tables = {"anchors.parallaxes": builders.tables()["anchors.parallaxes"]}
    bench = Workbench(build_ladder(choices, tables).change({"sampling.draws": 600}))
    assert bench.panel.rungs == ("anchors", "cepheids")
    assert bench.bar.view == "relation"
    move(control(bench, "cepheids", "Periods"), [7.0, 60.0], settled=True)
    assert bench.session.trouble is None


def test_a_section_that_goes_takes_its_choices_along(bench: Workbench) -> None:
    """As when a pin is gone back to that lacks a rung; undo brings it back."""
    for change in ({"supernovae": None, "expansion": None}, {"anchors.parallaxes": None}):
        bench.change(change)
        assert "went wrong" not in bench.foot.trust.value, bench.foot.trust.value
        assert bench.session.trouble is None
        for rung in bench.panel.rungs:
            bench.open(rung)
            assert "went wrong" not in bench.foot.trust.value, rung
        bench.foot.undo.click()
        bench.open("expansion")
        assert control(bench, "expansion", "Redshifts").widget.value == [0.023, 0.15]
