"""Tables as LaTeX, in the style of the booktabs package."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Sequence

from ladderfit.names import group_of, parameter
from ladderfit.report.cells import Cell, PaperTable, Quoted, Scientific, Symbol, Unit, Words
from ladderfit.rounding import MINUS, Rounded

PACKAGES = ("booktabs", "array", "longtable")
_SMALL = (r"\footnotesize", r"\setlength{\tabcolsep}{3.5pt}")
_LONG = 45  # rows that a page holds
_SHORT = 15  # letters up to which text is not broken
_ESCAPES = {
    "\\": r"\textbackslash{}",
    "{": r"\{",
    "}": r"\}",
    "$": r"\$",
    "&": r"\&",
    "%": r"\%",
    "#": r"\#",
    "_": r"\_",
    "^": r"\textasciicircum{}",
    "~": r"\textasciitilde{}",
    "<": r"\textless{}",
    ">": r"\textgreater{}",
    "|": r"\textbar{}",
    '"': r"\textquotedbl{}",
    "'": r"\textquotesingle{}",
    "`": r"\textasciigrave{}",
    "[": "{[}",  # a row that begins with one would be an option of the line break before
    "]": "{]}",
    "*": "{*}",  # likewise
    "±": r"$\pm$",
    MINUS: "$-$",
    "×": r"$\times$",
    "°": r"$^\circ$",
    "→": r"$\rightarrow$",
}
_QUOTES = {'"': "''", "'": "'", "`": r"\textasciigrave{}"}
_GREEK = "alpha beta gamma delta epsilon zeta eta theta iota kappa lambda mu nu xi pi rho sigma tau"
_ESCAPES |= {
    unicodedata.lookup(f"GREEK SMALL LETTER {'LAMDA' if word == 'lambda' else word.upper()}"): (
        rf"$\{word}$"
    )
    for word in _GREEK.split()
}
_ACCENTS = {
    "\N{COMBINING GRAVE ACCENT}": "`",
    "\N{COMBINING ACUTE ACCENT}": "'",
    "\N{COMBINING CIRCUMFLEX ACCENT}": "^",
    "\N{COMBINING TILDE}": "~",
    "\N{COMBINING DIAERESIS}": '"',
    "\N{COMBINING MACRON}": "=",
    "\N{COMBINING CARON}": "v",
    "\N{COMBINING DOUBLE ACUTE ACCENT}": "H",
    "\N{COMBINING BREVE}": "u",
    "\N{COMBINING DOT ABOVE}": ".",
    "\N{COMBINING CEDILLA}": "c",
}
_PLAIN_LETTERS = {"ø": r"\o{}", "Ø": r"\O{}", "ß": r"\ss{}", "æ": r"\ae{}", "Æ": r"\AE{}"}
_PLAIN_LETTERS |= {"å": r"\aa{}", "Å": r"\AA{}", "ł": r"\l{}", "Ł": r"\L{}"}


def escaped(text: str) -> str:
    """Any text as LaTeX that prints it, in plain ASCII, and does nothing else.

    Letters without a command of their own are written as their code point, U+4E2D.
    """
    return "".join(_letter(letter) for letter in text).replace("--", "-{}-").replace("--", "-{}-")


def _letter(letter: str) -> str:
    if letter in _QUOTES:
        return "{" + _QUOTES[letter] + "}" if letter != "`" else _QUOTES[letter]
    if letter in _ESCAPES:
        return _ESCAPES[letter]
    if letter in _PLAIN_LETTERS:
        return _PLAIN_LETTERS[letter]
    if letter == "\N{NO-BREAK SPACE}":
        return "~"
    if letter in " \t\n\r":
        return " "
    if " " < letter <= "~":
        return letter
    parts = unicodedata.normalize("NFD", letter)
    base, mark = parts[0], parts[1:]
    if mark in _ACCENTS and base.isascii() and base.isalpha():
        dotless = {"i": r"\i", "j": r"\j"}.get(base, base)
        return rf"\{_ACCENTS[mark]}{{{dotless}}}"
    return f"U+{ord(letter):04X}"


def unit(text: str) -> str:
    r"""A unit such as ``km/s/Mpc`` as ``km\,s$^{-1}$\,Mpc$^{-1}$``."""
    if not text:
        return ""
    first, *below = text.split("/")
    parts = [escaped(first)] if first not in ("", "1") else []
    for part in below:
        found = re.fullmatch(r"([A-Za-z]+)(\d*)", part)
        name, power = (found[1], found[2] or "1") if found else (part, "1")
        parts.append(f"{escaped(name)}$^{{-{power}}}$")
    return r"\,".join(parts)


def symbol(name: str) -> str:
    """A parameter's symbol and, after it, its group."""
    group = group_of(name)
    return parameter(name).symbol + ("" if group is None else f" {escaped(group)}")


def cell(value: Cell) -> str:
    """One cell."""
    if isinstance(value, Quoted):
        return _quoted(value)
    if isinstance(value, Symbol):
        return symbol(value.name)
    if isinstance(value, Unit):
        return unit(value.text)
    if isinstance(value, Scientific):
        return scientific(value.value)
    return breakable(value.text) if isinstance(value, Words) else escaped(value)


def breakable(text: str) -> str:
    """Text that may also be broken into lines after the dots of a key or the parts of a path."""
    if len(text) <= _SHORT:
        return escaped(text)
    return r"\allowbreak{}".join(escaped(part) for part in _BREAKS.split(text))


_BREAKS = re.compile(r"(?<=[._/=\[])(?=[^\s._/=])")


def _pieces(text: str) -> list[str]:
    """What stays on one line, the shortest text in one."""
    words = text.split() or [""]
    return words if len(text) <= _SHORT else [p for word in words for p in _BREAKS.split(word)]


