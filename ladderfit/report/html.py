"""HTML from cells and text; everything that is not made here is escaped."""

from __future__ import annotations

import base64
import hashlib
import html
import re
from collections.abc import Iterable, Sequence
from pathlib import Path

from ladderfit.names import group_of, parameter
from ladderfit.report.cells import Cell, PaperTable, Quoted, Scientific, Symbol, Unit, Words
from ladderfit.report.latex_text import is_number
from ladderfit.rounding import MINUS, Rounded
from ladderfit.wording import printable

_STYLE = Path(__file__).with_name("report.css")
_SHORT = 26  # rows of a table that paper keeps together
_GREEK = {r"\varpi": "ϖ", r"\tau": "τ", r"\mu": "μ", r"\kappa": "κ", r"\Delta": "Δ"}
_GREEK |= {r"\alpha": "α", r"\beta": "β", r"\gamma": "γ", r"\sigma": "σ", r"\delta": "δ"}


class Safe(str):
    """Markup made here, not to be escaped again."""

    __slots__ = ()


def text(value: str) -> Safe:
    """Any text, escaped; characters that cannot be shown are replaced."""
    return Safe(html.escape(printable(value), quote=True))


def element(tag: str, *content: str, **attributes: str) -> Safe:
    """An element; content and attributes are escaped unless they are `Safe`."""
    inner = "".join(part if isinstance(part, Safe) else text(part) for part in content)
    given = "".join(f' {name.rstrip("_")}="{text(v)}"' for name, v in attributes.items() if v)
    return Safe(f"<{tag}{given}>{inner}</{tag}>")


def joined(parts: Iterable[Safe], between: str = "\n") -> Safe:
    """Markup one after another."""
    return Safe(between.join(parts))


def listed(items: Iterable[str]) -> Safe:
    """A bulleted list."""
    return element("ul", joined(element("li", item) for item in items))


def symbol(name: str) -> Safe:
    """A parameter's symbol: its mathtext as HTML, and its group."""
    group = group_of(name)
    made = mathtext(parameter(name).symbol)
    return made if group is None else Safe(f"{made} {text(group)}")


def mathtext(source: str) -> Safe:
    """Simple mathtext, such as that of `ladderfit.names`, as HTML with sub- and superscripts."""
    inner = source.strip("$")
    for command, letter in _GREEK.items():
        inner = re.sub(rf"{re.escape(command)}(?![A-Za-z])\s*", letter, inner)
    inner = re.sub(r"\\mathrm\{([^{}]*)\}", lambda found: f"{{\x01{found[1]}}}", inner)
    inner = re.sub(r"\\[A-Za-z]+", lambda found: found[0][1:], inner)
    tokens = re.findall(r"([_^]?)(?:\{+([^{}]*)\}+|(.))", inner)
    made = ""
    for script, grouped, single in tokens:
        word = grouped or single
        upright = word.startswith("\x01") or word.isdigit() or word == "Δ"
        shown = text(word.lstrip("\x01"))
        body = shown if upright or not word.isalpha() else Safe(f"<i>{shown}</i>")
        tag = {"_": "sub", "^": "sup"}.get(script)
        made += f"<{tag}>{body}</{tag}>" if tag else body
    return Safe(made)


def unit(source: str) -> Safe:
    """A unit such as ``km/s/Mpc``, with exponents."""
    first, *below = source.split("/")
    parts = [text(first)] if first not in ("", "1") else []
    for part in below:
        found = re.fullmatch(r"([A-Za-z]+)(\d*)", part)
        name, power = (found[1], found[2] or "1") if found else (part, "1")
        parts.append(Safe(f"{text(name)}<sup>{MINUS}{text(power)}</sup>"))
    return joined(parts, " ")


def quoted(value: Quoted) -> Safe:
    """A value with its errors."""
    shown = value.text
    if isinstance(shown, Rounded):
        return text(str(shown))
    arms = element("sup", f"+{shown.above}") + element("sub", f"{MINUS}{shown.below}")
    return Safe(f'{text(shown.value)} <span class="arms">{arms}</span>')


def cell(value: Cell) -> Safe:
    """One cell's content."""
    if isinstance(value, Quoted):
        return quoted(value)
    if isinstance(value, Symbol):
        return symbol(value.name)
    if isinstance(value, Unit):
        return unit(value.text)
    if isinstance(value, Scientific):
        return text(f"{value.value:.3g}".replace("-", MINUS))
    return text(value.text if isinstance(value, Words) else value)


def table(source: PaperTable, caption: bool = True) -> Safe:
    """A table in its printed form."""
    columns = range(len(source.head))
    numeric = [all(is_number(row[place]) for row in source.rows) for place in columns]
    head = [_td("th", cell(source.head[place]), numeric[place]) for place in columns]
    body = [
        element("tr", joined(_td("td", cell(row[p]), numeric[p]) for p in columns))
        for row in source.rows
    ]
    parts = [
        *([element("caption", f"{source.title}.")] if caption else []),
        element("thead", element("tr", joined(head))),
        element("tbody", joined(body)),
    ]
    notes = [element("p", " ".join(source.notes), class_="note")] if source.notes else []
    return joined([wide(element("table", joined(parts), class_=_length(len(body)))), *notes])


def rows(head: Sequence[str], content: Iterable[Sequence[str]], class_: str = "") -> Safe:
    """A plain table; a `Safe` cell is markup."""
    lines = [element("tr", joined(element("td", entry) for entry in row)) for row in content]
    made = [element("thead", element("tr", joined(element("th", word) for word in head)))]
    kind = class_ or _length(len(lines))
    return wide(element("table", joined([*made, element("tbody", joined(lines))]), class_=kind))


def _length(count: int) -> str:
    """Short tables are kept on one page of paper."""
    return "short" if count <= _SHORT else ""


def wide(content: Safe) -> Safe:
    """What may be wider than the page, on a screen, in a box that scrolls."""
    return Safe(f'<div class="wide">{content}</div>')


def _td(tag: str, content: Safe, numeric: bool) -> Safe:
    return element(tag, content, class_="number" if numeric else "")


def figure(png: bytes, words: str, caption: str, kind: str = "") -> Safe:
    """A picture inside the page; `words` are for those who cannot see it."""
    source = Safe(f"data:image/png;base64,{base64.b64encode(png).decode('ascii')}")
    image = Safe(f'<img src="{source}" alt="{text(words)}">')
    return element("figure", image, element("figcaption", caption), class_=kind)


def page(title: str, body: Safe) -> str:
    """A whole page that fetches nothing and runs nothing.

    Its content policy forbids scripts, frames, forms and the network; the one style
    sheet is allowed by its hash, and pictures from inside the page.
    """
    style = _STYLE.read_text(encoding="utf-8")
    digest = base64.b64encode(hashlib.sha256(style.encode("utf-8")).digest()).decode("ascii")
    policy = (
        f"default-src 'none'; style-src 'sha256-{digest}'; img-src data:; "
        "base-uri 'none'; form-action 'none'"
    )
    return "\n".join(
        [
            "<!DOCTYPE html>",
            '<html lang="en">',
            "<head>",
            '<meta charset="utf-8">',
            f'<meta http-equiv="Content-Security-Policy" content="{policy}">',
            '<meta name="referrer" content="no-referrer">',
            '<meta name="viewport" content="width=device-width, initial-scale=1">',
            f"<title>{text(title)}</title>",
            f"<style>{style}</style>",
            "</head>",
            f"<body>\n<main>\n{body}\n</main>\n</body>",
            "</html>",
            "",
        ]
    )
