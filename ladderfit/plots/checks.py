"""Predictive checks: every p-value, and the deviations behind some of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure, SubFigure

from ladderfit.checks.predictive import Check, Checks
from ladderfit.checks.statistics import PLAIN, Sample
from ladderfit.plots.theme import LIGHT, WIDTH, Theme, new_figure, plain, plain_log_axis
from ladderfit.samples import FloatArray

_ROW = 0.135  # inches per check
_SMALL = 0.05
_WORDS = {
    "period": "log period [d]",
    "colour": "colour [mag]",
    "metallicity": "metallicity [dex]",
    "distance": "host modulus [mag]",
    "stated error": "stated error [mag]",
}
_PEAK_WORDS = {  # in the order in which they are shown
    "colour": "colour [mag]",
    "width": "width",
    "decline rate": "decline rate [mag]",
    "redshift": "redshift",
    "distance": "host modulus [mag]",
    "host mass": "log host mass [$M_\\odot$]",
}
_LOGS = {"stated error": 0.5, "redshift": 1.0}  # kept as logarithms of a power
_PANELS = 4  # beside the lists of supernovae
_MOST = 8  # groups of neighbours along a quantity


def checks_figure(checks: Checks, *, theme: Theme = LIGHT) -> Figure:
    """All p-values, and deviations along what may matter.

    Parameters
    ----------
    checks : Checks
        Of `ladderfit.checks.predictive.predictive_checks`.
    theme : Theme

    Returns
    -------
    Figure
        Stars, and under them supernovae whose peaks have terms: those in hosts, those in
        the expansion, and what the deviations look like.  Without Cepheids and terms, the
        list alone.
    """
    stars, supernovae = _apart(checks)
    parts = [part for part in (stars, supernovae) if part.checks] or [stars]
    heights = [_height(part) for part in parts]
    with theme.applied():
        figure = new_figure(sum(heights))
        if len(parts) == 1:
            where: list[Figure | SubFigure] = [figure]
        else:
            where = list(np.ravel(np.asarray(figure.subfigures(2, 1, height_ratios=heights))))
        for part, place in zip(parts, where, strict=True):
            (_supernovae if part is supernovae else _stars)(part, place, theme)
    figure.set_size_inches(WIDTH, figure.get_size_inches()[1])
    return figure


def peaks_have_terms(checks: Checks) -> bool:
    """Whether there are supernovae whose peaks have terms, which fill panels of their own."""
    return any(sample.group and sample.alone != PLAIN for sample in checks.samples)


def _apart(checks: Checks) -> tuple[Checks, Checks]:
    """Checks of stars, and of supernovae where their peaks have terms; else all are the former."""
    if not peaks_have_terms(checks):
        return checks, Checks(())
    near = _only(checks, [sample for sample in checks.samples if not sample.group])
    return near, _only(checks, [sample for sample in checks.samples if sample.group])


def _only(checks: Checks, samples: list[Sample]) -> Checks:
    names = {sample.name for sample in samples}
    chosen = tuple(check for check in checks.checks if check.sample in names)
    return replace(checks, checks=chosen, samples=tuple(samples))


def _groups_of(checks: Checks) -> list[Checks]:
    """Supernovae by their population, hosts first."""
    groups = dict.fromkeys(sample.group for sample in checks.samples)
    parts = [_only(checks, [s for s in checks.samples if s.group == group]) for group in groups]
    return [part for part in parts if part.checks]


def _height(checks: Checks) -> float:
    """Height of a part of the figure [inches]."""
    lists = [part.checks for part in (_groups_of(checks) if peaks_have_terms(checks) else [checks])]
    rows = max(len(each) + len({check.sample for check in each}) for each in lists)
    return max(5.0, 0.9 + _ROW * rows)


def _stars(checks: Checks, place: Figure | SubFigure, theme: Theme) -> None:
    """The list, and the Cepheids along what may matter."""
    sample = next((s for s in checks.samples if s.name == "Cepheids"), None)
    if sample is None:
        list_panel(checks, place.subplots(), theme=theme)
        return
    left, right = np.ravel(np.asarray(place.subfigures(1, 2, width_ratios=(1.0, 1.25))))
    list_panel(checks, left.subplots(), theme=theme)
    names = [name for name in _WORDS if name in sample.along]
    panels = right.subplots(-(-(len(names) + 1) // 2), 2, squeeze=False).ravel()
    distribution_panel(sample, panels[0], theme=theme)
    for name, axes in zip(names, panels[1:], strict=False):
        along_panel(checks, sample, name, axes, theme=theme)
    for axes in panels[1 + len(names) :]:
        axes.set_axis_off()


def _supernovae(checks: Checks, place: Figure | SubFigure, theme: Theme) -> None:
    """A list for each population, and the larger one's deviations."""
    groups = _groups_of(checks)
    widths = (*(1.0 for _ in groups), 0.85)
    *lists, right = np.ravel(np.asarray(place.subfigures(1, len(widths), width_ratios=widths)))
    for part, where in zip(groups, lists, strict=True):
        list_panel(part, where.subplots(), theme=theme)
    supernova_panels(checks, list(right.subplots(_PANELS, 1)), theme=theme, stacked=True)


