"""Views that need many fits, and the choices of the parallax sample."""

from __future__ import annotations

import threading
import time
from pathlib import Path
from typing import Any

import builders
import numpy as np
import pytest
from peak_ladders import EVERYTHING, ladder_with

pytestmark = [
    pytest.mark.filterwarnings("ignore::DeprecationWarning"),  # inside ipywidgets
]

from ladderfit.errors import LadderfitError  # noqa: E402
from ladderfit.kernels.compiling import in_halves  # noqa: E402
from ladderfit.ladder import Ladder, build_ladder  # noqa: E402
from ladderfit.workbench import Workbench  # noqa: E402
from ladderfit.workbench.parallax_controls import prior_kind  # noqa: E402
from ladderfit.workbench.slow import Slow  # noqa: E402
from ladderfit.workbench.works import priors_of  # noqa: E402

PRIOR, SELECTION = "anchors.parallaxes.distance_prior", "anchors.parallaxes.selection"


@pytest.fixture(scope="module")
def ladder() -> Ladder:
    tables = builders.tables()
    stars = tables["anchors.parallaxes"]
    stars["GLON"], stars["GLAT"] = np.linspace(10.0, 350.0, len(stars)), 2.0
    choices = builders.choices()
    choices["anchors"]["parallaxes"]["columns"] |= {"l": "GLON", "b": "GLAT"}
    return build_ladder(choices, tables).change({"sampling.draws": 600})


