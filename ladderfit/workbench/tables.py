"""Numbers as HTML: the strip of headline numbers, all numbers, tables; no widgets."""

from __future__ import annotations

import html
from collections.abc import Iterable, Mapping, Sequence

from ladderfit.names import group_of, parameter
from ladderfit.result import Result
from ladderfit.rounding import MINUS, Interval, rounded
from ladderfit.workbench.why import NUMBERS, in_errors, signed

_BAR = 132
_TITLES = {
    "slope": "Slope",
    "zero_point": "Zero point",
    "peak_magnitude": "Peak magnitude",
    "hubble_constant": "H<sub>0</sub>",
}
_REACH = 4.0  # errors of the pinned posterior that the small bars show


def strip(
    result: Result,
    pinned: Result | None,
    published: Mapping[str, float],
    full: Result | None = None,
) -> str:
    """The headline numbers, what they were when pinned, published values, and a long run."""
    cells = []
    for name in NUMBERS:
        if name not in result.draws:
            continue
        interval = Interval.of(result.draws[name])
        change = None if pinned is None else in_errors(result, pinned, name)
        moved = "" if change is None else f"{signed(change)} of pinned error"
        if change is not None and abs(change) < 0.05:
            moved = "as pinned"
        run = Interval.of(full.draws[name]) if full is not None and name in full.draws else None
        title = _TITLES[name]
        cells.append(
            f'<div class="lf-number" data-name="{name}"><div class="lf-what">{title} '
            f"<span>[{parameter(name).unit}]</span></div>"
            f'<div class="lf-value">{interval}</div>'
            f"{_bar(interval, name, pinned, published.get(name), run)}"
            f'<div class="lf-moved">{moved}</div>{_in_full(run)}</div>'
        )
    room = " lf-with-run" if full is not None else ""
    return f'<div class="lf-strip{room}" role="status">{"".join(cells)}</div>'


def _in_full(run: Interval | None) -> str:
    return "" if run is None else f'<div class="lf-run">in full {run}</div>'


def _bar(
    interval: Interval,
    name: str,
    pinned: Result | None,
    published: float | None,
    run: Interval | None,
) -> str:
    base = interval
    if pinned is not None and name in pinned.draws:
        base = Interval.of(pinned.draws[name])
    spread = base.sd if base.sd > 0.0 else max(interval.sd, 1e-9)
    ends = [base.mean - _REACH * spread, base.mean + _REACH * spread, interval.low, interval.high]
    if published is not None:
        ends.append(published)
    if run is not None:
        ends += [run.low, run.high]
    low, high = min(ends), max(ends)

    def x(value: float) -> str:
        return f"{2.0 + (_BAR - 4.0) * (value - low) / (high - low):.1f}"

    width = (_BAR - 4.0) * (interval.high - interval.low) / (high - low)
    parts = [
        f'<line class="lf-rail" x1="0" x2="{_BAR}" y1="6" y2="6"/>',
        f'<rect class="lf-inner" x="{x(interval.low)}" y="3.5" width="{max(width, 1):.1f}" '
        'height="5"/>',
        f'<line class="lf-mean" x1="{x(interval.mean)}" x2="{x(interval.mean)}" y1="1" y2="11"/>',
    ]
    words = f"68 % from {interval.low:.6g} to {interval.high:.6g}"
    if pinned is not None:
        parts.append(f'<circle class="lf-pinned" cx="{x(base.mean)}" cy="6" r="2.2"/>')
    if published is not None:
        at = x(published)
        parts.append(f'<path class="lf-published" d="M {at} 6 l 3.2 6 h -6.4 Z"/>')
        words += f"; published {published:g}"
    if run is not None:
        long = (_BAR - 4.0) * (run.high - run.low) / (high - low)
        parts.append(
            f'<rect class="lf-full" x="{x(run.low)}" y="9.6" width="{max(long, 1):.1f}" '
            'height="1.8"/>'
        )
        words += f"; in full {run}"
    words = words.replace("-", MINUS)
    return (
        f'<svg viewBox="0 0 {_BAR} 12" role="img" aria-label="{words}">'
        f"<title>{words}</title>{''.join(parts)}</svg>"
    )


def all_numbers(
    result: Result,
    pinned: Result | None,
    published: Mapping[str, float],
    full: Result | None = None,
) -> str:
    """Every parameter and host modulus."""
    rows = []
    for name, draws in result.draws.items():
        interval = Interval.of(draws)
        value = rounded(interval.mean, interval.sd)
        change = None if pinned is None else in_errors(result, pinned, name)
        group = group_of(name)
        known = parameter(name).words
        words = known if group is None else f"{known}, {group}"
        words += f" [{parameter(name).unit}]" if parameter(name).unit else ""
        told = published.get(name)
        rows.append(
            (
                words,
                value.value,
                value.error or "fixed",
                *(_of_run(full, name) if full is not None else ()),
                "" if change is None else signed(change),
                rounded(interval.low, interval.sd).value,
                rounded(interval.high, interval.sd).value,
                *(("" if told is None else f"{told:g}".replace("-", MINUS),) if published else ()),
            )
        )
    more = ("in full",) if full is not None else ()
    also = ("published",) if published else ()
    head = ("parameter", "mean", "sd", *more, "change", "16 %", "84 %", *also)
    words = "" if pinned is None else "<p>Change: in errors of the baseline.</p>"
    return words + table(head, rows)


def _of_run(full: Result, name: str) -> tuple[str]:
    """A parameter in a long run."""
    return (str(Interval.of(full.draws[name])) if name in full.draws else "",)


def table(head: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """An HTML table; every cell is escaped."""
    if not head:
        return "<p>no such numbers here</p>"
    top = "".join(f'<th scope="col">{html.escape(cell)}</th>' for cell in head)
    body = "".join(
        "<tr>" + "".join(f"<td>{html.escape(cell)}</td>" for cell in row) + "</tr>" for row in rows
    )
    return f'<table class="lf-table"><thead><tr>{top}</tr></thead><tbody>{body}</tbody></table>'