def supernova_panels(
    checks: Checks, panels: Sequence[Axes], *, theme: Theme = LIGHT, stacked: bool = False
) -> None:
    """Distributions of peaks and inputs of one population, and its peaks along what may matter.

    Parameters
    ----------
    checks : Checks
    panels : sequence of Axes
        As many as are filled; those left over show nothing.
    theme : Theme
    stacked : bool
        Whether they stand in one column, so that distributions share a label.
    """
    far = [sample for sample in checks.samples if sample.group]
    sizes = {sample.group: sample.deviations.shape[1] for sample in far}
    group = max(sizes, key=lambda name: sizes[name])
    shown = [sample for sample in far if sample.group == group]
    peaks = next((sample for sample in shown if "," not in sample.name), None)
    for sample, axes in zip(shown, panels, strict=False):
        distribution_panel(sample, axes, theme=theme, legend=sample is shown[0])
        if stacked and sample is not shown[-1]:
            axes.set_xlabel("")
    left = list(panels[len(shown) :])
    names = [] if peaks is None else [name for name in _PEAK_WORDS if name in peaks.along]
    for name, axes in zip(names, left, strict=False):
        if peaks is not None:
            along_panel(checks, peaks, name, axes, theme=theme, legend=name == names[0])
    for axes in left[len(names) :]:
        axes.set_axis_off()


def list_panel(checks: Checks, axes: Axes, *, theme: Theme = LIGHT) -> None:
    """One row per check: what it is about, and its p-value on a logarithmic axis."""
    place, ticks, labels = 0.0, [], []
    previous = None
    for check in checks.checks:
        if check.sample != previous:
            place += 1.0 if previous is not None else 0.0
            axes.text(
                0.0,
                place,
                plain(f"{check.sample} ({check.size:,})"),
                transform=axes.get_yaxis_transform(),
                fontsize=7.0,
                fontweight="bold",
                va="center",
                ha="right",
            )
            place += 1.0
            previous = check.sample
        accent = theme.accent(1 if check.p < _SMALL else 0)
        axes.plot(check.p, place, marker=accent.marker, color=accent.colour, markersize=3.5)
        ticks.append(place)
        labels.append(check.about)
        place += 1.0
    low = min([0.01, *(0.7 * check.p for check in checks.checks)])
    axes.axvspan(low, _SMALL, color=theme.tint(theme.ink, 0.08), linewidth=0)
    plain_log_axis(axes, [0.001, 0.05, 1.0] if low < _SMALL / 10.0 else [0.01, 0.05, 0.2, 1.0])
    axes.set_xlim(low, 1.3)
    axes.set_yticks(ticks, labels, fontsize=6.5)
    axes.set_ylim(place, -1.0)
    axes.set_xlabel("p-value")
    axes.grid(axis="y", visible=False)


