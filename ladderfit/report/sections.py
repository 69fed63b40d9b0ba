"""The sections of the report: numbers, trust, figures, data, choices, provenance."""

from __future__ import annotations

import shlex
from collections.abc import Iterable, Mapping, Sequence

from ladderfit.assembly import MATRICES
from ladderfit.diagnostics import TRUSTED_K
from ladderfit.ladder_file import as_written
from ladderfit.names import parameter
from ladderfit.report import html
from ladderfit.report.cells import PaperTable
from ladderfit.report.choices import Entry, entries
from ladderfit.report.html import Safe, element, joined, listed, rows
from ladderfit.report.parameters import quote, words_of
from ladderfit.result import Result
from ladderfit.wording import data_rows, prior_rows, trust_lines

FIRST = ("hubble_constant", "peak_magnitude", "zero_point", "slope", "metallicity")
_MOST_FIRST = 4
_RHAT = 1.01  # Vehtari et al. 2021: above this, chains do not agree
SECTION_WORDS = {
    "cepheids": "Cepheids",
    "anchors.parallaxes": "Parallax stars",
    "supernovae": "Supernovae in hosts",
    "expansion": "Expansion",
}
CAPTIONS = {
    "relation": "The period-luminosity relation: stars, the line with its 68 % and 95 % bands, "
    "and what is left over.",
    "parallaxes": "Measured against photometric parallaxes, and zero point against residual "
    "offset.",
    "corner": "The joint posterior: each parameter on its own and every pair, with the smallest "
    "regions that hold 68 % and 95 %.",
    "moduli": "Distance moduli, and what each host's own geometry and supernovae say.",
    "hubble": "Supernovae in hosts and the expansion, and what is left over.",
    "outliers": "Stars by their probability of being outliers (or, under a Student-t, by their "
    "weight in the fit), and the farthest of them by name.",
    "peaks": "The peak-magnitude relation term by term, all other terms taken off: the line is in "
    "true values, dashed what is expected of measured ones.",
}


def headline(result: Result) -> Safe:
    """The few numbers most readers came for."""
    names = [name for name in FIRST if name in result.draws and result.sd(name) > 0.0]
    boxes = [
        element(
            "div",
            element("span", capital(words_of(name)), class_="name"),
            element("b", html.quoted(quote(result, name))),
            element("span", html.unit(parameter(name).unit), class_="unit"),
        )
        for name in names[:_MOST_FIRST]
    ]
    return element("div", joined(boxes), class_="headline")


def capital(words: str) -> str:
    """With its first letter in upper case."""
    return words[:1].upper() + words[1:]


def doubts(result: Result) -> list[str]:
    """What speaks against trusting the draws, in words; empty where nothing does."""
    found = result.diagnostics
    said = []
    if found.pareto_k is not None and found.pareto_k > TRUSTED_K:
        said.append("the weights of the draws are too uneven (Pareto k above 0.7)")
    if found.rhat and max(found.rhat.values()) > _RHAT:
        said.append("independent ensembles do not agree (R-hat above 1.01)")
    known = [ess for ess in found.ess.values() if ess == ess]
    if known and min(known) < 400.0:
        said.append("there are fewer than 400 effective draws")
    return said


def trust(result: Result) -> Safe:
    """How far to trust the numbers: a verdict, and what it rests on."""
    against = doubts(result)
    notes = [
        note
        for note in result.diagnostics.notes
        if result.source is None or note not in result.source.notes
    ]
    if against:
        verdict = element("p", f"Doubtful: {'; '.join(against)}.", class_="doubtful")
    elif notes:
        words = "The draws represent the posterior. What to know about it is below."
        verdict = element("p", words, class_="trusted")
    else:
        words = "The draws represent the posterior, and no check complains."
        verdict = element("p", words, class_="trusted")
    return joined([verdict, listed(trust_lines(result))])


def figures(pictures: Mapping[str, bytes]) -> Safe:
    """Every figure with its caption."""
    return joined(
        html.figure(png, f"Figure: {CAPTIONS.get(name, name)}", CAPTIONS.get(name, name), kind=name)
        for name, png in pictures.items()
    )


def data(result: Result) -> Safe:
    """What took part, what did not and why, and what to know about it."""
    ladder = result.source
    if ladder is None:
        return element("p", "The tables behind this result are missing or have changed.")
    content = []
    for section, kept in ladder.kept.items():
        source = ladder.sources[section]
        reasons = "; ".join(f"{count:,} {reason}" for reason, count in kept.reasons.items())
        words = SECTION_WORDS.get(section, section)
        content.append((words, source.path, f"{kept.total:,}", f"{kept.kept:,}", reasons or "none"))
    parts = [rows(("sample", "table", "rows", "used", "left out, by reason"), content)]
    others = [row for row in data_rows(ladder) if row[0] in ("anchor", "covariance")]
    others += [row for row in data_rows(ladder) if row[0] == "expansion" and "intercept" in row[1]]
    if others:
        parts += [element("h3", "Anchors and other inputs"), rows(("input", "value"), others)]
    by_hand = list(_set_aside(result))
    if by_hand:
        head = ("sample", "object", "reason")
        parts += [element("h3", "Set aside by hand"), rows(head, by_hand)]
    if ladder.notes:
        parts += [element("h3", "Notes on the data"), listed(ladder.notes)]
    return joined(parts)