@pytest.fixture(autouse=True)
def _elsewhere(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A workbench writes beside its notebook."""
    monkeypatch.chdir(tmp_path)


@pytest.fixture
def bench(ladder: Ladder) -> Workbench:
    made = Workbench(ladder)
    made.open("anchors")
    return made


def _label(widget: Any) -> str:
    return str(widget.label if hasattr(widget, "request") else widget.description)


def control(bench: Workbench, words: str) -> Any:
    found = [
        one
        for one in bench.panel.all_controls()
        if _label(one.widget).startswith(words) and one.box.layout.display != "none"
    ]
    assert found, words
    return found[0]


def settle(found: Any, value: float) -> None:
    number = found.widget.request.get("number", 0) + 1
    found.widget.value = [value]
    found.widget.request = {"number": number, "settled": True, "value": [value]}


def wait_for(job: Any) -> None:
    end = time.monotonic() + 60
    while not job.done and time.monotonic() < end:
        time.sleep(0.01)
    assert job.done


def stars_of(bench: Workbench) -> Any:
    return bench.ladder.choices.anchors.parallaxes


@pytest.mark.parametrize(
    ("kind", "written", "words"),
    [
        ("uniform in volume", "uniform in volume", ()),
        ("exponential, fixed", {"exponential": 2.0}, ("Scale length",)),
        ("exponential, free", {"exponential": 2.0}, ("Scale length",)),
        ("exponential disc", {"disc": {"length": 2.5, "height": 0.1}}, ("Scale height",)),
        ("flat within bounds", "flat in modulus", ("Between moduli",)),
    ],
)
def test_every_distance_prior_of_the_ladder_file(
    bench: Workbench, kind: str, written: Any, words: tuple[str, ...]
) -> None:
    control(bench, "Prior of distances").widget.value = kind
    assert bench.session.trouble is None, bench.foot.trust.value
    assert prior_kind(bench.ladder.choices) == kind
    same = bench.ladder.change({PRIOR: written})
    assert same.choices == bench.ladder.choices
    free = np.ptp(bench.result.draws.get("distance_length", np.zeros(2))) > 0.0
    assert free == (kind == "exponential, free")
    for own in words:
        control(bench, own)
    control(bench, "Prior of distances").widget.value = "flat in modulus"
    assert bench.session.trouble is None
    assert stars_of(bench).modulus_bounds is None
    assert "distance_length" not in bench.ladder.choices.priors


def test_lengths_are_set(bench: Workbench) -> None:
    control(bench, "Prior of distances").widget.value = "exponential, free"
    settle(control(bench, "Scale length"), 3.0)
    assert stars_of(bench).exponential == 3.0
    assert str(bench.ladder.choices.prior("distance_length")) == "log-normal(3, 1.5)"
    control(bench, "Prior of distances").widget.value = "exponential disc"
    settle(control(bench, "Scale height"), 0.3)
    assert (stars_of(bench).disc.length, stars_of(bench).disc.height) == (2.5, 0.3)


def test_selection_is_switched_on_changed_and_off(bench: Workbench) -> None:
    kept = bench.ladder.kept["anchors.parallaxes"].kept
    control(bench, "Prior of distances").widget.value = "uniform in volume"
    control(bench, "Selection").widget.value = "magnitude limit"
    assert bench.session.trouble is None, bench.foot.trust.value
    chosen = stars_of(bench).selection
    assert chosen.band == "V"
    assert chosen.parallax_min is None
    assert bench.ladder.kept["anchors.parallaxes"].kept == kept  # it starts where none is lost
    settle(control(bench, "Softness"), 0.2)
    settle(control(bench, "Faintest magnitude"), chosen.limit + 1.0)
    control(bench, "Selection").widget.value = "both limits"
    after = stars_of(bench).selection
    assert (after.limit, after.softness) == (chosen.limit + 1.0, 0.2)
    assert after.parallax_min is not None
    assert bench.ladder.kept["anchors.parallaxes"].kept == kept
    control(bench, "Band of the limit").widget.value = "I"
    assert stars_of(bench).selection.band == "I"
    control(bench, "Selection").widget.value = "none"
    assert stars_of(bench).selection is None


def test_what_the_file_says_of_the_selection_is_shown(ladder: Ladder) -> None:
    stated = {"band": "H", "limit": 25.0, "softness": 0.1}
    bench = Workbench(ladder.change({PRIOR: "uniform in volume", SELECTION: stated}))
    assert control(bench, "Selection").widget.value == "magnitude limit"
    assert control(bench, "Band of the limit").widget.value == "H"
    assert control(bench, "Faintest magnitude").widget.value == [25.0]
    control(bench, "Selection").widget.value = "none"
    control(bench, "Selection").widget.value = "magnitude limit"
    assert stars_of(bench).selection.limit == 25.0


def test_a_selection_under_a_flat_prior_is_refused_beside_it(bench: Workbench) -> None:
    selection = control(bench, "Selection")
    selection.widget.value = "magnitude limit"
    assert "flat in modulus without bounds" in selection.message.value
    assert bench.session.trouble is not None
    bench.foot.undo.click()
    assert bench.session.trouble is None
    control(bench, "Prior of distances").widget.value = "flat within bounds"
    control(bench, "Selection").widget.value = "magnitude limit"
    assert bench.session.trouble is None, bench.foot.trust.value


def test_the_offset_is_fixed_or_free(bench: Workbench) -> None:
    offset = control(bench, "Residual offset")
    settle(control(bench, "Width of its prior"), 0.005)
    assert str(bench.ladder.choices.prior("parallax_offset")) == "normal(0, 0.005)"
    offset.widget.value = "fixed"
    settle(control(bench, "Value, or centre"), -0.014)
    assert str(bench.ladder.choices.prior("parallax_offset")) == "fixed(-0.014)"
    assert bench.result.sd("parallax_offset") == 0.0
    bench.bar.choose("parallaxes")
    assert len(bench.picture.figure.axes) == 2  # no joint contour of a fixed number
    offset.widget.value = "free, normal prior"
    assert len(bench.picture.figure.axes) == 3


def test_a_slow_view_works_beside_the_page(bench: Workbench) -> None:
    """Words at once; the picture when the page asks; kept for the same choices."""
    bench.frame.slow.background = True
    bench.bar.choose("priors")
    job = bench.frame.slow.current
    assert "fitting under each distance prior" in bench.frame.busy.value
    assert bench.pulse.every > 0
    wait_for(job)
    bench.pulse.beat += 1
    assert bench.frame.busy.value == ""
    assert len(bench.picture.figure.axes) == 2
    for _ in range(2):  # the picture is sent once more, as a page may drop the first
        assert bench.pulse.every > 0
        bench.pulse.beat += 1
    assert bench.pulse.every == 0
    shown = {name: str(np.mean(r.draws["zero_point"])) for name, r in job.value.items()}
    assert len(shown) == len(set(shown.values())) == 4
    assert job.value["flat in modulus"] is bench.result  # the same numbers as on show
    bench.bar.choose("relation")
    bench.bar.choose("priors")
    assert bench.frame.slow.current is None
    assert bench.pulse.every == 0


def test_terms_of_the_peaks() -> None:
    made = ladder_with("all rungs", EVERYTHING).change({"sampling.draws": 600})
    bench = Workbench(made)
    bench.open("supernovae")
    assert "peaks" in [key for _, key in bench.bar.more.options]
    bench.bar.more.value = "peaks"
    assert len(bench.picture.figure.axes) == 3
    names = {str(name) for points in bench.picture.points for name in points.names}
    assert names == {*map(str, made.peaks.name), *map(str, made.flow.name)}  # type: ignore[union-attr]
    bench.bar.table.value = True
    assert bench.frame.table.value.count("<table") == 3


@pytest.mark.parametrize("treatment", ["mixture", "Student-t"])
def test_stars_taken_for_outliers(bench: Workbench, treatment: str) -> None:
    """Offered once outliers are modelled; one that was put off the line comes first."""
    keys = [key for _, key in bench.bar.more.options]
    assert "outliers" not in keys
    tables = builders.tables()
    tables["cepheids"].loc[20, "Hmag"] -= 1.5
    odd = str(tables["cepheids"].loc[20, "ID"])
    made = build_ladder(builders.choices(), tables)
    made = made.change({"sampling.draws": 600, "cepheids.outliers.treatment": treatment})
    bench = Workbench(made)
    bench.bar.more.value = "outliers"
    assert len(bench.picture.figure.axes) == 2
    assert odd in [text.get_text() for text in bench.picture.figure.axes[1].texts]
    points = next(p for p in bench.picture.points if odd in p.names)
    assert (points.section, points.hosts[list(points.names).index(odd)]) == ("cepheids", "Orrel")
    bench.bar.table.value = True
    first = bench.frame.table.value.split("<tbody>")[1].split("</td>")[0]
    assert first.endswith(f">{odd}")
    bench.bar.table.value = False
    bench._pointed(points, list(points.names).index(odd), True)
    assert [e.star for e in bench.ladder.choices.cepheids.set_aside] == [odd]  # type: ignore[union-attr]
    assert bench.session.trouble is None, bench.foot.trust.value


def test_a_newer_change_ends_slow_work(bench: Workbench) -> None:
    bench.frame.slow.background = True
    bench.bar.choose("priors")
    first = bench.frame.slow.current
    control(bench, "Tavin").widget.value = False
    second = bench.frame.slow.current
    assert second is not first
    assert first.dropped.is_set()
    wait_for(second)
    bench.pulse.beat += 1
    assert not first.done
    assert bench.frame.busy.value == ""
    assert "went wrong" not in bench.foot.trust.value


def test_work_ends_within_a_fit(bench: Workbench) -> None:
    """The next evaluation of a kernel ends it, not the next fit."""
    slow, started, ended = Slow(background=True), threading.Event(), threading.Event()

    def forever(result: Any, tell: Any) -> None:
        started.set()
        try:
            while True:
                in_halves(lambda start, stop: time.sleep(0.001), 2, work=1)
        finally:
            ended.set()

    slow.ask("forever", bench.result, forever)
    assert started.wait(20)
    slow.cancel()
    assert ended.wait(20)


def test_work_that_cannot_be_done_says_why(bench: Workbench) -> None:
    def refused(result: Any, tell: Any) -> None:
        raise LadderfitError("there is nothing to fit")

    def broken(result: Any, tell: Any) -> None:
        raise KeyError("x")

    slow = Slow(background=False)
    assert slow.ask("a", bench.result, refused).words == "There is nothing to fit."
    assert "went wrong inside ladderfit: KeyError('x')" in slow.ask("b", bench.result, broken).words
    assert slow.ask("a", bench.result, broken).words == "There is nothing to fit."  # kept


def test_priors_to_compare_hold_those_that_are_chosen(ladder: Ladder) -> None:
    chosen = ladder.change({PRIOR: {"exponential": 3.5}})
    assert priors_of(chosen)["exponential, 3.5 kpc"] == {"exponential": 3.5}
    free = chosen.change({"priors.distance_length": {"log_normal": [3.5, 1.0]}})
    assert "exponential, free length" in priors_of(free)
    disc = priors_of(ladder.change({PRIOR: {"disc": {"length": 3.0, "height": 0.2}}}))
    assert disc["disc, 3 and 0.2 kpc"]["disc"]["height"] == 0.2
    bounded = ladder.change({"anchors.parallaxes.modulus_bounds": [6.0, 16.0]})
    assert "flat, 6 to 16 mag" in priors_of(bounded)
