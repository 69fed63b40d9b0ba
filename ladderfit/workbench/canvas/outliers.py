"""Stars by how likely they are outliers, or by their weight: round the line, and off it."""

from __future__ import annotations

from matplotlib.figure import Figure

from ladderfit.plots.outliers import marked, relation_panel, residual_panel
from ladderfit.plots.theme import Theme
from ladderfit.workbench.canvas.margins import margins, place_label
from ladderfit.workbench.points import Points
from ladderfit.workbench.shown import Shown

_NAMED = 6  # stars that get their name


def outliers(figure: Figure, shown: Shown, theme: Theme) -> list[Points]:
    """Stars marked by what each is taken for, with the line and with residuals."""
    stars = [] if shown.worked is None else list(marked(shown.result, shown.worked))
    if not stars:
        figure.text(0.5, 0.5, "No star of this sample is left", ha="center", va="center")
        return []
    upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=[2.0, 1.3])
    margins(figure, 64, 12, 44, 42, hspace=0.07)
    relation_panel(shown.result, stars, upper, theme=theme)
    residual_panel(stars, lower, theme=theme, named=_NAMED)
    lower.set_xlabel("Period [d]", labelpad=1)
    for axes in (upper, lower):
        axes.yaxis.label.set_fontsize(7.5)
        place_label(axes, 46)
    handles, labels = upper.get_legend_handles_labels()
    figure.legend(
        handles, labels, loc="upper left", ncols=2, fontsize=7.0, borderaxespad=0.2,
        columnspacing=1.0, bbox_to_anchor=(0.01, 1.0),
    )  # fmt: skip
    found = []
    for part, table in stars:
        hosts, section = [str(host) for host in table.host], str(table["sample"].iloc[0])
        period = 10.0**part.x
        for axes, y in ((upper, part.data), (lower, part.residual)):
            found.append(Points(axes, period, y, part.name, hosts, section, part.residual, part.sd))
    return found
