"""Figures: what they show, that nothing is cut off, and that nobody needs colour to read them."""

from __future__ import annotations

import gc
import itertools
import re
import weakref
from collections.abc import Iterator
from pathlib import Path

import builders
import handmade
import matplotlib as mpl
import numpy as np
import pytest
from matplotlib._pylab_helpers import Gcf
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.text import Text

from ladderfit import plots
from ladderfit.checks.residuals import cepheid_residuals
from ladderfit.errors import LadderfitError
from ladderfit.ladder import build_ladder
from ladderfit.names import with_group
from ladderfit.plots import corner, moduli, relation
from ladderfit.plots.density import Density
from ladderfit.plots.theme import DARK, LIGHT, symbol
from ladderfit.result import Result
from ladderfit.rounding import Interval


@pytest.fixture(scope="module")
def whole() -> Result:
    return handmade.result(handmade.ladder())


@pytest.fixture(scope="module")
def drawn(whole: Result) -> dict[str, Figure]:
    made = plots.figures(whole)
    for figure in made.values():
        with LIGHT.applied():
            FigureCanvasAgg(figure).draw()
    return made


def words(figure: Figure) -> Iterator[Text]:
    """Every text that is drawn: ticks outside the axes' limits are not."""
    unseen = set()
    for axis in (axis for axes in figure.axes for axis in (axes.xaxis, axes.yaxis)):
        low, high = sorted(axis.get_view_interval())
        for tick in (*axis.get_major_ticks(), *axis.get_minor_ticks()):
            if not low <= tick.get_loc() <= high:
                unseen |= {id(tick.label1), id(tick.label2)}
    for artist in figure.findobj(Text):
        assert isinstance(artist, Text)
        if artist.get_visible() and artist.get_text().strip() and id(artist) not in unseen:
            yield artist


# ---- what is shown --------------------------------------------------------------------


@pytest.mark.parametrize(
    ("rung", "expected"),
    [
        ("whole", ["relation", "parallaxes", "corner", "moduli", "hubble"]),
        ("no expansion", ["relation", "parallaxes", "corner", "moduli", "hubble"]),
        ("relation and distances", ["relation", "parallaxes", "corner", "moduli"]),
        ("relation and parallaxes", ["relation", "parallaxes", "corner"]),
        ("supernovae and anchors", ["corner", "moduli", "hubble"]),
    ],
)
def test_each_rung_has_its_figures(rung: str, expected: list[str]) -> None:
    assert list(plots.figures(handmade.result(handmade.ladder(rung)))) == expected


@pytest.mark.parametrize("constant", [False, True])
def test_velocities_have_a_corner_and_a_diagram(constant: bool) -> None:
    result = handmade.result(handmade.velocity_ladder(constant=constant))
    made = plots.figures(result)
    assert list(made) == ["corner", "hubble"]
    top, bottom = made["hubble"].axes
    assert top.get_ylabel() == "Velocity [km/s]"
    assert bottom.get_xlabel() == "Distance [Mpc]"
    assert not top.yaxis_inverted()


def test_without_its_tables_a_result_still_has_a_corner(whole: Result) -> None:
    bare = Result(whole.choices, whole.draws, whole.diagnostics)
    assert list(plots.figures(bare)) == ["corner"]
    with pytest.raises(LadderfitError, match="missing or changed"):
        moduli.moduli_figure(bare)


def test_magnitudes_are_drawn_brighter_up(drawn: dict[str, Figure]) -> None:
    main, residual, parallax = drawn["relation"].axes
    assert main.yaxis_inverted()
    assert residual.yaxis_inverted()
    assert not parallax.yaxis_inverted()
    assert all(axes.yaxis_inverted() for axes in drawn["hubble"].axes)


def test_axes_carry_quantity_and_unit(drawn: dict[str, Figure]) -> None:
    main, residual, parallax = drawn["relation"].axes
    assert main.get_ylabel() == "Absolute magnitude [mag]\nat 12+log(O/H) = 8.69"
    assert residual.get_ylabel() == "Residual\n[mag]"
    assert parallax.get_ylabel() == "Parallax\nresidual [mas]"
    assert parallax.get_xlabel() == "Period [d]"


