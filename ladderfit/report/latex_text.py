"""Any text, number and unit as LaTeX that prints it and does nothing else."""

from __future__ import annotations

import re
import unicodedata

from ladderfit.names import group_of, parameter
from ladderfit.report.cells import Cell, Quoted, Scientific, Symbol, Unit, Words
from ladderfit.rounding import MINUS, Rounded

SHORT = 15  # letters up to which text is not broken
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
    if letter in " \t\n\r\N{NO-BREAK SPACE}":
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
    """Long text that breaks after dots and slashes too, and within an endless word."""
    if len(text) <= SHORT:
        return escaped(text)
    parts = [part for part in _BREAKS.split(text) if part]
    pieces = [part[start : start + SHORT] for part in parts for start in range(0, len(part), SHORT)]
    return r"\allowbreak{}".join(escaped(piece) for piece in pieces)


_BREAKS = re.compile(r"(?<=[._/=\[])(?=[^\s._/=])|(?<=\s)")


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


def is_number(value: Cell) -> bool:
    """Whether a cell is to be set flush right, as numbers are."""
    if isinstance(value, Quoted | Scientific):
        return True
    return isinstance(value, str) and re.fullmatch(rf"[{MINUS}]?[\d,.]*", value) is not None
