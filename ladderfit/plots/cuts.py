"""The Hubble constant along the redshift cuts."""

from __future__ import annotations

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.names import parameter
from ladderfit.plots.theme import LIGHT, Accent, Theme, new_figure, plain_log_axis, series_of_ticks
from ladderfit.sensitivity.redshift_cuts import CutLine, RedshiftCuts


def cuts_figure(cuts: RedshiftCuts, *, theme: Theme = LIGHT) -> Figure:
    """Hubble constant against the lower cut, and against the upper one.

    Parameters
    ----------
    cuts : RedshiftCuts
        Of `ladderfit.sensitivity.redshift_cuts.hubble_along_cuts`.
    theme : Theme

    Returns
    -------
    Figure
        Two panels with one scale.  Error bars are those of each refit; the inner band
        holds the changes that the smaller sample alone leads to expect.
    """
    with theme.applied():
        figure = new_figure(3.2)
        left, right = figure.subplots(1, 2, sharey=True)
        cut_panel(cuts, left, lower=True, theme=theme)
        cut_panel(cuts, right, lower=False, theme=theme)
        known = parameter("hubble_constant")
        left.set_ylabel(f"{known.words} [{known.unit}]")
        left.legend(loc="best")
    return figure


def cut_panel(cuts: RedshiftCuts, axes: Axes, *, lower: bool, theme: Theme = LIGHT) -> None:
    """One of the two cuts, drawn into `axes`."""
    line = cuts.lower if lower else cuts.upper
    accent = theme.accent(0 if lower else 1)
    chosen = cuts.chosen[0 if lower else 1]
    _draw(axes, cuts, line, accent, theme)
    axes.axvline(chosen, color=theme.muted, linewidth=0.9, linestyle=(0, (1.2, 1.2)))
    if len(line.cut) > 1 and float(line.cut.min()) > 0.0:
        low, high = float(line.cut.min()) / 1.07, float(line.cut.max()) * 1.07
        plain_log_axis(axes, series_of_ticks(low, high))
        axes.set_xlim(low, high)
    axes.set_xlabel(f"{'Lower' if lower else 'Upper'} redshift cut (dotted: {chosen:g} chosen)")
    words = f"{line.kept.min():,} to {line.kept.max():,}" if len(line.kept) else "no"
    axes.set_title(f"{words} supernovae")


def _draw(axes: Axes, cuts: RedshiftCuts, line: CutLine, accent: Accent, theme: Theme) -> None:
    axes.axhline(cuts.mean, color=theme.ink, linewidth=0.9)
    axes.fill_between(
        line.cut,
        cuts.mean - line.expected,
        cuts.mean + line.expected,
        color=theme.tint(theme.ink, 0.16),
        linewidth=0,
        label="change expected of the sample (68 %)",
    )
    axes.errorbar(
        line.cut,
        line.mean,
        yerr=line.sd,
        color=accent.colour,
        marker=accent.marker,
        markersize=3.5,
        linewidth=1.0,
        elinewidth=0.8,
        ecolor=theme.tint(accent.colour, 0.55),
        label="refit and its error",
    )
