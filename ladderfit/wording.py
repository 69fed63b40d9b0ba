"""A result in plain words, for a terminal or a log."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Iterable, Sequence

from ladderfit.assembly import MATRICES
from ladderfit.diagnostics import TRUSTED_K
from ladderfit.ladder import Ladder
from ladderfit.names import base_name, group_of, parameter
from ladderfit.priors import Fixed, LogNormal, Prior
from ladderfit.result import Result
from ladderfit.rounding import Interval, rounded, to_place

_LINE = 98
_MOST_MODULI = 60
_GOOD_K = 0.5
_TABLES = {
    "cepheids": "Cepheids",
    "anchors.parallaxes": "parallax stars",
    "supernovae": "supernovae in hosts",
    "expansion": "expansion",
}
_PER_MAG = 0.4605170185988091  # 0.2 ln 10


def summary_text(result: Result) -> str:
    """What was fitted, to what, with which outcome, and how far to trust it.

    Parameters
    ----------
    result : Result

    Returns
    -------
    str
        Several paragraphs, without a line break at the end.
    """
    sections = [("", [printable(result.choices.title)])] if result.choices.title else []
    if result.source is not None:
        sections.append(("Data", aligned(data_rows(result.source))))
    heading = f"Posterior: mean ± standard deviation of {result.size:,} draws"
    sections.append((heading, aligned(headline_rows(result))))
    moduli = modulus_lines(result)
    if moduli:
        sections.append(("Distance moduli [mag]", moduli))
    sections.append(("Priors in force", aligned(prior_rows(result))))
    sections.append(("How far to trust it", trust_lines(result)))
    return "\n\n".join(_paragraph(heading, lines) for heading, lines in sections)


def data_rows(ladder: Ladder) -> list[tuple[str, ...]]:
    """What takes part: rows kept per table, anchors, notes on the input."""
    rows: list[tuple[str, ...]] = [
        (_TABLES.get(key, key), printable(str(kept))) for key, kept in ladder.kept.items()
    ]
    rows += [
        ("anchor", f"{printable(a.name)}, modulus {a.modulus:g} ± {a.error:g} mag by geometry")
        for a in ladder.geometric
    ]
    expansion = ladder.choices.expansion
    if expansion is not None and expansion.intercept is not None:
        published = expansion.intercept
        rows.append(("expansion", f"intercept {published.value:g} ± {published.error:g}"))
    rows += [
        ("covariance", f"{printable(source.path)}, {source.rows:,} rows ({key})")
        for key, source in ladder.sources.items()
        if key in MATRICES
    ]
    return rows + [("note", printable(note)) for note in ladder.notes]


def headline_rows(result: Result) -> list[tuple[str, ...]]:
    """One row per headline parameter: words, name, rounded numbers, unit."""
    rows: list[tuple[str, ...]] = []
    for name in (*result.headline, *result.derived):
        known, interval = parameter(name), Interval.of(result.draws[name])
        group = group_of(name)
        words = known.words if group is None else f"{known.words}, {group}"
        words = f"{words} (derived)" if name in result.derived else words
        value = str(interval) if interval.sd > 0.0 else f"{interval} (fixed)"
        rows.append((printable(words), printable(name), value, known.unit))
    return rows


def modulus_lines(result: Result) -> list[str]:
    """Host moduli, nearest first, in three columns; many are left to the files."""
    entries = [
        (str(group_of(name)), Interval.of(draws))
        for name, draws in result.draws.items()
        if base_name(name) == "modulus"
    ]
    if len(entries) > _MOST_MODULI:
        return [f"{len(entries)} hosts: see summary.ecsv"]
    entries.sort(key=lambda entry: entry[1].mean)
    cells = aligned((printable(host), str(interval)) for host, interval in entries)
    rows = -(-len(cells) // 3)
    width = max((len(cell) for cell in cells), default=0) + 4
    return ["".join(cell.ljust(width) for cell in cells[row::rows]).rstrip() for row in range(rows)]


def prior_rows(result: Result) -> list[tuple[str, ...]]:
    """Each headline parameter's prior, whether it was chosen, and what it means."""
    rows: list[tuple[str, ...]] = []
    for name in result.headline:
        prior = result.choices.prior(name)
        origin = "chosen" if result.choices.states_prior(name) else "default"
        rows.append((printable(name), f"{prior} {parameter(name).unit}", origin + _meaning(prior)))
    where = f"{result.choices.hosts.distance_prior}"
    if any(base_name(name) == "modulus" for name in result.draws):
        rows.append(("modulus of a host", where, ""))
    stars = result.choices.anchors.parallaxes
    if stars is not None and stars.use:
        rows.append(("modulus of a parallax star", stars.prior_words, ""))
    return rows


