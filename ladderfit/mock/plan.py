"""What is true in a simulated survey, and how it observes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from astropy.table import Table

from ladderfit.mock.breakages import Breakage
from ladderfit.mock.contamination import Contamination
from ladderfit.mock.light_curves import LightCurves
from ladderfit.names import with_group


@dataclass(frozen=True)
class Host:
    """A simulated galaxy with Cepheids.

    Attributes
    ----------
    name : str
        Its name.
    modulus : float
        True distance modulus [mag].
    cepheids : int
        Number of Cepheids observed.
    shortest : float
        Shortest period found [d].  A limit in period does not bias the relation.
    reddening : float
        Mean colour excess E(V-I) [mag]; the excesses are exponentially distributed.
    metallicity, gradient : float
        12+log(O/H) at the centre, and its fall from the centre to the edge [dex].
    supernovae : int
        Number of supernovae with a standardised peak.
    geometric_error : float or None
        Standard error of a geometric distance modulus [mag]; None for all but anchors.
    overtones : float
        Share of first-overtone pulsators among stars with fundamental periods
        under `Plan.overtone_limit`.
    """

    name: str
    modulus: float
    cepheids: int
    shortest: float = 5.0
    reddening: float = 0.15
    metallicity: float = 8.9
    gradient: float = 0.35
    supernovae: int = 0
    geometric_error: float | None = None
    overtones: float = 0.0


@dataclass(frozen=True)
class Plan:
    """True values of the parameters, and the design of the survey.

    The default of each number is that of the sample.

    Attributes
    ----------
    slope, zero_point, metallicity, scatter, parallax_offset : float
        The relation for W = H - ratio (V-I) at `pivot` [d] and `reference` [dex],
        in mag per dex, mag, mag per dex and mag, and the parallax offset [mas].
    peak_magnitude, peak_scatter, hubble_constant : float
        Standard peak and its scatter [mag]; the Hubble constant [km/s/Mpc].
    q0, j0, peculiar_velocity : float
        Deceleration, jerk and the dispersion of peculiar velocities [km/s].
    ratio : float
        A_H / E(V-I), of the dust and of the index alike.
    hosts : tuple of Host
        The galaxies.
    parallax_stars : int
        Number of Cepheids of the Milky Way with parallaxes.
    parallax_moduli, parallax_errors : pair of float
        Their true moduli [mag] and parallax errors [mas] are uniform in these
        ranges; none is chosen or dropped by anything measured.  A fit that takes
        moduli as flat without ends is pulled a little by the ends of the range: by
        -0.007 mag in the zero point of the parallax stars alone with the default
        range, a quarter of the error that 60 of them give.
    longest : float
        Longest period anywhere [d].
    overtone_limit : float
        Longest fundamental period of a first-overtone pulsator [d].
    flow, flow_outside : int
        Number of supernovae with redshifts inside `flow_redshifts` and outside.
    missing_cepheids, missing_parallax_stars : int
        Number of rows that lack one value.
    light_curves : LightCurves or None
        Widths and colours of the supernovae; None where peaks are standardised.
    contamination : Contamination or None
        Cepheids of hosts that do not follow the relation.
    breakage : Breakage
        What else is wrong.
    """

    hosts: tuple[Host, ...]
    slope: float = -3.28
    zero_point: float = -5.93
    metallicity: float = -0.21
    scatter: float = 0.08
    parallax_offset: float = -0.012
    peak_magnitude: float = -19.27
    peak_scatter: float = 0.11
    hubble_constant: float = 71.3
    q0: float = -0.55
    j0: float = 1.0
    peculiar_velocity: float = 250.0
    ratio: float = 0.386
    pivot: float = 10.0
    reference: float = 8.69
    parallax_stars: int = 70
    parallax_moduli: tuple[float, float] = (8.0, 13.0)
    parallax_errors: tuple[float, float] = (0.012, 0.030)
    longest: float = 95.0
    overtone_limit: float = 8.0
    flow: int = 250
    flow_outside: int = 22
    flow_redshifts: tuple[float, float] = (0.023, 0.15)
    missing_cepheids: int = 12
    missing_parallax_stars: int = 3
    light_curves: LightCurves | None = None
    contamination: Contamination | None = None
    breakage: Breakage = field(default_factory=Breakage)

    def truth(self) -> dict[str, float]:
        """True values by parameter name, host moduli included."""
        named = (
            "slope",
            "zero_point",
            "metallicity",
            "scatter",
            "parallax_offset",
            "peak_magnitude",
            "peak_scatter",
            "hubble_constant",
        )
        values = {name: float(getattr(self, name)) for name in named}
        values |= {} if self.light_curves is None else self.light_curves.truth()
        return values | {with_group("modulus", host.name): host.modulus for host in self.hosts}


@dataclass(frozen=True)
class Mock:
    """The tables of a simulated survey, rounded as published tables are.

    Attributes
    ----------
    cepheids, parallax_stars, supernovae, flow : Table
        Columns carry units, formats and descriptions; missing values are masked.
    anchors : mapping of str to (float, float)
        Measured geometric modulus and its error [mag], by host.
    truth : mapping of str to float
        True values by parameter name.
    """

    cepheids: Table
    parallax_stars: Table
    supernovae: Table
    flow: Table
    anchors: Mapping[str, tuple[float, float]]
    truth: Mapping[str, float]