@pytest.mark.parametrize(
    ("figure", "names"),
    [
        ("relation", ["slope", "zero_point", "metallicity", "scatter"]),
        ("corner", list(handmade.NUMBERS)),
        ("hubble", ["peak_magnitude", "peak_scatter", "hubble_constant"]),
        ("moduli", [with_group("modulus", host) for host in handmade.MODULI]),
    ],
)
def test_numbers_are_those_of_the_draws(
    whole: Result, drawn: dict[str, Figure], figure: str, names: list[str]
) -> None:
    shown = "\n".join(text.get_text() for text in words(drawn[figure]))
    for name in names:
        assert str(Interval.of(whole.draws[name])) in shown, name


def test_the_shaded_part_of_a_marginal_is_the_interval(whole: Result) -> None:
    axes = Figure().subplots()
    corner.marginal_panel(whole, "hubble_constant", axes)
    interval = Interval.of(whole.draws["hubble_constant"])
    (fill,) = axes.collections
    x = fill.get_paths()[0].vertices[:, 0]  # type: ignore[index]
    step = np.ptp(axes.get_xlim()) / 239
    assert min(x) == pytest.approx(interval.low, abs=1.01 * step)
    assert max(x) == pytest.approx(interval.high, abs=1.01 * step)


def test_hosts_are_listed_by_distance_with_their_own_evidence(whole: Result) -> None:
    entries = moduli.host_moduli(whole)
    assert [entry.host for entry in entries] == ["Tavin", "Orrel", "Q07"]
    tavin, orrel, far = entries
    assert tavin.geometric == pytest.approx((0.0, 0.025), abs=1e-9)
    assert orrel.geometric is None  # not in use
    assert tavin.supernovae is None
    weights = np.array([1 / (0.1**2 + 0.1**2), 1 / (0.12**2 + 0.1**2)])
    offset = np.array([11.7, 11.75]) + 19.3 - 31.0
    expected = (np.sum(weights * offset) / weights.sum(), weights.sum() ** -0.5)
    assert far.supernovae == pytest.approx(expected, rel=1e-6)


def test_anchors_stand_out_among_many_hosts(whole: Result) -> None:
    three = relation.groups(whole)
    assert [group.accented for group in three] == [True, True, True]
    (only,) = [anchor.name for anchor in whole.ladder.geometric]
    many = relation.groups(whole, most=1)
    assert [group.accented for group in many] == [False, True]
    assert many[0].words == "2 other hosts"
    assert many[1].words == only


def test_binned_means(whole: Result) -> None:
    stars = cepheid_residuals(whole)
    assert stars is not None
    period, mean, error = relation.binned(stars)
    assert len(period) == 4
    assert np.all(np.diff(period) > 0)
    first = np.argsort(stars.x)[:9]
    weight = stars.sd[first] ** -2
    assert mean[0] == pytest.approx(np.sum(weight * stars.residual[first]) / weight.sum())
    assert error[0] == pytest.approx(weight.sum() ** -0.5)


# ---- regions by probability -----------------------------------------------------------


@pytest.mark.parametrize("correlation", [0.0, -0.95, 0.998])
def test_regions_hold_what_they_say(correlation: float) -> None:
    rng = np.random.default_rng(8)
    root = np.linalg.cholesky(np.array([[1.0, correlation], [correlation, 1.0]]))
    draws = root @ rng.normal(size=(2, 4000)) * np.array([[0.01], [30.0]])
    fresh = root @ rng.normal(size=(2, 40_000)) * np.array([[0.01], [30.0]])
    density = Density.of(draws)
    for chance in (0.68, 0.95):
        level = density.level(draws, chance)
        assert np.mean(density.at(draws) >= level) == pytest.approx(chance, abs=1e-3)
        # And not only these draws: the regions are not drawn tightly round single ones.
        assert np.mean(density.at(fresh) >= level) == pytest.approx(chance, abs=0.015)


