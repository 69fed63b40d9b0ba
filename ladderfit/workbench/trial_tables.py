"""The numbers of choices on trial, of checks and of published values, as HTML; no widgets."""

from __future__ import annotations

import html
import math
from collections.abc import Sequence
from typing import Any

from ladderfit.alternatives import Comparison
from ladderfit.alternatives.words import number, short
from ladderfit.anchors import AnchorComparison
from ladderfit.checks.outliers import outlier_table
from ladderfit.checks.peak_views import peak_view, views_of
from ladderfit.checks.predictive import Checks
from ladderfit.influence import Influence
from ladderfit.names import parameter
from ladderfit.result import Result
from ladderfit.rounding import MINUS, Interval, rounded, to_place
from ladderfit.sensitivity.power_scaling import PriorSensitivity
from ladderfit.workbench.shown import Shown
from ladderfit.workbench.tables import table
from ladderfit.workbench.view_tables import farthest, signed_at
from ladderfit.workbench.why import SHORT, signed

MOST_ROWS = 60
_LONGEST = 60
_SHIFT = (
    "<p>Shift: published minus posterior mean, in the root of both squared errors, as if the two "
    "were independent; without a published error, in the posterior's. Claims are held against the "
    "choices in force, whatever the paper did: <b>ladderfit review</b> refits as it describes.</p>"
)


def anchors(shown: Shown) -> str:
    """Each anchor alone and left out, its weight and its tension; what they say, in words."""
    found: AnchorComparison = shown.worked
    names = found.followed
    head = ["anchor", "weight", "tension [sd]"]
    head += [f"{words}: {_short(n)}" for n in names for words in ("alone", "without")]
    rows = []
    for case in found.cases:
        weight = f"{100.0 * case.weight:.0f} %" if math.isfinite(case.weight) else ""
        row = [case.anchor, weight, "" if case.tension is None else _one(case.tension.deviations)]
        for name in names:
            row += [_of(case.alone, name), _of(case.without, name)]
        rows.append(row)
    return _sentences(found.sentences()) + table(head, rows)


def influence(shown: Shown) -> str:
    """What each object does to every target, the most influential first."""
    found: Influence = shown.worked
    name = "zero_point" if shown.rung in ("anchors", "cepheids") else "hubble_constant"
    name = name if name in found.targets else found.targets[0]
    ranked = found.by(name).head(MOST_ROWS)
    head = ["object", "kind", "host", *(f"change of {_short(n)}" for n in found.targets), "how"]
    rows = [
        [
            str(line["name"]),
            str(line["kind"]),
            str(line["host"]),
            *(_change(float(line[n]), found.errors[n]) for n in found.targets),
            str(line["how"]),
        ]
        for _, line in ranked.iterrows()
    ]
    return _sentences(found.sentences()) + table(head, rows)


def sensitivity(shown: Shown) -> str:
    """Sensitivity to priors and data, and the prior that does most."""
    found: PriorSensitivity = shown.worked
    rows = [
        (
            str(name),
            to_place(float(line["prior"]), -3),
            to_place(float(line["likelihood"]), -3),
            str(line["largest"]),
            str(line["verdict"]),
        )
        for name, line in found.table.iterrows()
    ]
    head = ("parameter", "to priors", "to data", "most to the prior of", "verdict")
    return _sentences(found.sentences()) + table(head, rows)


def alternatives(shown: Shown) -> str:
    """Every fit, with its change in the baseline's errors."""
    found: Comparison = shown.worked
    names = found.shown
    rows = [
        [
            short(fit, _LONGEST),
            *(number(found, fit, n) if fit.done else fit.outcome.status for n in names),
        ]
        for fit in (found.baseline, *found.fits)
    ]
    head = ["alternative", *map(_short, names)]
    return "<p>In brackets: the change in errors of the baseline.</p>" + table(head, rows)


