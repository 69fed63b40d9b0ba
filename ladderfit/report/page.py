"""The report: one self-contained page per calibration."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from ladderfit.report import sections
from ladderfit.report.cells import PaperTable
from ladderfit.report.html import Safe, element, joined, listed, page
from ladderfit.result import Result

_LIMITS = (
    "Objects are taken as independent but for what a covariance, a shared error or a shared "
    "distance in the choices says.",
    "The uncertainty is that of the model as chosen. What other choices would give is not in it.",
    "A selection of supernovae that depends on their colour is not modelled.",
)


def report_page(
    result: Result,
    tables: Sequence[PaperTable],
    pictures: Mapping[str, bytes],
    provenance: Mapping[str, object],
    folder: str,
) -> str:
    """The page as HTML.

    Parameters
    ----------
    result : Result
    tables : sequence of PaperTable
        All that are written beside it.
    pictures : mapping of str to bytes
        Figures as PNG, by name.
    provenance : mapping
        As in provenance.json.
    folder : str
        Of the result, as the command that repeats it names it.
    """
    title = result.choices.title or "Calibration without a title"
    budget = [table for table in tables if table.name in ("systematics", "error_budget")]
    parts: list[tuple[str, Safe]] = [
        ("How far to trust it", sections.trust(result)),
        ("Parameters", sections.tables(tables, ("parameters",))),
        ("Figures", sections.figures(pictures)),
    ]
    if any(table.name == "moduli" for table in tables):
        parts.append(("Distance moduli", sections.tables(tables, ("moduli",))))
    if budget:
        names = [table.name for table in budget]
        parts.append(("Other choices, and the error budget", sections.tables(budget, names)))
    parts += [
        ("Data used and set aside", sections.data(result)),
        ("Priors", sections.priors(result)),
        ("Choices", sections.choices(result)),
        ("What the model does not do", listed(_LIMITS)),
        ("Files beside this page", sections.files(tables)),
        ("Provenance", sections.provenance(provenance)),
        (
            "To repeat it",
            sections.repeat(folder, provenance.get("seed"), provenance.get("sampler")),
        ),
    ]
    links = [
        element("li", element("a", heading, href=f"#{anchor(heading)}")) for heading, _ in parts
    ]
    body = [
        element("h1", title),
        element("p", _lead(result, provenance), class_="lead"),
        sections.headline(result),
        element("nav", element("ol", joined(links))),
        *(
            joined([element("h2", heading, id=anchor(heading)), content])
            for heading, content in parts
        ),
    ]
    return page(title, joined(body))


def anchor(heading: str) -> str:
    """A heading as the target of a link."""
    return "".join(
        letter for letter in heading.lower().replace(" ", "-") if letter.isalpha() or letter == "-"
    )


def _lead(result: Result, provenance: Mapping[str, object]) -> str:
    day = str(provenance.get("written", ""))[:10]
    parts = [f"Calibration of a distance ladder by ladderfit, {result.size:,} draws"]
    if day:
        parts.append(day)
    return "; ".join(parts) + "."
