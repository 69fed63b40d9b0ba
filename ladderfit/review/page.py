"""The referee's page: Markdown, and HTML that needs nothing but itself."""

from __future__ import annotations

import re
from collections.abc import Mapping

from ladderfit.report.html import Safe, element, figure, joined, page, wide
from ladderfit.review.whole import Review
from ladderfit.review.words import Block, Heading, Paragraph, Picture, Table, blocks
from ladderfit.wording import printable

TITLE = "Review of published values"


def markdown_page(review: Review, pictures: Mapping[int, str] | None = None) -> str:
    """The review in Markdown.

    Parameters
    ----------
    review : Review
    pictures : mapping of int to str, optional
        Paths of the figures by claim, counted from 1.
    """
    named = pictures or {}
    return "\n\n".join(filter(None, (_markdown(block, named) for block in blocks(review)))) + "\n"


def _markdown(block: Block, pictures: Mapping[int, str]) -> str:
    if isinstance(block, Heading):
        return f"{'#' * block.level} {_plain(block.text)}"
    if isinstance(block, Paragraph):
        lead = f"**{_plain(block.lead)}** " if block.lead else ""
        return lead + _plain(block.text)
    if isinstance(block, Picture):
        path = pictures.get(block.number)
        return f"![{_plain(block.text)}]({path})" if path else ""
    rule = ["---" if place < block.words else "---:" for place in range(len(block.head))]
    rows = [[_plain(cell) for cell in row] for row in (block.head, *block.rows)]
    return "\n".join(f"| {' | '.join(row)} |" for row in (rows[0], rule, *rows[1:]))


def _plain(text: str) -> str:
    """Text in one line with nothing in it that Markdown or HTML would read as markup."""
    return re.sub(r"([\\`*_\[\]<>|#&$])", r"\\\1", " ".join(printable(text).split()))


def html_page(review: Review, pictures: Mapping[int, bytes] | None = None) -> str:
    """The review as one HTML page that loads nothing and runs nothing.

    Parameters
    ----------
    review : Review
    pictures : mapping of int to bytes, optional
        PNG images by claim, counted from 1; they become part of the page.
    """
    images = pictures or {}
    parts = [_html(block, images) for block in blocks(review)]
    return page(review.title or TITLE, joined(part for part in parts if part))


def _html(block: Block, images: Mapping[int, bytes]) -> Safe:
    if isinstance(block, Heading):
        return element(f"h{block.level}", block.text)
    if isinstance(block, Paragraph):
        lead = [element("strong", block.lead), Safe(" ")] if block.lead else []
        return element("p", *lead, block.text)
    if isinstance(block, Picture):
        if block.number not in images:
            return Safe("")
        return figure(images[block.number], block.text, f"{block.text[0].upper()}{block.text[1:]}.")
    return _html_table(block)


def _html_table(table: Table) -> Safe:
    def row(tag: str, cells: tuple[str, ...]) -> Safe:
        kinds = ["number" if place >= table.words else "" for place in range(len(cells))]
        made = [element(tag, cell, class_=kind) for cell, kind in zip(cells, kinds, strict=True)]
        return element("tr", joined(made, ""))

    head = element("thead", row("th", table.head))
    body = element("tbody", joined(row("td", cells) for cells in table.rows))
    return wide(element("table", head, body))