def checks(shown: Shown) -> str:
    """Every check with its p-value; stars that are probably outliers."""
    found: Checks = shown.worked
    rows = [
        (check.sample, check.about, check.p_words, f"{check.size:,}")
        for check in sorted(found.checks, key=lambda check: check.p)
    ]
    words = [f"{name}: no checks, as {why}" for name, why in found.left_out.items()]
    text = _sentences(words) + table(("sample", "what of it", "p-value", "objects"), rows)
    return _outliers(outlier_table(shown.result), 20) + text


def outliers(shown: Shown) -> str:
    """The stars that follow the relation least."""
    return _outliers(shown.worked, MOST_ROWS) or table((), [])


def _outliers(found: Any, most: int) -> str:
    """Stars by their probability of being outliers, or by their weight."""
    if found is None:
        return ""
    mixed = bool(found["probability"].notna().any())
    column = "probability" if mixed else "weight"
    ranked = found.sort_values(column, ascending=not mixed).head(most)
    rows = [
        (str(line["star"]), str(line["host"]), f"{float(line[column]):.3f}")
        for _, line in ranked.iterrows()
        if math.isfinite(float(line[column]))
    ]
    words = "probability of being an outlier" if mixed else "weight in the fit"
    heading = "The likeliest outliers" if mixed else "Stars that weigh least"
    return f"<h4>{heading}</h4>" + table(("star", "host", words), rows)


def peaks(shown: Shown) -> str:
    """For each term, the supernovae that are farthest off."""
    text = ""
    for term in views_of(shown.result):
        view = peak_view(shown.result, term)
        words = term.replace("_", " ")
        text += farthest(view, view.x, words, "mag", heading=f"Residuals against {words}")
    return text


def published(shown: Shown) -> str:
    """Published values and claims, the posterior's numbers, and the shift in combined errors."""
    beside, rows = shown.claims, []
    for name, value in shown.published.items():
        if name in shown.result.draws:
            interval = Interval.of(shown.result.draws[name])
            off = (value - interval.mean) / interval.sd if interval.sd > 0.0 else math.nan
            words = f"{value:g}".replace("-", MINUS)
            rows.append((_title(name), _shift(off), words, str(interval), "entered here"))
    for one in beside.rows:
        if not one.reason:
            claim = one.claim
            rows.append(
                (
                    f"{claim.name or claim.words} [{claim.unit}]",
                    _shift(one.shift),
                    claim.printed.removesuffix(f" {claim.unit}"),
                    str(rounded(one.mean, one.sd)) if one.sd > 0.0 else f"{one.mean:.6g} (fixed)",
                    claim.paper,
                )
            )
    left = [
        f"{one.claim.name or one.claim.words}{', ' if one.claim.paper else ''}{one.claim.paper}, "
        f"{one.claim.printed}: {one.reason}."
        for one in beside.rows
        if one.reason
    ]
    text = "".join(f'<p class="lf-bad">{html.escape(line)}</p>' for line in beside.trouble)
    if beside.title:
        text += f"<h4>{html.escape(beside.title)}</h4>"
    if rows:
        text += table(("number", "shift", "published", "posterior", "paper"), rows)
        text += _SHIFT
    if left:
        text += "<h4>Not compared</h4>" + _sentences(left)
    return text or "<p>No published value yet: enter one here, or pick a claims file above.</p>"


def _shift(off: float) -> str:
    return signed(off) if math.isfinite(off) else ""


def _short(name: str) -> str:
    """The shortest words that a parameter has, for the head of a column."""
    known = parameter(name)
    words = SHORT.get(name, known.words)
    return f"{words} [{known.unit}]" if known.unit else words


def _title(name: str) -> str:
    known = parameter(name)
    return f"{known.words} [{known.unit}]" if known.unit else known.words


def _of(result: Result | None, name: str) -> str:
    if result is None or name not in result.draws:
        return ""
    return str(rounded(result.mean(name), result.sd(name)))


def _change(value: float, error: float) -> str:
    return signed_at(value, error) if math.isfinite(value) else "undetermined"


def _one(value: float) -> str:
    return to_place(value, -1)


def _sentences(words: Sequence[str]) -> str:
    return "".join(f"<p>{html.escape(text)}</p>" for text in words)
