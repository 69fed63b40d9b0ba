"""One published value against its refits, and along the choices it may rest on."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import NullLocator

from ladderfit.plots.theme import LIGHT, Accent, Theme, new_figure, plain
from ladderfit.review.claims import WORDS, fixed_point
from ladderfit.review.refits import Refit
from ladderfit.review.reliance import Variation
from ladderfit.review.verdicts import ClaimReview
from ladderfit.rounding import rounded
from ladderfit.samples import FloatArray

_ROW = 0.19  # inches
_MOST_ROWS = 30
_FAR = 12.0  # errors from which on a claim is only pointed at
_CUTS = ("shortest period [d]", "longest period [d]")
_BRIEF = {"clip [s.d.]": "clip", "host left out": "without", "star left out": "without"}


def review_figure(found: ClaimReview, *, theme: Theme = LIGHT) -> Figure | None:
    """Every refit beside the claim, and the value along the choices.

    Parameters
    ----------
    found : ClaimReview
    theme : Theme

    Returns
    -------
    Figure or None
        Left the refits, with their spread under resampling, and single choices, with
        the change to be expected of other stars; right the period cuts.  The band is
        the claim and its error.  None where the claim cannot be judged.
    """
    if not found.refits:
        return None
    rows = [v for v in found.variations if v.axis not in _CUTS][:_MOST_ROWS]
    cuts = [axis for axis in _CUTS if sum(v.axis == axis for v in found.variations) > 1]
    count = len(found.refits) + len(rows) + (1 if rows else 0)
    with theme.applied():
        figure = new_figure(max(1.3 + _ROW * count, 3.4))
        grid = figure.add_gridspec(max(len(cuts), 1), 2 if cuts else 1, width_ratios=_widths(cuts))
        _list(figure.add_subplot(grid[:, 0]), found, rows, theme)
        for place, axis in enumerate(cuts):
            _cut(figure.add_subplot(grid[place, 1]), found, axis, theme)
        handles, labels = figure.axes[0].get_legend_handles_labels()
        figure.legend(handles, labels, loc="outside upper left", ncols=4)
    return figure


def _widths(cuts: Sequence[str]) -> list[float]:
    return [1.0, 0.85] if cuts else [1.0]


def _list(axes: Axes, found: ClaimReview, rows: list[Variation], theme: Theme) -> None:
    """Refits on top, single choices below."""
    _band(axes, found, theme, vertical=True)
    n = len(found.refits)
    labels = [_brief(refit) for refit in found.refits]
    _dots(axes, np.arange(1), found.refits[:1], theme.accent(0), "as described")
    _dots(axes, np.arange(1, n), found.refits[1:], theme.accent(1), "other refits")
    places: list[float] = list(range(n))
    ends = _ends(found)
    if rows:
        below = np.arange(len(rows)) + n + 0.8
        _choices(axes, rows, np.asarray(below), ends, theme)
        places += [float(place) for place in below]
        labels += [plain(f"{_BRIEF.get(v.axis, v.axis)} {v.words}") for v in rows]
    axes.set_yticks(places, labels)
    axes.tick_params(axis="y", length=0)
    axes.grid(visible=False, axis="y")
    axes.set_ylim(places[-1] + 0.7, -0.7)
    axes.set_xlim(*ends)
    axes.set_xlabel(f"{found.claim.words} [{found.claim.unit}]")
    axes.locator_params(axis="x", nbins=6)


def _ends(found: ClaimReview) -> tuple[float, float]:
    """Limits that hold the claim, every refit, and choices that move it by a few errors."""
    step = found.step
    low = min(refit.value - refit.spread for refit in found.refits)
    high = max(refit.value + refit.spread for refit in found.refits)
    if not _far(found):
        low, high = min(low, found.judged.value - step), max(high, found.judged.value + step)
    near = [v.value for v in found.variations if v.axis not in _CUTS]
    near = [value for value in near if low - 4.0 * step < value < high + 4.0 * step]
    low, high = min([low, *near]), max([high, *near])
    return low - 0.06 * (high - low), high + 0.06 * (high - low)


def _far(found: ClaimReview) -> bool:
    """Whether the claim lies so far off that it would squeeze everything else together."""
    first = found.refits[0]
    return abs(first.difference) > _FAR * max(found.step, first.spread)


def _choices(
    axes: Axes,
    rows: list[Variation],
    places: FloatArray,
    ends: tuple[float, float],
    theme: Theme,
) -> None:
    """One point per choice; one beyond the ends is an arrow at the end, with its value."""
    accent = theme.accent(2)
    inside = [ends[0] <= v.value <= ends[1] for v in rows]
    axes.errorbar(
        [v.value for v, shown in zip(rows, inside, strict=True) if shown],
        places[inside],
        xerr=[
            0.0 if math.isnan(v.expected) else v.expected
            for v, shown in zip(rows, inside, strict=True)
            if shown
        ],
        linestyle="none",
        marker=accent.marker,
        markersize=3.2,
        color=accent.colour,
        elinewidth=1.0,
        label="one choice changed",
    )
    for each, place, shown in zip(rows, places, inside, strict=True):
        if shown:
            continue
        right = each.value > ends[1]
        value = rounded(each.value, each.expected).value
        axes.annotate(
            f"{value}  \N{RIGHTWARDS ARROW}" if right else f"\N{LEFTWARDS ARROW}  {value}",
            (0.98 if right else 0.02, place),
            xycoords=("axes fraction", "data"),
            ha="right" if right else "left",
            va="center",
            fontsize=7.5,
            color=accent.colour,
        )


def _dots(
    axes: Axes, rows: np.ndarray, refits: Sequence[Refit], accent: Accent, words: str
) -> None:
    if not refits:
        return
    axes.errorbar(
        [refit.value for refit in refits],
        rows,
        xerr=[refit.spread for refit in refits],
        linestyle="none",
        marker=accent.marker,
        markersize=3.8,
        color=accent.colour,
        elinewidth=1.2,
        label=words,
    )


def _brief(refit: Refit) -> str:
    """A way in few words, for a tick."""
    way = refit.way
    clip = "" if way.treatment.clip is None else f", clip {way.treatment.clip:g}"
    if way.joint:
        return f"hierarchical{clip}"
    if way.treatment.period_errors:
        return f"both errors{clip}"
    return f"weights: {way.treatment.weights.replace(' and ', ', ')}{clip}"


def _band(axes: Axes, found: ClaimReview, theme: Theme, *, vertical: bool) -> None:
    """The claim and its error."""
    claim = found.judged
    if _far(found):
        if vertical:
            _pointed_at(axes, found, theme)
        return
    line, span = (axes.axvline, axes.axvspan) if vertical else (axes.axhline, axes.axhspan)
    half = claim.error if claim.error is not None else claim.half_unit
    words = "claim and its error" if claim.error is not None else "claim and its rounding"
    span(
        claim.value - half,
        claim.value + half,
        color=theme.tint(theme.ink, 0.14),
        linewidth=0,
        label=words if vertical else None,
    )
    line(claim.value, color=theme.ink, linewidth=0.9)


def _pointed_at(axes: Axes, found: ClaimReview, theme: Theme) -> None:
    """A claim beyond the limits, as an arrow to its side."""
    right = found.refits[0].difference > 0.0
    words = f"claim {fixed_point(found.judged.value, found.claim.decimals)}"
    axes.text(
        0.98 if right else 0.02,
        1.01,
        f"{words}  \N{RIGHTWARDS ARROW}" if right else f"\N{LEFTWARDS ARROW}  {words}",
        transform=axes.transAxes,
        ha="right" if right else "left",
        va="bottom",
        fontsize=7.5,
        color=theme.ink,
    )


def _cut(axes: Axes, found: ClaimReview, axis: str, theme: Theme) -> None:
    """The value along one end of the period range; the band is the change to be expected."""
    listed = [v for v in found.variations if v.axis == axis]
    periods = _finite([v.place for v in listed], axis)
    order = np.argsort(periods)
    x = np.array(periods)[order]
    value = np.array([v.value for v in listed])[order]
    expected = np.array([v.expected for v in listed])[order]
    start = found.variations[0].value - found.variations[0].change
    _band(axes, found, theme, vertical=False)
    accent = theme.accent(3)
    axes.errorbar(
        x,
        value,
        yerr=expected,
        color=accent.colour,
        marker=accent.marker,
        markersize=3.4,
        linewidth=1.0,
        elinewidth=0.9,
    )
    axes.axhline(start, color=theme.accent(0).colour, linewidth=0.9, linestyle=(0, (1.2, 1.2)))
    axes.set_xscale("log")
    axes.set_xlim(float(x[0]) / 1.2, float(x[-1]) * 1.2)
    axes.set_xticks(x, [_tick(v) for v in np.array(listed, dtype=object)[order]])
    axes.xaxis.set_minor_locator(NullLocator())
    axes.set_xlabel(f"{axis[0].upper()}{axis[1:]}")
    axes.set_ylabel(f"{WORDS[found.claim.quantity]} [{found.claim.unit}]")
    axes.locator_params(axis="y", nbins=5)


def _tick(each: Variation) -> str:
    return f"{each.place:g}" if math.isfinite(each.place) and each.place > 0.0 else "none"


def _finite(places: list[float], axis: str) -> list[float]:
    """Periods to plot at; no cut at all is drawn just beyond the last."""
    known = [place for place in places if math.isfinite(place) and place > 0.0]
    shortest = axis == _CUTS[0]
    edge = min(known, default=1.0) / 1.6 if shortest else max(known, default=100.0) * 1.6
    return [place if math.isfinite(place) and place > 0.0 else edge for place in places]
