"""What a paper claims, and what it says of its method: the claims file."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Literal

from ladderfit.choices import Wesenheit
from ladderfit.choices.columns import Range, range_faults
from ladderfit.errors import Problem
from ladderfit.schema import choice

Quantity = Literal[
    "slope",
    "zero_point",
    "metallicity",
    "scatter",
    "modulus",
    "peak_magnitude",
    "hubble_constant",
]
OF_THE_RELATION = ("slope", "zero_point", "metallicity", "scatter")
UNITS = {
    "slope": "mag/dex",
    "zero_point": "mag",
    "metallicity": "mag/dex",
    "scatter": "mag",
    "modulus": "mag",
    "peak_magnitude": "mag",
    "hubble_constant": "km/s/Mpc",
}
WORDS = {
    "slope": "slope",
    "zero_point": "zero point",
    "metallicity": "metallicity term",
    "scatter": "scatter",
    "modulus": "distance modulus",
    "peak_magnitude": "peak magnitude",
    "hubble_constant": "Hubble constant",
}
FIXABLE = ("slope", "slope_beyond", "zero_point", "metallicity", "curvature")


@dataclass(frozen=True)
class Method:
    """What the paper says of its method; a key that is absent was not stated.

    Unstated, the refit as described is least squares without weights, clip or cut,
    of the terms and the pulsation mode that the ladder file has.  Stars with
    parallaxes take part unless the paper names its hosts.
    """

    fit: Literal["least squares", "both errors", "hierarchical"] | None = choice(
        "the kind of fit", default=None
    )
    weights: Literal["none", "errors", "errors and scatter"] | None = choice(
        "the weights of the stars", default=None
    )
    clip: float | None = choice("threshold of an iterative clip [residual s.d.]", default=None)
    periods: Range | None = choice("shortest and longest period [d]", default=None)
    mode: Literal["fundamental", "overtone", "both"] | None = choice(
        "the pulsation mode", default=None
    )
    hosts: tuple[str, ...] = choice("the hosts, where not all take part", default=())
    parallax_stars: bool | None = choice("whether stars with parallaxes take part", default=None)
    set_aside: tuple[str, ...] = choice("names of stars that the paper leaves out", default=())
    fixed: Mapping[str, float] = choice("coefficients held fixed", default_factory=dict)
    break_: float | None = choice("the period beyond which the slope is another [d]", default=None)
    metallicity: bool | None = choice("whether there is a metallicity term", default=None)

    def check(self) -> Iterator[Problem]:
        """Numbers in range, and coefficients that can be held."""
        if self.clip is not None and not self.clip > 0.0:
            yield Problem(f"{self.clip:g}", "a threshold above 0", "write 3.0, say", key="clip")
        if self.break_ is not None and not self.break_ > 0.0:
            yield Problem(f"{self.break_:g}", "a period in days", "write 10.0, say", key="break")
        if self.periods is not None:
            yield from range_faults("periods", self.periods, " in days", above_zero=True)
        for name in self.fixed:
            if name not in FIXABLE:
                yield Problem(
                    found=f"the coefficient {name!r}",
                    expected="one of " + ", ".join(FIXABLE),
                    remedy="correct or remove the name",
                    key="fixed",
                )
        if self.fit == "both errors" and self.weights == "none":
            yield Problem(
                found="a line with both errors, yet no weights",
                expected="weights from the errors",
                remedy='write weights = "errors", or leave weights out',
                key="weights",
            )

    @property
    def words(self) -> str:
        """In one phrase, for the page."""
        said: list[str] = [self.fit or "least squares (not stated)"]
        if self.weights is not None:
            said.append("no weights" if self.weights == "none" else f"weights from {self.weights}")
        said += [f"{value:g} d {key}" for key, value in (("break", self.break_),) if value]
        if self.periods is not None:
            said.append(period_words(self.periods))
        if self.clip is not None:
            said.append(f"clip at {self.clip:g} s.d.")
        if self.mode is not None:
            said.append("both modes" if self.mode == "both" else f"{self.mode} mode")
        if self.hosts:
            said.append("hosts " + ", ".join(self.hosts))
        if self.parallax_stars is not None:
            said.append(f"with{'' if self.parallax_stars else 'out'} parallax stars")
        if self.set_aside:
            said.append(f"{len(self.set_aside)} stars set aside")
        said += [f"{name.replace('_', ' ')} fixed at {v:g}" for name, v in self.fixed.items()]
        if self.metallicity is not None:
            said.append("metallicity term" if self.metallicity else "no metallicity term")
        return "; ".join(said)


def period_words(periods: Range) -> str:
    """A range of periods, without the bounds that cut nothing."""
    low, high = periods
    if high == float("inf"):
        return f"from {low:g} d" if low > 0.0 else "all periods"
    return f"up to {high:g} d" if low <= 0.0 else f"{low:g} to {high:g} d"


@dataclass(frozen=True)
class ClaimedMagnitude:
    """Which magnitude the claim is about; absent, the ladder file's is taken."""

    band: str | None = choice("the band", default=None)
    wesenheit: Wesenheit | None = choice("the index", default=None)
    system: str | None = choice("the photometric system", default=None)

    def check(self) -> Iterator[Problem]:
        """At most one of band and index."""
        if self.band is not None and self.wesenheit is not None:
            yield Problem("both band and wesenheit", "one of them", "remove one")


