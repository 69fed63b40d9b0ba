"""Predictive checks: every p-value, and the deviations of Cepheids behind some of them."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from ladderfit.checks.predictive import Check, Checks
from ladderfit.checks.statistics import Sample
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
_MOST = 8  # groups of neighbours along a quantity


def checks_figure(checks: Checks, *, theme: Theme = LIGHT) -> Figure:
    """All p-values in one list, and deviations of the Cepheids along what may matter.

    Parameters
    ----------
    checks : Checks
        Of `ladderfit.checks.predictive.predictive_checks`.
    theme : Theme

    Returns
    -------
    Figure
        Without Cepheids, the list alone.
    """
    with theme.applied():
        rows = len(checks.checks) + len({check.sample for check in checks.checks})
        figure = new_figure(max(5.0, 0.9 + _ROW * rows))
        sample = next((s for s in checks.samples if s.name == "Cepheids"), None)
        if sample is None:
            list_panel(checks, figure.subplots(), theme=theme)
            return figure
        left, right = np.ravel(np.asarray(figure.subfigures(1, 2, width_ratios=(1.0, 1.25))))
        list_panel(checks, left.subplots(), theme=theme)
        names = [name for name in _WORDS if name in sample.along]
        panels = right.subplots(-(-(len(names) + 1) // 2), 2, squeeze=False).ravel()
        distribution_panel(sample, panels[0], theme=theme)
        for name, axes in zip(names, panels[1:], strict=False):
            along_panel(checks, sample, name, axes, theme=theme)
        for axes in panels[1 + len(names) :]:
            axes.set_axis_off()
    figure.set_size_inches(WIDTH, figure.get_size_inches()[1])
    return figure


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
    plain_log_axis(axes, [0.002, 0.01, 0.05, 0.2, 1.0])
    axes.set_xlim(low, 1.3)
    axes.set_yticks(ticks, labels, fontsize=6.5)
    axes.set_ylim(place, -1.0)
    axes.set_xlabel("p-value")
    axes.grid(axis="y", visible=False)


def distribution_panel(sample: Sample, axes: Axes, *, theme: Theme = LIGHT) -> None:
    """Deviations, averaged over draws as a histogram, and the normal they should follow."""
    z = sample.deviations
    edges = np.linspace(-4.0, 4.0, 33)
    share = np.histogram(np.clip(z, -3.99, 3.99), edges)[0] / len(z)
    axes.stairs(share, edges, color=theme.accent(0).colour, linewidth=1.2, label="deviations")
    x = np.linspace(-4.0, 4.0, 201)
    normal = np.exp(-0.5 * x**2) / np.sqrt(2.0 * np.pi) * z.shape[1] * (edges[1] - edges[0])
    axes.plot(x, normal, color=theme.ink, linewidth=0.9, linestyle=(0, (4, 1.5)), label="normal")
    axes.set_xlabel("deviation / expected spread")
    axes.set_ylabel("Cepheids")
    axes.set_ylim(0.0, 1.35 * max(float(share.max()), float(normal.max())))
    _legend(axes)


def along_panel(
    checks: Checks, sample: Sample, name: str, axes: Axes, *, theme: Theme = LIGHT
) -> None:
    """Mean and spread of the deviations along one quantity; both should keep their lines."""
    values = np.atleast_2d(sample.along[name]).mean(axis=0)
    values = np.exp(0.5 * values) if name == "stated error" else values
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
    axes.set_ylim(-0.75, 2.0)
    axes.set_yticks([-0.5, 0.0, 0.5, 1.0, 1.5])
    axes.set_xlabel(_WORDS[name])
    axes.set_title(_p_words(checks.checks, sample.name, name), fontsize=6.2)
    if name == "period":
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
        f"{check.about.split()[0]} {check.p:.{2 if check.p > 0.1 else 3}f}"
        for check in checks
        if check.sample == sample and check.about.endswith(f"with {name}")
    ]
    lines = [", ".join(found[at : at + 2]) for at in range(0, len(found), 2)]
    return "p of " + ",\n".join(lines)
