"""Supernovae in hosts, and the expansion."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from ladderfit.choices.columns import Columns, Range, SetAside, column_faults, range_faults
from ladderfit.errors import Problem
from ladderfit.schema import choice


@dataclass(frozen=True)
class Supernovae:
    """Standardised peak magnitudes of supernovae in hosts of the ladder."""

    table: str = choice("the table of supernovae, a path relative to this file")
    columns: Columns = choice("column of each role: name, host, peak, peak_error")
    set_aside: tuple[SetAside, ...] = choice("supernovae left out by hand", default=())

    def check(self) -> Iterator[Problem]:
        """Roles."""
        yield from column_faults(self.columns, ("name", "host", "peak", "peak_error"), ())


@dataclass(frozen=True)
class Intercept:
    """A published intercept of the expansion: a = log10(c z f) - 0.2 m."""

    value: float = choice("the intercept a")
    error: float = choice("its standard error")

    def check(self) -> Iterator[Problem]:
        """A positive error."""
        if not 0.0 < self.error < float("inf"):
            yield Problem(
                f"{self.error:g}", "an error above 0", "give the standard error", key="error"
            )


@dataclass(frozen=True)
class Expansion:
    """The expansion: a table of peaks and redshifts, or of distances and velocities, or a number.

    With redshift and peak columns, supernovae follow the expansion with their
    standard peak magnitude.  With distance [Mpc] and velocity [km/s] columns the
    job is the linear law velocity = H0 x distance (+ a constant).
    """

    table: str | None = choice("the table, a path relative to this file", default=None)
    columns: Columns = choice(
        "column of each role: name, redshift, redshift_heliocentric, peak, peak_error; "
        "or name, distance, velocity",
        default_factory=dict,
    )
    intercept: Intercept | None = choice("a published intercept instead", default=None)
    redshifts: Range = choice("lowest and highest redshift", default=(0.023, 0.15))
    q0: float = choice("deceleration parameter", default=-0.55)
    j0: float = choice("jerk parameter", default=1.0)
    peculiar_velocity: float = choice("dispersion of peculiar velocities [km/s]", default=250.0)
    velocity_constant: bool = choice(
        "whether the linear law has a constant velocity", default=False
    )
    set_aside: tuple[SetAside, ...] = choice("objects left out by hand", default=())

    @property
    def linear(self) -> bool:
        """Whether the job is velocities against distances."""
        return "velocity" in self.columns

    def check(self) -> Iterator[Problem]:
        """A table or an intercept; the columns of one of the two laws."""
        if (self.table is None) == (self.intercept is None):
            yield Problem(
                found="neither a table nor an intercept"
                if self.table is None
                else "both a table and an intercept",
                expected="one of them",
                remedy="add table and columns, or intercept = {value = ..., error = ...}"
                if self.table is None
                else "remove one of the two",
                key="table",
            )
        if self.table is not None and self.linear:
            yield from column_faults(self.columns, ("name", "distance", "velocity"), ())
        elif self.table is not None:
            yield from column_faults(
                self.columns,
                ("name", "redshift", "peak", "peak_error"),
                ("redshift_heliocentric",),
            )
        yield from range_faults("redshifts", self.redshifts, "", above_zero=True)
        if not 0.0 <= self.peculiar_velocity < float("inf"):
            yield Problem(
                f"{self.peculiar_velocity:g}",
                "a velocity of 0 km/s or more",
                "write 250.0, say",
                key="peculiar_velocity",
            )
