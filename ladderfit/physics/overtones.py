"""Periods of first-overtone Cepheids, brought to the fundamental mode.

A published ratio of the two periods, P1/P0 = zero + slope log10(P1/d), turns the
overtone's period P1 into the fundamental one, P0 = P1 / (P1/P0).  The coefficients
below were written down from memory, without the papers at hand; the last digit of
Alcock et al. is the less certain one.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class PeriodRatioLaw:
    """P1/P0 as a straight line in log10 P1, and where it was measured.

    Attributes
    ----------
    zero, slope : float
        P1/P0 = zero + slope log10(P1/d).
    stars : str
        What it was measured on.
    low, high : float
        Range of log10(P1/d) it is stated for; infinite where none is stated.
    """

    zero: float
    slope: float
    stars: str
    low: float = -np.inf
    high: float = np.inf

    def __str__(self) -> str:
        """The formula."""
        sign = "-" if self.slope < 0.0 else "+"
        return f"P1/P0 = {self.zero:g} {sign} {abs(self.slope):g} log10 P1"


# Feast & Catchpole 1997, MNRAS 286, L1; Alcock et al. 1995, AJ 109, 1653.
PERIOD_RATIOS = {
    "Feast & Catchpole 1997": PeriodRatioLaw(0.716, -0.027, "Galactic Cepheids"),
    "Alcock et al. 1995": PeriodRatioLaw(
        0.733, -0.034, "double-mode Cepheids of the LMC", 0.1, 0.7
    ),
}


def fundamental_log_period(log_period: npt.ArrayLike, law: PeriodRatioLaw) -> FloatArray:
    """log10 of the fundamental period [d] from that of the first overtone, any shape."""
    overtone = np.asarray(log_period, float)
    return np.asarray(overtone - np.log10(law.zero + law.slope * overtone))


def fundamental_stretch(log_period: npt.ArrayLike, law: PeriodRatioLaw) -> FloatArray:
    """Derivative of `fundamental_log_period`, by which an error of log10 period grows."""
    overtone = np.asarray(log_period, float)
    return np.asarray(1.0 - law.slope / (law.zero + law.slope * overtone) / np.log(10.0))


def within_range(log_period: npt.ArrayLike, law: PeriodRatioLaw) -> npt.NDArray[np.bool_]:
    """Whether an overtone's log10 period [d] lies where the law is stated to hold, any shape."""
    overtone = np.asarray(log_period, float)
    return np.asarray((overtone > law.low) & (overtone < law.high))