def test_density_of_a_normal() -> None:
    draws = np.random.default_rng(9).normal(5.0, 2.0, (1, 20_000))
    density = Density.of(draws)
    x = np.linspace(0.0, 10.0, 41)
    shape = density.at(x[None, :]) / density.at(np.array([[5.0]]))
    assert shape == pytest.approx(np.exp(-0.125 * (x - 5.0) ** 2), abs=0.05)


def test_density_does_not_leak_across_a_bound() -> None:
    draws = np.abs(np.random.default_rng(10).normal(0.0, 0.05, (1, 20_000)))
    kept, leaked = Density.of(draws, (0.0,)), Density.of(draws)
    at_bound = np.array([[0.0, 0.02]])
    expected = float(np.exp(0.5 * (0.02 / 0.05) ** 2))
    high, low = kept.at(at_bound)
    assert high / low == pytest.approx(expected, rel=0.05)
    high, low = leaked.at(at_bound)
    assert high / low < 0.8 * expected  # what the mirror is for


def test_axes_stop_at_a_bound() -> None:
    draws = np.abs(np.random.default_rng(11).normal(0.0, 0.05, 500))
    assert corner.limits(draws, 0.0)[0] == 0.0
    assert corner.limits(draws + 5.0, 0.0)[0] > 4.9
    assert corner.limits(draws, -np.inf)[0] < 0.0


def test_a_fixed_parameter_has_no_panel() -> None:
    result = handmade.result(handmade.ladder("relation and distances"), parallax_offset=0.0)
    assert "parallax_offset" in result.headline
    assert corner.varying(result) == ("slope", "zero_point", "metallicity", "scatter")
    one = corner.corner_figure(result, ["slope"])
    assert one is not None
    assert len(one.axes) == 1
    with pytest.raises(KeyError):
        corner.corner_figure(result, ["hubble_constant"])


def test_too_many_parameters_leave_room_for_the_first() -> None:
    result = handmade.result(handmade.ladder())
    more = {f"zero_point_offset[{name}]": result.draws["slope"] for name in "abc"}
    crowded = Result(result.choices, {**result.draws, **more}, result.diagnostics)
    assert len(corner.varying(crowded)) == 11
    assert corner.shown(crowded) == tuple(handmade.NUMBERS)
    assert corner.shown(result) == corner.varying(result)


def test_contours_speak_of_probability_never_of_sigma(drawn: dict[str, Figure]) -> None:
    everything = " ".join(text.get_text() for figure in drawn.values() for text in words(figure))
    assert "68 % of the probability" in everything
    assert "95 % of the probability" in everything
    assert not re.search(r"sigma|σ", everything, re.IGNORECASE)


# ---- legibility -----------------------------------------------------------------------


@pytest.mark.parametrize("name", ["relation", "parallaxes", "corner", "moduli", "hubble"])
def test_no_text_is_cut_off(drawn: dict[str, Figure], name: str) -> None:
    figure = drawn[name]
    page = figure.bbox
    for text in words(figure):
        box = text.get_window_extent()
        inside = page.x0 - 1 <= box.x0 and box.x1 <= page.x1 + 1
        inside &= page.y0 - 1 <= box.y0 and box.y1 <= page.y1 + 1
        assert inside, text.get_text()


@pytest.mark.parametrize("name", ["relation", "parallaxes", "corner", "moduli", "hubble"])
def test_no_text_lies_on_text(drawn: dict[str, Figure], name: str) -> None:
    """Rotated tick labels have loose boxes; they are compared by their anchors instead."""
    texts = [text for text in words(drawn[name]) if text.get_rotation() in (0.0, 90.0)]
    for one, other in itertools.combinations(texts, 2):
        mine, its = one.get_window_extent(), other.get_window_extent()
        across = min(mine.x1, its.x1) - max(mine.x0, its.x0)
        up = min(mine.y1, its.y1) - max(mine.y0, its.y0)
        assert across < 1.0 or up < 1.0, (one.get_text(), other.get_text())


