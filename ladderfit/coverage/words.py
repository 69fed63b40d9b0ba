"""What a coverage experiment says, in plain sentences."""

from __future__ import annotations

import numpy as np

from ladderfit.coverage.outcome import ALPHA, Experiment
from ladderfit.coverage.ranks import DRAWS, LEVELS, covered

_FEW = 100  # mocks, below which only gross faults show
_WIDE = 34


def statement(experiment: Experiment) -> str:
    """A few plain sentences, and a table of what was judged."""
    return "\n".join([*_sentences(experiment), "", *_rows(experiment)])


def _sentences(experiment: Experiment) -> list[str]:
    size, asked = experiment.size, experiment.asked
    lines = [f"{experiment.title}: {size:,} simulated ladders, each fitted."]
    if experiment.design is None:
        lines.append(
            "Truths are fixed at the ladder's posterior means and the fits have its own priors: "
            "the table says how often intervals cover that truth.  A prior that pulls shows "
            "here; exact coverage is not expected of a Bayesian fit at one point."
        )
    else:
        lines.append(
            "Truths are drawn from the design prior, which the fits have too; under a right fit "
            f"a truth's rank among {DRAWS} draws is uniform."
        )
        lines.append(_verdict(experiment))
    if experiment.failures:
        lines.append(
            f"{len(experiment.failures):,} of {asked:,} could not be fitted and do not count, "
            f"which the ranks do not allow for.  The first: {experiment.failures[0]}"
        )
    if experiment.distrusted:
        lines.append(
            f"{experiment.distrusted:,} fits have importance weights too heavy to trust; "
            "they count all the same."
        )
    if size < _FEW:
        lines.append(f"With {size:,} ladders only gross faults show: repeat with more.")
    return lines


def _verdict(experiment: Experiment) -> str:
    count, outside = len(experiment.family), experiment.outside
    sure = f"{100 * (1 - ALPHA):.0f} %"
    if not outside:
        return (
            f"All {count} quantities judged stay inside their bands, which right fits all do "
            f"with a chance of {sure} or more: no fault is seen."
        )
    named = ", ".join(outside)
    verb = "leaves its band" if len(outside) == 1 else "leave their bands"
    return (
        f"{named} {verb}, while right fits keep all {count} with a chance of {sure} or more: "
        "the stated errors do not mean what they say."
    )


def _rows(experiment: Experiment) -> list[str]:
    drawn = experiment.design is not None
    heads = [f"{100 * level:.0f} %" for level in LEVELS]
    head = f"{'':<{_WIDE}}" + "".join(f"{text:>7}" for text in heads)
    lines = [head + ("       p" if drawn else "")]
    for name in experiment.family:
        shares = [covered(experiment.ranks[name], level) for level in LEVELS]
        line = f"{name:<{_WIDE}}" + "".join(f"{100 * share:7.1f}" for share in shares)
        if drawn:
            p = experiment.p_values[name]
            line += f"{p:8.3f}" if p >= 0.0005 else "  <0.001"
            line += "  outside" if name in experiment.outside else ""
        lines.append(line)
    errors = [100.0 * np.sqrt(level * (1.0 - level) / experiment.size) for level in LEVELS]
    note = f"{'expected error of each share':<{_WIDE}}"
    lines.append(note + "".join(f"{error:7.1f}" for error in errors))
    lines.append("Shares are of truths inside the central interval of each level, in per cent.")
    if drawn:
        lines.append(f"A band is left where p is {experiment.chance:.2g} or less.")
    return lines
