"""Tables as LaTeX, in the style of the booktabs package."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

from ladderfit.names import group_of
from ladderfit.report.cells import Cell, PaperTable, Quoted, Scientific, Symbol, Words
from ladderfit.report.latex_text import SHORT, cell, escaped, is_number

PACKAGES = ("booktabs", "array", "longtable")
_LONG = 45  # rows that a page holds
_LINE = 82.0  # letters of footnote size on a line of an article
_GAP = 1.4  # letters between columns
_WIDEST, _WIDE = 0.30, 0.22  # of the line, for one column of long text, or several
_SIZES = {r"\footnotesize": _LINE, r"\scriptsize": 90.0, r"\tiny": 105.0}


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
    parts = _panels(table) if table.cut else [tuple(range(len(table.head)))]
    if len(parts) == 1 and len(table.rows) > _LONG:
        return "\n".join([*head, *_long(table), ""])
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
        *_size(table, parts),
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
        share = _share(table, column)
        if share is not None:
            letters.append(rf">{{\raggedright\arraybackslash}}p{{{share:.2f}\linewidth}}")
        elif table.rows and all(is_number(row[column]) for row in table.rows):
            letters.append("r")
        else:
            letters.append("l")
    return "@{}" + "".join(letters) + "@{}"


def _share(table: PaperTable, column: int) -> float | None:
    """Of the line, for a column of long text; None where nothing is long."""
    longest = _longest(table, column)
    if longest <= SHORT:
        return None
    long = sum(_longest(table, other) > SHORT for other in range(len(table.head)))
    return min(_WIDEST if long == 1 else _WIDE, 0.011 * longest)


def _longest(table: PaperTable, column: int) -> int:
    cells = (row[column] for row in table.rows)
    return max((len(value.text) for value in cells if isinstance(value, Words)), default=0)


def _width(table: PaperTable, column: int, line: float) -> float:
    """About how wide a column is, in letters of which `line` fill a line."""
    share = _share(table, column)
    if share is not None:
        return share * line
    cells = [table.head[column], *(row[column] for row in table.rows)]
    return max(_letters(value) for value in cells)


def _letters(value: Cell) -> float:
    if isinstance(value, Symbol):
        return 4.0 + len(group_of(value.name) or "")
    if isinstance(value, Scientific):
        return 12.0
    if isinstance(value, Quoted):
        return len(str(value))
    return len(value if isinstance(value, str) else value.text)


def _panels(table: PaperTable) -> list[tuple[int, ...]]:
    """The columns but the first in as few panels as fit the line, about equally many each."""
    widths = [_width(table, column, _LINE) + _GAP for column in range(len(table.head))]
    room = _LINE - widths[0]
    most = max(1, int(room // max(widths[1:], default=1.0)))
    count = len(widths) - 1
    panels = max(1, -(-count // most))
    edges = [1 + (place * count) // panels for place in range(panels + 1)]
    return [(0, *range(low, high)) for low, high in pairwise(edges)]


def _size(table: PaperTable, parts: Sequence[tuple[int, ...]]) -> tuple[str, str]:
    """The largest type in which every part fits the line."""

    def fits(line: float) -> bool:
        widths = [sum(_width(table, c, line) + _GAP for c in columns) for columns in parts]
        return max(widths) <= line

    fitting = [size for size, line in _SIZES.items() if fits(line)]
    return (fitting or [*_SIZES][-1:])[0], r"\setlength{\tabcolsep}{3pt}"


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
    columns = tuple(range(len(table.head)))
    label, number = escaped(table.title), len(table.head)
    head = _line(table.head, columns)
    return [
        r"\begingroup",
        *_size(table, [columns]),
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
