"""What the columns of a table measure, and their units."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import astropy.units as u
import numpy as np


@dataclass(frozen=True)
class Kind:
    """What the numbers of a column measure.

    Attributes
    ----------
    words : str
        For messages.
    unit : str
        The unit the package works in, and the one meant where a table states none.
    must_be_stated : bool
        Whether a format that knows units has to state this one.
    """

    words: str
    unit: str
    must_be_stated: bool = False


PERIOD = Kind("a period", "d", must_be_stated=True)
LOG_PERIOD = Kind("log10 of a period in days", "dex")
PERIOD_ERROR = Kind("an error of a period", "d", must_be_stated=True)
LOG_PERIOD_ERROR = Kind("an error of log10 of a period", "dex")
MAGNITUDE = Kind("a magnitude", "mag")
METALLICITY = Kind("a metallicity", "dex")
PARALLAX = Kind("a parallax", "mas", must_be_stated=True)
ANGLE = Kind("an angle", "deg")
COLOUR = Kind("an effective wavenumber", "1/um")
NUMBER = Kind("a number", "")
REDSHIFT = Kind("a redshift", "")
DECLINE_RATE = Kind("a decline rate", "mag")
PEAK_COLOUR = Kind("a colour", "mag")
HOST_MASS = Kind("log10 of a stellar mass in Msun", "dex")
MAGNITUDE_SQUARED = Kind("a covariance", "mag2")
DISTANCE = Kind("a distance", "Mpc", must_be_stated=True)
VELOCITY = Kind("a velocity", "km/s", must_be_stated=True)


_LOGARITHM_OF = {
    LOG_PERIOD.words: u.d,
    LOG_PERIOD_ERROR.words: u.d,
    HOST_MASS.words: u.Msun,
}


def conversion(unit: Any, kind: Kind) -> tuple[float, float] | None:
    """Factor and shift from a column's unit to that of `kind`; None if it is of another kind."""
    if unit is None:
        return (1.0, 0.0)
    if kind.unit == "mag":
        return _magnitudes(unit)
    if kind.unit == "dex":
        factor_shift = _dex(unit, logarithm_of=_LOGARITHM_OF.get(kind.words))
        if kind is LOG_PERIOD_ERROR and factor_shift is not None:
            return (factor_shift[0], 0.0)  # another unit shifts the logarithm, not its error
        return factor_shift
    if isinstance(unit, u.UnitBase) and not isinstance(unit, u.UnrecognizedUnit):
        target = u.Unit(kind.unit) if kind.unit else u.dimensionless_unscaled
        if unit.is_equivalent(target):
            return (float(unit.to(target)), 0.0)
    return None


def _magnitudes(unit: Any) -> tuple[float, float] | None:
    """Magnitudes of whatever system; dex converts to mag but means something else."""
    if isinstance(unit, u.MagUnit):
        return (1.0, 0.0)
    bases = getattr(unit, "bases", [])
    if len(bases) == 1 and bases[0].name.endswith("mag") and unit.is_equivalent(u.mag):
        return (float(unit.to(u.mag)), 0.0)
    return None


def _dex(unit: Any, logarithm_of: Any) -> tuple[float, float] | None:
    if isinstance(unit, u.DexUnit):
        inside = unit.physical_unit
        if logarithm_of is not None and inside.is_equivalent(logarithm_of):
            return (1.0, float(np.log10(inside.to(logarithm_of))))
        return (1.0, 0.0) if inside == u.dimensionless_unscaled else None
    if unit == u.dex:
        return (1.0, 0.0)
    if isinstance(unit, u.UnitBase) and unit.is_equivalent(u.dimensionless_unscaled):
        return (float(unit.to(u.dimensionless_unscaled)), 0.0)
    return None
