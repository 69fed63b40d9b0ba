"""Supernovae in hosts, and the expansion."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

from ladderfit.choices.columns import Columns, Range, SetAside, column_faults, range_faults
from ladderfit.choices.covariance import Covariance
from ladderfit.choices.peak_relation import optional_roles
from ladderfit.cosmologies import KINEMATIC, cosmology_faults
from ladderfit.errors import Problem
from ladderfit.schema import choice


@dataclass(frozen=True)
class Supernovae:
    """Peak magnitudes of supernovae in hosts of the ladder."""

    table: str = choice("the table of supernovae, a path relative to this file")
    columns: Columns = choice(
        "column of each role: name, host, peak, peak_error, and those of the peak relation"
    )
    covariance: Covariance | None = choice(
        "the covariance of all peak magnitudes, in hosts and in the expansion", default=None
    )
    scatter: Literal["common", "apart"] = choice(
        "one scatter for all supernovae, or one each for hosts and expansion", default="common"
    )
    set_aside: tuple[SetAside, ...] = choice("supernovae left out by hand", default=())

    def check(self) -> Iterator[Problem]:
        """Roles; a covariance that replaces the errors needs no column of them."""
        replaced = self.covariance is not None and not self.covariance.adds
        required = ("name", "host", "peak", *(() if replaced else ("peak_error",)))
        also = (*(("peak_error",) if replaced else ()), *optional_roles())
        yield from column_faults(self.columns, required, also)


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
class Cosmology:
    """How distances grow with redshift: by q0 and j0, or as in a cosmology scaled to H0."""

    model: str = choice(
        "kinematic, or a cosmology by its name in astropy: FlatLambdaCDM, Planck18, ...",
        default=KINEMATIC,
    )
    parameters: Mapping[str, float] = choice(
        "parameters of the cosmology other than H0, such as Om0", default_factory=dict
    )

    def check(self) -> Iterator[Problem]:
        """A known model with parameters it accepts."""
        yield from cosmology_faults(self.model, self.parameters)


@dataclass(frozen=True)
class Expansion:
    """The expansion: a table of peaks and redshifts, or of distances and velocities, or a number.

    With redshift and peak columns, supernovae follow the expansion with their
    standard peak magnitude.  With distance [Mpc] and velocity [km/s] columns the
    job is the linear law velocity = H0 x distance (+ a constant).
    """

    table: str | None = choice("the table, a path relative to this file", default=None)
    columns: Columns = choice(
        "column of each role: name, redshift, redshift_heliocentric, peak, peak_error, "
        "peculiar_velocity_error, and those of the peak relation; or name, distance, velocity",
        default_factory=dict,
    )
    intercept: Intercept | None = choice("a published intercept instead", default=None)
    redshifts: Range = choice("lowest and highest redshift", default=(0.023, 0.15))
    cosmology: Cosmology = choice("how distances grow", default_factory=Cosmology)
    q0: float = choice("deceleration parameter", default=-0.55)
    j0: float = choice("jerk parameter", default=1.0)
    peculiar_velocity: float = choice("dispersion of peculiar velocities [km/s]", default=250.0)
    velocity_covariance: Covariance | None = choice(
        "the covariance of the peculiar velocities [(km/s)^2]", default=None
    )
    covariance: Covariance | None = choice(
        "the covariance of the peak magnitudes in the expansion alone", default=None
    )
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
                ("name", "redshift", "peak"),
                (
                    "redshift_heliocentric",
                    "peak_error",
                    "peculiar_velocity_error",
                    *optional_roles(),
                ),
            )
        if self.table is None or self.linear:
            for key in ("covariance", "velocity_covariance"):
                if getattr(self, key) is not None:
                    yield Problem(
                        found="a covariance without a table of peaks and redshifts",
                        expected="a covariance of supernovae in the expansion",
                        remedy="take it out, or add the table",
                        key=key,
                    )
        yield from range_faults("redshifts", self.redshifts, "", above_zero=True)
        if not 0.0 <= self.peculiar_velocity < float("inf"):
            yield Problem(
                f"{self.peculiar_velocity:g}",
                "a velocity of 0 km/s or more",
                "write 250.0, say",
                key="peculiar_velocity",
            )