@dataclass(frozen=True)
class Transformation:
    """What to add to a number on the paper's system to have it on the table's.

    Attributes
    ----------
    slope : float
        [mag/dex].
    zero_point : float
        [mag], at `pivot`.
    error : float
        Standard error of what is added to the quantity claimed [its unit].
    pivot : float
        Period at which `zero_point` is added [d].
    source : str
    """

    source: str = choice("where the transformation comes from")
    slope: float = choice("to be added to the slope [mag/dex]", default=0.0)
    zero_point: float = choice("to be added to a magnitude at the pivot [mag]", default=0.0)
    pivot: float = choice("the period at which the magnitude is changed [d]", default=10.0)
    error: float = choice("standard error of what is added", default=0.0)

    def check(self) -> Iterator[Problem]:
        """An error is not negative, a period is one."""
        if self.error < 0.0:
            yield Problem(f"{self.error:g}", "an error of 0 or more", "correct it", key="error")
        if not self.pivot > 0.0:
            yield Problem(f"{self.pivot:g}", "a period in days", "write 10.0, say", key="pivot")


@dataclass(frozen=True)
class Claim:
    """One published number.

    Attributes
    ----------
    quantity : str
        ``scatter`` is the standard deviation of the stars' residuals, or with
        `intrinsic` what is left of it beyond the measurement errors.
    value, error : float
        As printed, in `UNITS`; `error` is None where none is stated.
    decimals, error_decimals : int or None
        Digits printed behind the decimal point; read off the file where they are
        not given.
    stars : int or None
        Number of stars that the paper states.
    pivot : float or None
        Period of a zero point [d]; None is the ladder file's.
    apparent : bool
        Whether a zero point is an apparent magnitude.
    intrinsic : bool
        Whether a scatter is the intrinsic one.
    host : str or None
        Of a modulus, or of an apparent zero point.
    note : str
        How the value is known, such as "from memory".
    """

    quantity: Quantity = choice("what is claimed")
    value: float = choice("the published value")
    error: float | None = choice("its published error", default=None)
    name: str = choice("a short name", default="")
    stars: int | None = choice("the number of stars that the paper states", default=None)
    pivot: float | None = choice("the period of the zero point [d]", default=None)
    apparent: bool = choice("whether a zero point is an apparent magnitude", default=False)
    intrinsic: bool = choice(
        "whether a scatter is what is left beyond the measurement errors", default=False
    )
    host: str | None = choice("the host of a modulus or an apparent zero point", default=None)
    paper: str = choice("the paper", default="")
    note: str = choice("how the value is known", default="")
    magnitude: ClaimedMagnitude = choice("its magnitude", default_factory=ClaimedMagnitude)
    transformation: Transformation | None = choice(
        "from the paper's photometric system to the table's", default=None
    )
    method: Method = choice("what the paper says of its method", default_factory=Method)
    decimals: int | None = choice("digits printed of the value", default=None)
    error_decimals: int | None = choice("digits printed of the error", default=None)

    def check(self) -> Iterator[Problem]:
        """Numbers in range; keys that belong to the quantity."""
        if self.error is not None and not self.error > 0.0:
            yield Problem(
                f"{self.error:g}", "an error above 0", "correct it, or leave it out", key="error"
            )
        if self.stars is not None and self.stars < 1:
            yield Problem(f"{self.stars}", "1 or more", "correct it", key="stars")
        if self.pivot is not None and not 0.0 < self.pivot < float("inf"):
            yield Problem(f"{self.pivot:g}", "a period in days", "write 10.0, say", key="pivot")
        if self.quantity == "modulus" and self.host is None:
            yield Problem("nothing", "the host of the modulus", 'add host = "..."', key="host")
        if self.apparent and self.quantity != "zero_point":
            yield Problem(
                found=f"apparent = true for a {WORDS[self.quantity]}",
                expected="it for a zero point alone",
                remedy="remove apparent",
                key="apparent",
            )
        if self.intrinsic and self.quantity != "scatter":
            yield Problem(
                found=f"intrinsic = true for a {WORDS[self.quantity]}",
                expected="it for a scatter alone",
                remedy="remove intrinsic",
                key="intrinsic",
            )
        if self.quantity == "zero_point" and not self.apparent and self.value > 3.0:
            yield Problem(
                found=f"an absolute magnitude of {self.value:g}",
                expected="one below 3 mag, or an apparent magnitude marked as such",
                remedy="add apparent = true",
                key="value",
            )
        if self.quantity in ("scatter", "hubble_constant") and not self.value > 0.0:
            yield Problem(f"{self.value:g}", "a number above 0", "correct it", key="value")
        if self.transformation is not None and self.quantity not in ("slope", "zero_point"):
            yield Problem(
                found=f"a transformation of a {WORDS[self.quantity]}",
                expected="it for slopes and zero points alone",
                remedy="remove transformation",
                key="transformation",
            )

    @property
    def unit(self) -> str:
        """Unit of the value."""
        return UNITS[self.quantity]

    @property
    def words(self) -> str:
        """What is claimed."""
        if self.quantity == "zero_point" and self.apparent:
            what = "apparent magnitude"
        else:
            what = ("intrinsic " if self.intrinsic else "") + WORDS[self.quantity]
        place = f" at {self.pivot:g} d" if self.quantity == "zero_point" and self.pivot else ""
        return what + place + (f" of {self.host}" if self.host else "")

    @property
    def printed(self) -> str:
        """Value and error with the digits of the paper, and the unit."""
        text = fixed_point(self.value, self.decimals)
        if self.error is not None:
            text += f" ± {fixed_point(self.error, self.error_decimals)}"
        return f"{text} {self.unit}"

    @property
    def half_unit(self) -> float:
        """Half a unit of the last digit printed: how far rounding may move the value."""
        return 0.5 * 10.0 ** -(self.decimals if self.decimals is not None else 15)

    @property
    def error_half_unit(self) -> float:
        """Half a unit of the error's last digit."""
        return 0.5 * 10.0 ** -(self.error_decimals if self.error_decimals is not None else 15)


def fixed_point(value: float, decimals: int | None) -> str:
    """A number with its printed digits and a real minus sign."""
    text = f"{value:.{max(decimals, 0)}f}" if decimals is not None else f"{value:.6g}"
    return text.replace("-", "\N{MINUS SIGN}")


@dataclass(frozen=True)
class Claims:
    """All claims of one file.

    Attributes
    ----------
    title : str
    claims : tuple of Claim
    system : str or None
        Photometric system of the table, where the claims file names it.
    """

    title: str = ""
    claims: tuple[Claim, ...] = field(default=())
    system: str | None = None
