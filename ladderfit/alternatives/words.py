"""A comparison in plain words, for a terminal or a log."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

import pandas as pd

from ladderfit.alternatives.comparison import Comparison, Fit
from ladderfit.alternatives.systematics import ALL, systematics
from ladderfit.diagnostics import TRUSTED_K
from ladderfit.names import parameter
from ladderfit.rounding import rounded, to_place
from ladderfit.sensitivity.error_budget import TOTAL, budgeted
from ladderfit.wording import printable

MOST_ROWS = 60
_LONGEST = 60  # letters of an alternative's name


def comparison_text(comparison: Comparison, budget: pd.DataFrame) -> str:
    """What each alternative does to the few numbers that matter most, and how far to trust it.

    Parameters
    ----------
    comparison : Comparison
    budget : DataFrame
        Of the baseline, from `ladderfit.sensitivity.error_budget.error_budget`.

    Returns
    -------
    str
        Several paragraphs, without a line break at the end.
    """
    sections = [
        ("", [printable(comparison.title)]) if comparison.title else ("", []),
        ("Alternatives: mean ± sd (change in the baseline's errors)", fit_lines(comparison)),
        ("Systematics: largest change, spread", systematics_lines(comparison)),
        ("Error budget of the baseline: share of the variance", budget_lines(budget)),
        ("To note", note_lines(comparison)),
    ]
    return "\n\n".join(
        "\n".join([heading, *(f"  {line}" for line in lines)] if heading else lines)
        for heading, lines in sections
        if lines
    )


def short(fit: Fit, longest: int = _LONGEST) -> str:
    """An alternative's name, cut where it is long."""
    name = printable(fit.alternative.key or "baseline")
    return name if len(name) <= longest else f"{name[: longest - 3]}..."


def fit_lines(comparison: Comparison) -> list[str]:
    """One line per fit, aligned."""
    names = comparison.shown
    rows = [["", *(f"{name} [{parameter(name).unit}]" for name in names)]]
    for fit in (comparison.baseline, *comparison.fits[:MOST_ROWS]):
        numbers = [number(comparison, fit, name) for name in names]
        rows.append([short(fit), *(numbers if fit.done else [fit.outcome.status])])
    lines = _aligned(rows)
    left = len(comparison.fits) - MOST_ROWS
    return [*lines, *([f"and {left:,} more: see alternatives.csv"] if left > 0 else [])]


def number(comparison: Comparison, fit: Fit, name: str) -> str:
    """Mean and error, and the change in the baseline's errors."""
    mean, sd = fit.mean(name), fit.sd(name)
    if not math.isfinite(mean):
        return "not fitted"
    if fit is comparison.baseline:
        return str(rounded(mean, sd))
    return f"{rounded(mean, sd)} ({signed(comparison.shift(fit, name))})"


def signed(value: float) -> str:
    """Two decimals with a sign."""
    text = to_place(value, -2) if math.isfinite(value) else "-"
    return f"+{text}" if value > 0.0 else text


def systematics_lines(comparison: Comparison) -> list[str]:
    """One line per axis: of each number shown, the largest change and the spread."""
    found = systematics(comparison)
    names = comparison.shown
    rows = [["", *names]]
    for axis in (*comparison.axes, ALL):
        own = found[found["axis"] == axis].set_index("parameter")
        cells = []
        for name in names:
            digits = -parameter(name).digits
            largest, spread = (float(own[column][name]) for column in ("largest", "spread"))
            known = math.isfinite(largest)
            cells.append(f"{_place(largest, digits)}, {to_place(spread, digits)}" if known else "-")
        rows.append([printable(axis), *cells])
    return _aligned(rows)


def _place(value: float, digits: int) -> str:
    text = to_place(value, digits)
    return f"+{text}" if value > 0.0 else text


def budget_lines(budget: pd.DataFrame) -> list[str]:
    """One line per source, in per cent."""
    names = budgeted(budget)
    if not names:
        return []
    rows = [["", *names]]
    shares = 100.0 * budget[[f"{name}_share" for name in names]].to_numpy(dtype=float)
    for source, row in zip(map(str, budget.index), shares, strict=True):
        name = "all together (100 % if normal)" if source == TOTAL else printable(source)
        rows.append([name, *(f"{max(share, 0.0):.1f} %" for share in row)])
    return _aligned(rows)


def note_lines(comparison: Comparison) -> list[str]:
    """What failed, and what is not to be trusted."""
    lines = [
        f"{short(fit)}: {fit.outcome.status}: {printable(' '.join(fit.outcome.message.split()))}"
        for fit in comparison.failed
    ]
    heavy = [fit for fit in (comparison.baseline, *comparison.fits) if fit.done and not fit.trusted]
    lines += [
        f"{short(fit)}: do NOT trust these numbers (Pareto k above {TRUSTED_K}); "
        "they are left out of the systematics"
        for fit in heavy
    ]
    return lines


def _aligned(rows: Iterable[Sequence[str]]) -> list[str]:
    """Columns of equal width, two blanks apart."""
    table = [list(row) for row in rows]
    width = max(len(row) for row in table)
    widths = [max(len(row[c]) for row in table if c < len(row)) for c in range(width)]
    lines = [
        "  ".join(f"{cell:{w}}" for cell, w in zip(row, widths, strict=False)) for row in table
    ]
    return [line.rstrip() for line in lines]
