"""Numbers as HTML: the strip of headline numbers, and every view as a table; no widgets."""

from __future__ import annotations

import html
from collections.abc import Iterable, Mapping, Sequence

import numpy as np

from ladderfit.names import group_of, parameter
from ladderfit.plots.moduli import host_moduli
from ladderfit.plots.relation import binned
from ladderfit.residuals import (
    Residuals,
    cepheid_residuals,
    flow_residuals,
    parallax_residuals,
    peak_residuals,
    velocity_residuals,
)
from ladderfit.result import Result
from ladderfit.rounding import MINUS, Interval, rounded
from ladderfit.samples import FloatArray
from ladderfit.workbench.columns import against_column
from ladderfit.workbench.why import NUMBERS, in_errors, signed

MOST_ROWS = 60
_BAR = 132
_TITLES = {
    "slope": "Slope",
    "zero_point": "Zero point",
    "peak_magnitude": "Peak magnitude",
    "hubble_constant": "H<sub>0</sub>",
}
_REACH = 4.0  # errors of the pinned posterior that the small bars show


def strip(result: Result, pinned: Result | None, published: Mapping[str, float]) -> str:
    """The headline numbers, what they were when pinned, and published values."""
    cells = []
    for name in NUMBERS:
        if name not in result.draws:
            continue
        interval = Interval.of(result.draws[name])
        change = None if pinned is None else in_errors(result, pinned, name)
        moved = "" if change is None else f"{signed(change)} of pinned error"
        if change is not None and abs(change) < 0.05:
            moved = "as pinned"
        title = _TITLES[name]
        cells.append(
            f'<div class="lf-number" data-name="{name}"><div class="lf-what">{title} '
            f"<span>[{parameter(name).unit}]</span></div>"
            f'<div class="lf-value">{interval}</div>'
            f"{_bar(interval, name, pinned, published.get(name))}"
            f'<div class="lf-moved">{moved}</div></div>'
        )
    return f'<div class="lf-strip" role="status">{"".join(cells)}</div>'


def _bar(interval: Interval, name: str, pinned: Result | None, published: float | None) -> str:
    base = interval
    if pinned is not None and name in pinned.draws:
        base = Interval.of(pinned.draws[name])
    spread = base.sd if base.sd > 0.0 else max(interval.sd, 1e-9)
    ends = [base.mean - _REACH * spread, base.mean + _REACH * spread, interval.low, interval.high]
    if published is not None:
        ends.append(published)
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
    words = words.replace("-", MINUS)
    return (
        f'<svg viewBox="0 0 {_BAR} 12" role="img" aria-label="{words}">'
        f"<title>{words}</title>{''.join(parts)}</svg>"
    )


def all_numbers(result: Result, pinned: Result | None, published: Mapping[str, float]) -> str:
    """Every parameter and host modulus."""
    rows = []
    for name, draws in result.draws.items():
        interval = Interval.of(draws)
        value = rounded(interval.mean, interval.sd)
        change = None if pinned is None else in_errors(result, pinned, name)
        group = group_of(name)
        known = parameter(name).words
        words = known if group is None else f"{known}, {group}"
        told = published.get(name)
        rows.append(
            (
                words,
                value.value,
                value.error or "fixed",
                "" if change is None else signed(change),
                rounded(interval.low, interval.sd).value,
                rounded(interval.high, interval.sd).value,
                parameter(name).unit,
                "" if told is None else f"{told:g}",
            )
        )
    head = ("parameter", "mean", "sd", "change [sd]", "16 %", "84 %", "unit", "published")
    return table(head, rows)


def view_table(result: Result, view: str, rung: str, column: str) -> str:
    """The numbers of a view."""
    if view == "moduli":
        return _moduli(result)
    if view == "hubble":
        return _hubble(result)
    if view == "corner":
        return _corner(result)
    if view == "column":
        found = against_column(result, rung, column)
        if found is None:
            return table((), [])
        return _farthest(found.residuals, found.x, found.column, found.data_unit)
    return _relation(result)


def _relation(result: Result) -> str:
    stars, parallaxes = cepheid_residuals(result), parallax_residuals(result)
    text = ""
    if stars is not None:
        rows = [(f"{p:.3g}", *_pair(m, e)) for p, m, e in zip(*binned(stars), strict=True)]
        text += "<h4>Mean residual in bins of period</h4>"
        text += table(("period [d]", "mean [mag]", "error [mag]"), rows)
        text += _farthest(stars, 10.0**stars.x, "period [d]", "mag")
    if parallaxes is not None:
        text += _farthest(parallaxes, 10.0**parallaxes.x, "period [d]", "mas")
    return text


def _moduli(result: Result) -> str:
    rows = []
    for entry in host_moduli(result):
        value = rounded(entry.interval.mean, entry.interval.sd)
        rows.append(
            (
                entry.host,
                value.value,
                value.error,
                *(
                    str(rounded(*pair)) if pair else ""
                    for pair in (entry.geometric, entry.supernovae)
                ),
            )
        )
    head = ("host", "modulus [mag]", "sd [mag]", "geometry minus it", "supernovae minus it")
    return table(head, rows)


def _hubble(result: Result) -> str:
    text = ""
    for found, words, unit in (
        (peak_residuals(result), "modulus [mag]", "mag"),
        (flow_residuals(result), "redshift", "mag"),
        (velocity_residuals(result), "distance [Mpc]", "km/s"),
    ):
        if found is not None:
            text += _farthest(found, found.x, words, unit)
    return text


def _corner(result: Result) -> str:
    names = [name for name in result.headline if np.ptp(result.draws[name]) > 0.0]
    if not names:
        return table((), [])
    matrix = np.atleast_2d(np.corrcoef(np.stack([result.draws[name] for name in names])))
    rows = []
    for place, name in enumerate(names):
        interval = Interval.of(result.draws[name])
        cells = [f"{value:.2f}".replace("-", MINUS) for value in matrix[place, : place + 1]]
        cells += [""] * (len(names) - len(cells))
        rows.append((name, str(interval), *cells))
    return "<h4>Numbers and correlations</h4>" + table(("", "mean ± sd", *names), rows)


def _farthest(data: Residuals, x: FloatArray, words: str, unit: str) -> str:
    """Objects by how far they are off, the farthest first."""
    order = np.argsort(-np.abs(data.standardised))[:MOST_ROWS]
    rows = [
        (
            str(data.name[i]),
            f"{x[i]:.4g}",
            *_pair(float(data.residual[i]), float(data.sd[i])),
            signed(float(data.standardised[i])),
        )
        for i in order
    ]
    shown = f"the {len(order)} farthest off of {len(data):,}" if len(order) < len(data) else "all"
    head = ("name", words, f"residual [{unit}]", f"spread [{unit}]", "in spreads")
    return f"<h4>Residuals: {shown}</h4>" + table(head, rows)


def _pair(value: float, error: float) -> tuple[str, str]:
    found = rounded(value, error)
    return found.value, found.error


def table(head: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """An HTML table; every cell is escaped."""
    if not head:
        return "<p>no such numbers here</p>"
    top = "".join(f'<th scope="col">{html.escape(cell)}</th>' for cell in head)
    body = "".join(
        "<tr>" + "".join(f"<td>{html.escape(cell)}</td>" for cell in row) + "</tr>" for row in rows
    )
    return f'<table class="lf-table"><thead><tr>{top}</tr></thead><tbody>{body}</tbody></table>'