def _meaning(prior: Prior) -> str:
    if isinstance(prior, LogNormal):
        width = _PER_MAG * prior.deviation
        return f"; normal in 5 log10 (median, width in mag): {100 * width:.0f} % wide"
    if isinstance(prior, Fixed):
        return "; not fitted"
    return ""


def trust_lines(result: Result) -> list[str]:
    """Effective draws, Pareto k in words, evidence, and every warning."""
    found = result.diagnostics
    lines = []
    known = {name: ess for name, ess in found.ess.items() if math.isfinite(ess)}
    if known:
        worst = min(known, key=lambda name: known[name])
        whose = f", fewest for {printable(worst)}" if len(set(known.values())) > 1 else ""
        lines.append(f"{known[worst]:,.0f} effective draws{whose}")
    if found.pareto_k is not None:
        lines.append(f"Pareto k = {to_place(found.pareto_k, -2)}: {pareto_words(found.pareto_k)}")
    if found.rhat:
        least = max(found.rhat, key=lambda name: found.rhat[name])
        lines.append(
            f"R-hat at most {found.rhat[least]:.3f} over independent ensembles ({printable(least)})"
        )
    if found.log_evidence is not None:
        evidence = rounded(found.log_evidence, found.log_evidence_error or 0.0)
        lines.append(f"log evidence {evidence}, to compare only where the data are identical")
    told = result.source.notes if result.source is not None else ()
    lines += [f"Note: {printable(note)}" for note in found.notes if note not in told]
    return lines or ["nothing is known about the draws"]


def pareto_words(k: float) -> str:
    """What a Pareto k means (Vehtari et al. 2024)."""
    if k < _GOOD_K:
        return "the draws represent the posterior well"
    if k < TRUSTED_K:
        return "the draws represent the posterior, with larger errors in its tails"
    return "do NOT trust these numbers: the weights of the draws are too uneven"


def printable(text: str) -> str:
    """Text from files without line breaks or control characters, safe for a terminal."""
    return "".join(
        letter if letter.isprintable() else "\N{REPLACEMENT CHARACTER}" for letter in text
    )


def _paragraph(heading: str, lines: Sequence[str]) -> str:
    if not heading:
        return "\n".join(lines)
    return "\n".join([heading, *(f"  {line}" for line in lines)])


def aligned(rows: Iterable[Sequence[str]]) -> list[str]:
    """Columns of equal width, two blanks apart; a long last cell goes on below itself."""
    table = [tuple(row) for row in rows]
    if not table:
        return []
    widths = [max(len(row[column]) for row in table) for column in range(len(table[0]))]
    indent = sum(widths[:-1]) + 2 * (len(widths) - 1)
    lines = []
    for row in table:
        start = "".join(f"{cell:{width}}  " for cell, width in zip(row, widths, strict=False))
        wrapped = textwrap.wrap(row[-1], max(_LINE - indent, 30)) or [""]
        lines.append((start[:indent] + wrapped[0]).rstrip())
        lines += [" " * indent + more for more in wrapped[1:]]
    return lines