def _set_aside(result: Result) -> Iterable[tuple[str, str, str]]:
    choices = result.choices
    sections = {
        "cepheids": choices.cepheids,
        "anchors.parallaxes": choices.anchors.parallaxes,
        "supernovae": choices.supernovae,
        "expansion": choices.expansion,
    }
    for key, section in sections.items():
        for entry in section.set_aside if section is not None else ():
            name = entry.star or entry.name or ""
            host = f" in {entry.host}" if entry.host else ""
            yield SECTION_WORDS[key], name + host, entry.reason


def priors(result: Result) -> Safe:
    """Every prior in force, and how much the data add to it."""
    known = result.diagnostics.informed
    content = []
    for name, prior, note in prior_rows(result):
        default = "default" in note if note else _default_distances(result, name)
        ratio = f"{100.0 * known[name]:.2g} %" if name in known else ""
        meaning = note.partition("; ")[2]
        content.append((element("code", name), prior, _mark(default), ratio, meaning))
    words = element(
        "p",
        "The fourth column is the posterior's standard deviation over the prior's: near 100 % "
        "the prior does the work.",
    )
    head = ("parameter", "prior", "", "posterior over prior", "what it means")
    return joined([words, rows(head, content)])


def _default_distances(result: Result, name: str) -> bool:
    """Whether the prior of the distances of hosts, or of parallax stars, is the default one."""
    key = "anchors.parallaxes" if "parallax" in name else "hosts"
    return all(e.default for e in entries(result.choices) if e.key == f"{key}.distance_prior")


def _mark(default: bool) -> Safe:
    word = "default" if default else "chosen"
    return element("span", word, class_=word)


def choices(result: Result) -> Safe:
    """Every choice, in the order of the ladder file, with the defaults marked."""
    parts = []
    every = entries(result.choices)
    for section in dict.fromkeys(entry.section for entry in every):
        inside = [entry for entry in every if entry.section == section]
        parts.append(element("h3", section or "At the top"))
        head = ("key", "value", "", "what it is")
        parts.append(rows(head, map(_choice, inside), class_="choices"))
    tried = result.choices.alternatives
    if tried:
        listed_ = [(element("code", k), element("code", as_written(v))) for k, v in tried.items()]
        parts += [element("h3", "alternatives"), rows(("key", "values to try"), listed_)]
    return joined(parts)


def _choice(entry: Entry) -> Sequence[str]:
    return (
        element("code", entry.key),
        element("code", entry.value),
        _mark(entry.default),
        entry.words,
    )


def provenance(known: Mapping[str, object]) -> Safe:
    """Inputs with their hashes, versions, seed, time."""
    inputs = known.get("inputs")
    content = []
    if isinstance(inputs, Mapping):
        for key, entry in inputs.items():
            kind = "covariance" if key in MATRICES else "table"
            content.append(
                (f"{key} ({kind})", str(entry["table"]), element("code", str(entry["sha256"])))
            )
    plain = [
        (word, str(known[key]))
        for key, word in (
            ("sampler", "sampler"),
            ("seed", "seed"),
            ("draws", "draws"),
            ("written", "written"),
            ("ladder_sha256", "SHA-256 of ladder.toml"),
        )
        if key in known
    ]
    versions = known.get("versions")
    if isinstance(versions, Mapping):
        plain.append(("versions", ", ".join(f"{name} {v}" for name, v in versions.items())))
    parts = [rows(("input", "file", "SHA-256"), content)] if content else []
    return joined([*parts, rows(("what", "value"), plain)])


def repeat(folder: str, seed: object, sampler: object) -> Safe:
    """The command that repeats the result."""
    named = shlex.quote(folder)
    lines = f"ladderfit calibrate --again {named}"
    anew = f"ladderfit calibrate {shlex.quote(folder + '/ladder.toml')} --seed {seed}"
    return joined(
        [
            element(
                "p",
                "Draw it again from the same inputs, seed and draws, and say whether "
                "every draw is the same:",
            ),
            element("pre", lines),
            element("p", f"Or fit anew from the choices kept beside this page ({sampler}):"),
            element("pre", anew),
        ]
    )


def tables(found: Iterable[PaperTable], names: Iterable[str]) -> Safe:
    """Tables by name."""
    wanted = tuple(names)
    shown = [table for table in found if table.name in wanted]
    return joined(html.table(table, caption=len(shown) > 1) for table in shown)


def files(found: Iterable[PaperTable]) -> Safe:
    """Which files lie in tables/."""
    content = []
    for table in found:
        kinds = "tex, ecsv, csv" if table.head else "ecsv, csv"
        content.append((element("code", f"tables/{table.name}"), kinds, table.title))
    return rows(("file", "as", "what it holds"), content)
