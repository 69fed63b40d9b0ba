"""The numbers of each view as an HTML table; no widgets."""

from __future__ import annotations

import html

import numpy as np

from ladderfit.checks.residuals import (
    Residuals,
    cepheid_residuals,
    flow_residuals,
    parallax_offsets,
    parallax_residuals,
    peak_residuals,
    velocity_residuals,
)
from ladderfit.plots.moduli import host_moduli
from ladderfit.plots.relation import binned
from ladderfit.result import Result
from ladderfit.rounding import MINUS, Interval, rounded
from ladderfit.samples import FloatArray
from ladderfit.sensitivity.redshift_cuts import RedshiftCuts
from ladderfit.workbench.columns import against_column
from ladderfit.workbench.shown import Shown
from ladderfit.workbench.tables import table
from ladderfit.workbench.why import signed

MOST_ROWS = 60


def column(shown: Shown) -> str:
    """Residuals against a column of the table."""
    found = against_column(shown.result, shown.rung, shown.column)
    if found is None:
        return table((), [])
    return farthest(found.residuals, found.x, found.column, found.data_unit)


def relation(shown: Shown) -> str:
    """Means in bins of period, and the stars that are farthest off."""
    result = shown.result
    stars, parallaxes = cepheid_residuals(result), parallax_residuals(result)
    text = ""
    if stars is not None:
        rows = [(f"{p:.3g}", *_pair(m, e)) for p, m, e in zip(*binned(stars), strict=True)]
        text += "<h4>Mean residual in bins of period</h4>"
        text += table(("period [d]", "mean [mag]", "error [mag]"), rows)
        text += farthest(stars, 10.0**stars.x, "period [d]", "mag")
    if parallaxes is not None:
        text += farthest(parallaxes, 10.0**parallaxes.x, "period [d]", "mas")
    return text


def moduli(shown: Shown) -> str:
    """Hosts' moduli, and what their own evidence says."""
    result = shown.result
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


def hubble(shown: Shown) -> str:
    """Supernovae, or velocities, that are farthest off."""
    result = shown.result
    text = ""
    for found, words, unit in (
        (peak_residuals(result), "modulus [mag]", "mag"),
        (flow_residuals(result), "redshift", "mag"),
        (velocity_residuals(result), "distance [Mpc]", "km/s"),
    ):
        if found is not None:
            text += farthest(found, found.x, words, unit)
    return text


def corner(shown: Shown) -> str:
    """Headline numbers with their correlations."""
    result = shown.result
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


def parallaxes(shown: Shown) -> str:
    """Zero point, offset and their correlation; the stars that are farthest off."""
    result = shown.result
    stars, sample = parallax_residuals(result), result.ladder.parallax_stars
    if stars is None or sample is None:
        return table((), [])
    photometric = stars.model - parallax_offsets(result, sample)
    return corner(shown) + farthest(stars, photometric, "photometric parallax [mas]", "mas")


def priors(shown: Shown) -> str:
    """Zero point and offset under each distance prior."""
    rows = [
        (label, *(_number(found, name) for name in ("zero_point", "parallax_offset")))
        for label, found in shown.worked.items()
    ]
    return table(("distance prior", "zero point [mag]", "residual offset [mas]"), rows)


def cuts(shown: Shown) -> str:
    """The Hubble constant along the redshift cuts."""
    found: RedshiftCuts = shown.worked
    text = ""
    for words, line in (("Lower", found.lower), ("Upper", found.upper)):
        rows = [
            (
                f"{cut:.3g}",
                f"{kept:,}",
                *_pair(float(mean), float(sd)),
                signed_at(float(mean) - found.mean, float(sd)),
                rounded(float(expected), float(sd)).value,
            )
            for cut, kept, mean, sd, expected in zip(
                line.cut, line.kept, line.mean, line.sd, line.expected, strict=True
            )
        ]
        head = ("cut", "supernovae", "H0 [km/s/Mpc]", "sd", "change", "change expected")
        text += f"<h4>{words} redshift cut</h4>" + table(head, rows)
    return text


def signed_at(value: float, error: float) -> str:
    """A change to the digits of its error, with a real sign."""
    found = rounded(value, error).value
    return found if found.startswith(MINUS) or float(found) == 0.0 else f"+{found}"


def _number(result: Result, name: str) -> str:
    return str(Interval.of(result.draws[name])) if name in result.draws else ""


def farthest(
    data: Residuals, x: FloatArray, words: str, unit: str, heading: str = "Residuals"
) -> str:
    """Objects by how far they are off, the farthest first."""
    order = np.argsort(-np.abs(data.standardised))[:MOST_ROWS]
    rows = [
        (
            str(data.name[i]),
            f"{x[i]:.4g}".replace("-", MINUS),
            *_pair(float(data.residual[i]), float(data.sd[i])),
            signed(float(data.standardised[i])),
        )
        for i in order
    ]
    shown = f"the {len(order)} farthest off of {len(data):,}" if len(order) < len(data) else "all"
    head = ("name", words, f"residual [{unit}]", f"spread [{unit}]", "in spreads")
    return f"<h4>{html.escape(heading)}: {shown}</h4>" + table(head, rows)


def _pair(value: float, error: float) -> tuple[str, str]:
    found = rounded(value, error)
    return found.value, found.error