def _quoted(value: Quoted) -> str:
    text = value.text
    if isinstance(text, Rounded):
        error = rf" \pm {text.error}" if text.error else ""
        return f"${_math(text.value)}{error}$"
    return f"${_math(text.value)}^{{+{text.above}}}_{{-{text.below}}}$"


def _math(number: str) -> str:
    return re.sub(r"e([+-]?)0*(\d+)$", r" \\times 10^{\g<1>\2}", number.replace(MINUS, "-"))


def scientific(value: float) -> str:
    r"""Three digits: ``$-0.123$``, or ``$1.23 \times 10^{-4}$`` where far from one."""
    if value == 0.0:
        return "$0$"
    mantissa, power = f"{value:.2e}".split("e")
    if -2 <= int(power) <= 2:
        return f"${value:.{max(0, 2 - int(power))}f}$"
    return rf"${mantissa} \times 10^{{{int(power)}}}$"


def latex(table: PaperTable, about: Sequence[str]) -> str:
    """A table as a file to be included: a float, or a longtable where it has many rows.

    Parameters
    ----------
    table : PaperTable
        One that has a printed form.
    about : sequence of str
        Lines of comment above it.
    """
    comment = [
        *about,
        "Needs in the preamble: " + " ".join(rf"\usepackage{{{name}}}" for name in PACKAGES),
    ]
    head = [f"% {_comment(line)}" for line in comment]
    widths = table.panels or (len(table.head) - 1,)
    if len(widths) == 1 and len(table.rows) > _LONG:
        return "\n".join([*head, *_long(table), ""])
    parts, start = [], 1
    for width in widths:
        parts.append((0, *range(start, start + width)))
        start += width
    together = max(1, _LONG // (len(table.rows) + 2))
    pages = [parts[first : first + together] for first in range(0, len(parts), together)]
    floats = [_float(table, page, number, len(pages)) for number, page in enumerate(pages, 1)]
    return "\n".join([*head, *(line for lines in floats for line in lines), ""])


def _float(
    table: PaperTable, parts: Sequence[tuple[int, ...]], number: int, count: int
) -> list[str]:
    """One page of a table, its panels one below the other."""
    part = f" (part {number} of {count})" if count > 1 else ""
    suffix = f"_{number}" if count > 1 else ""
    lines = [
        r"\begin{table}",
        r"\centering",
        *_SMALL,
        rf"\caption{{{escaped(table.title)}{part}}}",
        rf"\label{{tab:{table.name}{suffix}}}",
        "",
    ]
    for place, columns in enumerate(parts):
        lines += [r"\par\medskip"] if place else []
        lines += _tabular(table, columns)
    return [*lines, *_notes(table), r"\end{table}"]


def _comment(line: str) -> str:
    return "".join(letter if " " <= letter <= "~" else "?" for letter in line)


def _columns(table: PaperTable, columns: Sequence[int]) -> str:
    """Text to the left, broken where it is long; numbers to the right."""
    letters = []
    for column in columns:
        cells = [row[column] for row in table.rows]
        texts = [value.text for value in cells if isinstance(value, Words)]
        longest = max((len(text) for text in texts), default=0)
        if longest > _SHORT:
            piece = max(len(part) for text in texts for part in _pieces(text))
            share = min(0.60, max(min(0.25, 0.011 * longest), 0.0135 * piece))
            letters.append(rf">{{\raggedright\arraybackslash}}p{{{share:.2f}\linewidth}}")
        elif cells and all(is_number(value) for value in cells):
            letters.append("r")
        else:
            letters.append("l")
    return "@{}" + "".join(letters) + "@{}"


def is_number(value: Cell) -> bool:
    """Whether a cell is to be set flush right, as numbers are."""
    if isinstance(value, Quoted | Scientific):
        return True
    return isinstance(value, str) and re.fullmatch(rf"[{MINUS}]?[\d,.]*", value) is not None


def _line(row: Sequence[Cell], columns: Sequence[int]) -> str:
    return " & ".join(cell(row[column]) for column in columns) + r" \\"


def _tabular(table: PaperTable, columns: Sequence[int]) -> list[str]:
    return [
        rf"\begin{{tabular}}{{{_columns(table, columns)}}}",
        r"\toprule",
        _line(table.head, columns),
        r"\midrule",
        *(_line(row, columns) for row in table.rows),
        r"\bottomrule",
        r"\end{tabular}",
    ]


def _long(table: PaperTable) -> list[str]:
    columns = range(len(table.head))
    label, number = escaped(table.title), len(table.head)
    head = _line(table.head, columns)
    return [
        r"\begingroup",
        *_SMALL,
        rf"\begin{{longtable}}{{{_columns(table, columns)}}}",
        rf"\caption{{{label}}}\label{{tab:{table.name}}} \\",
        r"\toprule",
        head,
        r"\midrule",
        r"\endfirsthead",
        rf"\multicolumn{{{number}}}{{@{{}}l@{{}}}}{{Table \thetable, continued}} \\",
        r"\toprule",
        head,
        r"\midrule",
        r"\endhead",
        r"\bottomrule",
        r"\endfoot",
        *(_line(row, columns) for row in table.rows),
        r"\end{longtable}",
        *_notes(table),
        r"\endgroup",
    ]


def _notes(table: PaperTable) -> list[str]:
    if not table.notes:
        return []
    words = " ".join(escaped(note) for note in table.notes)
    return [
        r"\par\smallskip\noindent",
        rf"\begin{{minipage}}{{\linewidth}}\raggedright {words}\end{{minipage}}",
    ]