def distribution_panel(
    sample: Sample, axes: Axes, *, theme: Theme = LIGHT, legend: bool = True
) -> None:
    """Deviations, averaged over draws as a histogram, and the normal they should follow."""
    z = sample.deviations
    edges = np.linspace(-4.0, 4.0, 33)
    share = np.histogram(np.clip(z, -3.99, 3.99), edges)[0] / len(z)
    axes.stairs(share, edges, color=theme.accent(0).colour, linewidth=1.2, label="deviations")
    x = np.linspace(-4.0, 4.0, 201)
    normal = np.exp(-0.5 * x**2) / np.sqrt(2.0 * np.pi) * z.shape[1] * (edges[1] - edges[0])
    axes.plot(x, normal, color=theme.ink, linewidth=0.9, linestyle=(0, (4, 1.5)), label="normal")
    axes.set_xlabel("deviation / expected spread")
    axes.set_ylabel("supernovae" if sample.group else sample.name)
    room = 1.8 if sample.group and legend else 1.35
    axes.set_ylim(0.0, room * max(float(share.max()), float(normal.max())))
    if sample.group:
        words = sample.name if "," in sample.name else f"peaks, {sample.group}"
        axes.set_title(words, fontsize=7.0)
        axes.xaxis.label.set_fontsize(7.5)
    if legend:
        _legend(axes)


def along_panel(
    checks: Checks,
    sample: Sample,
    name: str,
    axes: Axes,
    *,
    theme: Theme = LIGHT,
    legend: bool | None = None,
) -> None:
    """Mean and spread of the deviations along one quantity; both should keep their lines."""
    values = np.atleast_2d(sample.along[name]).mean(axis=0)
    values = np.exp(_LOGS[name] * values) if name in _LOGS else values
    here = np.isfinite(values)
    x, z = values[here], sample.deviations[:, here]
    groups = _groups(x)
    centre = np.array([np.median(x[g]) for g in groups])
    size = np.array([len(g) for g in groups])
    mean = np.array([z[:, g].mean() for g in groups])
    spread = np.array([np.sqrt((z[:, g] ** 2).mean()) for g in groups])
    for level, y, error, accent, word in (
        (0.0, mean, 1.0 / np.sqrt(size), theme.accent(0), "mean"),
        (1.0, spread, 1.0 / np.sqrt(2.0 * size), theme.accent(1), "spread"),
    ):
        axes.axhline(level, color=theme.ink, linewidth=0.8)
        axes.errorbar(
            centre,
            y,
            yerr=error,
            color=accent.colour,
            marker=accent.marker,
            markersize=3.2,
            linewidth=0.9,
            linestyle=accent.line,
            elinewidth=0.8,
            label=word,
        )
    axes.set_ylim(-0.75, 2.8 if sample.group and legend else 2.0)
    axes.set_yticks([-0.5, 0.0, 0.5, 1.0, 1.5])
    axes.set_xlabel((_PEAK_WORDS if sample.group else _WORDS)[name])
    axes.set_title(_p_words(checks.checks, sample.name, name), fontsize=6.2)
    if name == "period" if legend is None else legend:
        _legend(axes)


def _legend(axes: Axes) -> None:
    axes.legend(loc="upper center", ncols=2, columnspacing=0.8, handlelength=1.5, fontsize=6.5)


def _groups(x: FloatArray) -> list[np.ndarray[tuple[int], np.dtype[np.int64]]]:
    """Neighbours along x, about equally many in each group; equal values stay together."""
    count = int(np.clip(len(x) // 12, 1, _MOST))
    levels, of = np.unique(x, return_inverse=True)
    before = np.cumsum(np.bincount(of)) - np.bincount(of)
    group = of if len(levels) <= _MOST else (before * count // len(x))[of]
    return [np.flatnonzero(group == each) for each in np.unique(group)]


def _p_words(checks: tuple[Check, ...], sample: str, name: str) -> str:
    found = [
        f"{check.about.split()[0]} {f'{check.p:.2f}' if check.p > 0.1 else check.p_words}"
        for check in checks
        if check.sample == sample and check.about.endswith(f"with {name}")
    ]
    lines = [", ".join(found[at : at + 2]) for at in range(0, len(found), 2)]
    return "p of " + ",\n".join(lines)