def test_ticks_of_the_corner_keep_apart(drawn: dict[str, Figure]) -> None:
    for axes in drawn["corner"].axes:
        places = [
            label.get_window_extent().x1
            for label in axes.get_xticklabels()
            if label.get_visible() and label.get_text()
        ]
        assert all(gap > 8.0 for gap in np.diff(sorted(places)))


@pytest.mark.parametrize("name", ["A$b$", r"$\frac", r"a\$b$", "x$", r"\alpha", "$$", "a_b^c"])
def test_names_from_tables_are_never_read_as_mathematics(name: str) -> None:
    choices, tables = builders.choices(), builders.tables()
    for table in (tables["cepheids"], tables["supernovae"]):
        table["Galaxy"] = table["Galaxy"].replace("Q07", name)
    moduli_of = {**handmade.MODULI, name: handmade.MODULI["Q07"]}
    draws = {f"modulus[{host}]": np.full(9, mean) for host, (mean, _) in moduli_of.items()}
    plain = handmade.result(handmade.ladder())
    found = build_ladder(choices, tables)
    result = Result(found.choices, {**plain.draws, **draws}, plain.diagnostics, found)
    figure = moduli.moduli_figure(result)
    assert figure is not None
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    label = figure.axes[0].get_yticklabels()[-1]
    text, mathematics = label._preprocess_math(label.get_text())  # type: ignore[attr-defined]
    assert (text, mathematics) == (name, False)
    bound = Figure().text(0.5, 0.5, symbol(f"scatter[{name}]"))
    FigureCanvasAgg(bound.figure).draw()


# ---- files and the state of the process -----------------------------------------------


def test_files_hold_text_and_repeat(tmp_path: Path) -> None:
    result = handmade.result(handmade.velocity_ladder())
    first = plots.save_figures(result, tmp_path / "one")
    second = plots.save_figures(result, tmp_path / "two")
    assert [path.name for path in first] == [
        *(f"{name}{suffix}" for name in ("corner", "hubble") for suffix in (".pdf", ".png")),
        *(f"{name}_column.pdf" for name in ("corner", "hubble")),
    ]
    for one, two in zip(first, second, strict=True):
        content = one.read_bytes()
        assert content == two.read_bytes(), one.name
        if one.suffix == ".pdf":
            assert content.startswith(b"%PDF")
            assert b"/Type3" not in content
            assert b"/CIDFontType2" in content  # TrueType: text can be searched and edited
        else:
            assert content.startswith(b"\x89PNG")


def test_nothing_global_is_left_behind(whole: Result) -> None:
    before = dict(mpl.rcParams)
    made = plots.figures(whole, theme=DARK)
    assert dict(mpl.rcParams) == before
    assert not Gcf.get_all_fig_managers()
    ghosts = [weakref.ref(figure) for figure in made.values()]
    assert made["corner"].get_facecolor()[:3] == pytest.approx(to_rgb(DARK.paper))
    del made
    gc.collect()
    assert [ghost() for ghost in ghosts] == [None] * 5


def test_panels_return_the_figure_they_drew_into(whole: Result) -> None:
    figure = Figure()
    axes = figure.subplots()
    assert isinstance(axes, Axes)
    assert relation.relation_panel(whole, axes) is figure
    gone = Figure().subplots()
    gone.remove()
    with pytest.raises(ValueError, match="no figure"):
        relation.relation_panel(whole, gone)


def test_figures_have_the_width_of_a_column_and_of_a_page(whole: Result) -> None:
    for width in (plots.COLUMN, plots.WIDTH):
        for name, figure in plots.figures(whole, width=width).items():
            assert figure.get_size_inches()[0] <= width + 0.01 or name == "corner", name
    narrow = plots.figures(whole, width=plots.COLUMN)
    assert all(figure.get_size_inches()[0] == plots.COLUMN for figure in narrow.values())
