"""What all sections with a table share: columns by role, ranges, rows left out by hand."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from ladderfit import schema
from ladderfit.errors import Problem, nearest
from ladderfit.schema import choice

Columns = Mapping[str, str]
Range = tuple[float, float]


@dataclass(frozen=True)
class SetAside:
    """One object left out by hand, or all of one host, with the reason."""

    reason: str = choice("why it is set aside")
    star: str | None = choice("the star's name", default=None)
    host: str | None = choice(
        "the star's host, where the name alone is ambiguous; alone: the whole host", default=None
    )
    name: str | None = choice("the supernova's name", default=None)

    @property
    def whole_host(self) -> bool:
        """Whether all of a host is meant."""
        return self.star is None and self.name is None

    def check(self) -> Iterator[Problem]:
        """Exactly one object is named, or a host alone."""
        named = [known for known in (self.star, self.name) if known is not None]
        if len(named) > 1 or (not named and self.host is None):
            yield Problem(
                found="two names" if named else "no name",
                expected="star = NAME for a Cepheid or name = NAME for a supernova "
                "or host = NAME for all in a galaxy",
                remedy="name one object",
            )


def range_faults(key: str, low_high: Range, unit: str, *, above_zero: bool) -> Iterator[Problem]:
    """The problem with a range whose bounds are not in order."""
    low, high = low_high
    if not low < high or (above_zero and low < 0.0):
        yield Problem(
            found=f"[{low:g}, {high:g}]",
            expected=f"a lower and a higher bound{unit}",
            remedy="swap or correct the bounds",
            key=key,
        )


def column_faults(
    columns: Columns, required: tuple[str, ...], optional: tuple[str, ...]
) -> Iterator[Problem]:
    """Problems with the roles that columns are given: unknown ones, missing ones."""
    known = (*required, *optional)
    for role in columns:
        if role not in known:
            yield Problem(
                found="an unknown role",
                expected="one of " + ", ".join(known),
                remedy=nearest(role, known),
                key=schema.join("columns", role),
            )
    for role in required:
        if role not in columns:
            yield Problem(
                found="nothing",
                expected=f"the name of the column that holds the {role.replace('_', ' ')}",
                remedy=f'add {role} = "..." to columns',
                key=schema.join("columns", role),
            )


def period_faults(columns: Columns) -> Iterator[Problem]:
    """The problem unless exactly one of two columns gives the period."""
    given = [role for role in ("period", "log_period") if role in columns]
    if len(given) != 1:
        yield Problem(
            found="both period and log_period" if given else "neither period nor log_period",
            expected="one of period (d) and log_period (log10 of the period in d)",
            remedy="name exactly one of the two columns",
            key="columns",
        )
