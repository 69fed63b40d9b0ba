"""Published values beside the posterior: those entered, and the claims of a claims file."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.names import label
from ladderfit.plots.theme import Theme, plain
from ladderfit.rounding import MINUS, Interval
from ladderfit.workbench.canvas.margins import margins
from ladderfit.workbench.claims import Compared
from ladderfit.workbench.points import Points
from ladderfit.workbench.shown import Shown
from ladderfit.workbench.why import signed

MOST_ROWS = 16
_TWO_LINES = 9  # rows up to which there is room for two lines each
_FARTHEST = 6.0  # combined errors, beyond which an arrow points outwards
_LETTERS = 36
_WIDE = 6.0  # inches


@dataclass(frozen=True)
class _Row:
    """One published value: its words, where it lies, and the parts of the combined error."""

    words: str
    value: str
    shift: float = 0.0
    ours: float = 0.0
    theirs: float = 0.0
    reason: str = ""


def published(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """Published less posterior mean, each in the combined error of both."""
    beside = shown.claims
    entered, claims = list(_entered(shown)), beside.rows
    if beside.trouble or not (entered or claims):
        figure.text(
            0.5,
            0.5,
            _instead(shown, figure.get_figwidth() >= _WIDE),
            ha="center",
            va="center",
            wrap=True,
        )
        return []
    few = len(entered) + len(claims) <= _TWO_LINES
    rows = [*entered, *(_of_claim(claim, few) for claim in claims)]
    left_out = len(rows) - MOST_ROWS
    axes = figure.subplots()
    margins(figure, 190 if claims else 130, 110, 24, 42)
    for place, row in enumerate(rows[:MOST_ROWS]):
        _draw(axes, place, row, theme)
    axes.axvline(0.0, color=theme.muted, linewidth=0.9, zorder=1.0)
    axes.set_yticks(range(len(rows[:MOST_ROWS])), [row.words for row in rows[:MOST_ROWS]])
    axes.tick_params(axis="y", labelsize=6.6)
    axes.set_ylim(len(rows[:MOST_ROWS]) - 0.4, -0.6)
    reach = 1.15 * float(np.clip(np.max(np.abs(axes.dataLim.intervalx)), 2.5, _FARTHEST))
    axes.set_xlim(-reach, reach)
    axes.set_xlabel("Published minus posterior mean [combined errors]", labelpad=1)
    if left_out > 0:
        words = f"{left_out} more in the table"
        figure.text(0.01, 0.99, words, va="top", fontsize=7.0, color=theme.muted)
    _legend(axes, theme)
    return []


def _instead(shown: Shown, wide: bool) -> str:
    beside = shown.claims
    if beside.trouble:
        more = len(beside.trouble) - 3
        lines = [*beside.trouble[:3], *([f"and {more} more, in the table"] if more > 0 else [])]
        return plain("\n".join(textwrap.fill(line, 84 if wide else 66) for line in lines))
    first = "Pick a claims file above" if beside.offered else "Put a claims file beside the ladder"
    return f"No published value yet.\n{first}, or enter a value under All numbers."


def _entered(shown: Shown) -> Iterator[_Row]:
    for name, value in shown.published.items():
        if name in shown.result.draws:
            interval = Interval.of(shown.result.draws[name])
            known = interval.sd > 0.0
            shift = (value - interval.mean) / interval.sd if known else 0.0
            reason = "" if known else "held fixed here"
            words = f"{value:g}".replace("-", MINUS)
            yield _Row(label(name), words, shift, 1.0, 0.0, reason)


def _of_claim(one: Compared, two_lines: bool) -> _Row:
    claim = one.claim
    what = claim.name or claim.words
    parts = [_cut(what)] if two_lines else [_cut(f"{what}, {claim.paper}" if claim.paper else what)]
    if two_lines and claim.paper:
        parts.append(_cut(claim.paper))
    words, value = plain("\n".join(parts)), claim.printed.removesuffix(f" {claim.unit}")
    if one.reason or not one.error > 0.0:
        return _Row(words, value, reason=one.reason or "neither has an error")
    return _Row(words, value, one.shift, one.sd / one.error, (one.moved.error or 0.0) / one.error)


def _cut(text: str) -> str:
    return text if len(text) <= _LETTERS else f"{text[: _LETTERS - 1]}…"


def _draw(axes: Axes, place: int, row: _Row, theme: Theme) -> None:
    ours, theirs = theme.accent(0), theme.accent(1)
    beyond = abs(row.shift) > _FARTHEST
    if row.reason:
        words = textwrap.shorten(row.reason.partition(";")[0], 92, placeholder=" …")
        axes.annotate(
            plain(textwrap.fill(words, 46)),
            (0.5, place),
            xycoords=("axes fraction", "data"),
            ha="center",
            va="center",
            fontsize=6.5,
            color=theme.ink,
            bbox={"facecolor": theme.paper, "edgecolor": "none", "pad": 1.0},
        )
    else:
        axes.errorbar(
            0.0, place, xerr=row.ours, marker=ours.marker, markersize=4.0, color=ours.colour,
            elinewidth=1.2, linestyle="none",
        )  # fmt: skip
        at = float(np.clip(row.shift, -1.08 * _FARTHEST, 1.08 * _FARTHEST))
        marker = theirs.marker if not beyond else ">" if row.shift > 0.0 else "<"
        axes.errorbar(
            at, place, xerr=None if beyond or not row.theirs else row.theirs, marker=marker,
            markersize=5.0, color=theirs.colour, elinewidth=1.0, linestyle="none",
        )  # fmt: skip
        if beyond:
            side = 1.0 if row.shift > 0.0 else -1.0
            axes.annotate(
                signed(row.shift), (at, place), xytext=(-6.0 * side, 0.0),
                textcoords="offset points", ha="right" if side > 0.0 else "left", va="center",
                fontsize=6.6, color=theme.ink,
            )  # fmt: skip
    axes.annotate(
        row.value, (1.02, place), xycoords=("axes fraction", "data"), va="center", fontsize=7.5
    )


def _legend(axes: Axes, theme: Theme) -> None:
    figure = axes.get_figure(root=True)
    if figure is None:
        return
    ours, theirs = theme.accent(0), theme.accent(1)
    handles = [
        axes.plot([], [], marker=a.marker, color=a.colour, markersize=s, linewidth=1.1, label=w)[0]
        for a, s, w in ((ours, 4.0, "posterior and its error"), (theirs, 5.0, "published"))
    ]
    figure.legend(handles=handles, loc="upper right", ncols=2, borderaxespad=0.2, fontsize=7.0)
