"""What a table says of Cepheids in hosts beyond other Cepheids: limits, loadings, own cuts."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from ladderfit import schema
from ladderfit.choices import Cepheids
from ladderfit.errors import Problem, raise_if
from ladderfit.inputs.kinds import MAGNITUDE
from ladderfit.inputs.rows import Rows, nearest_few
from ladderfit.inputs.tables import Texts
from ladderfit.samples import FloatArray

_KEY = "cepheids"


@dataclass(frozen=True, eq=False)
class HostValues:
    """Every row of a table of Cepheids; None where no choice asks.

    Attributes
    ----------
    headroom : array, shape (n,), or None
        Limit of the host minus magnitude in its band [mag]; NaN in hosts without one.
    loadings : array, shape (n, terms), or None
        On the shared terms, zero in hosts that a term does not concern.
    """

    headroom: FloatArray | None
    loadings: FloatArray | None


def require_host_columns(rows: Rows, section: Cepheids) -> None:
    """Check that the columns of limits and loadings are there, in magnitudes.

    Raises
    ------
    InputError
        With a problem for each column.
    """
    problems: list[Problem] = []
    limited = _limit_column(section)
    kinds = dict.fromkeys(limited, MAGNITUDE)
    problems.extend(rows.faults(limited, kinds, f"{_KEY}.completeness.band"))
    loads = {name: term.loading for name, term in section.shared.items()}
    measured = dict.fromkeys(loads, MAGNITUDE)
    problems.extend(rows.faults(loads, measured, f"{_KEY}.shared", "loading of {}".format))
    raise_if(problems)


def host_values(rows: Rows, section: Cepheids, host: Texts) -> HostValues:
    """Read limits and loadings, and leave out what lies beyond a limit or a host's own cut."""
    rows.problems.extend(_unknown_hosts(section, host.known))
    headroom = None
    for band, column in _limit_column(section).items():
        magnitude = rows.number(band, column, MAGNITUDE)
        headroom = _by_host(_limits(section), host, rows.table.rows) - magnitude
    loadings = []
    for name, term in section.shared.items():
        values = rows.number(f"loading of {name}", term.loading, MAGNITUDE)
        if term.hosts:
            inside = np.any([host.equal(wanted) for wanted in term.hosts], axis=0)
            values = np.where(inside, values, 0.0)
        loadings.append(values)
    return HostValues(headroom, np.stack(loadings, axis=1) if loadings else None)


def cut_hosts(rows: Rows, section: Cepheids, host: Texts, period: FloatArray) -> None:
    """Leave out stars shorter than their host's own shortest period."""
    shortest = _by_host(section.shortest, host, rows.table.rows)
    rows.leave_out(period < shortest, "shorter than the host's own limit", f"{_KEY}.shortest")


def cut_limits(rows: Rows, section: Cepheids, values: HostValues) -> None:
    """Leave out stars beyond a sharp magnitude limit."""
    limits = section.completeness
    if limits is not None and values.headroom is not None and limits.softness == 0.0:
        rows.leave_out(
            values.headroom < 0.0, "beyond the magnitude limit", f"{_KEY}.completeness.limits"
        )


def _limits(section: Cepheids) -> Mapping[str, float]:
    return {} if section.completeness is None else section.completeness.limits


def _limit_column(section: Cepheids) -> dict[str, str]:
    """The column in which limits act, by the band's name."""
    if section.completeness is None:
        return {}
    band = section.completeness.band
    return {band: section.magnitude.bands.get(band, band)}


def _by_host(numbers: Mapping[str, float], host: Texts, size: int) -> FloatArray:
    """The number of each row's host; NaN where it has none."""
    values = np.full(size, np.nan)
    for name, number in numbers.items():
        values[host.equal(name)] = number
    return values


def _unknown_hosts(section: Cepheids, known: list[str]) -> Iterator[Problem]:
    named = {
        "shortest": tuple(section.shortest),
        "completeness.limits": tuple(_limits(section)),
        **{schema.join("shared", name): term.hosts for name, term in section.shared.items()},
    }
    for key, hosts in named.items():
        for wanted in hosts:
            if wanted not in known:
                yield Problem(
                    found=f"the host {wanted!r}, which the table does not have",
                    expected="hosts of the Cepheids",
                    remedy=nearest_few(wanted, known),
                    key=f"{_KEY}.{key}",
                )
