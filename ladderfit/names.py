"""Each parameter's name, unit, symbol, digits and default prior.

Groups and hosts are written ``NAME[GROUP]``, for example ``modulus[Tavin]``.
"""

from __future__ import annotations

from dataclasses import dataclass

from ladderfit.priors import Fixed, HalfNormal, LogNormal, Normal, Prior, Uniform


@dataclass(frozen=True)
class Parameter:
    """What is known about a parameter before any data.

    Attributes
    ----------
    name : str
        As in summary.json and in the ladder file's ``[priors]``.
    unit : str
        Unit of its draws, FITS style.
    symbol : str
        For figures, in matplotlib's mathtext.
    words : str
        For sentences.
    digits : int
        Decimals worth printing.
    prior : Prior or None
        Used where the ladder file states none; None for derived numbers.
    """

    name: str
    unit: str
    symbol: str
    words: str
    digits: int
    prior: Prior | None


_ALL = (
    Parameter("slope", "mag/dex", r"$b$", "slope of the relation", 3, Normal(-3.3, 0.5)),
    Parameter("zero_point", "mag", r"$M_0$", "zero point at the pivot", 3, Normal(-5.9, 2.0)),
    Parameter("metallicity", "mag/dex", r"$Z$", "metallicity term", 3, Normal(-0.2, 0.5)),
    Parameter("slope_beyond", "mag/dex", r"$b_2$", "slope beyond the break", 3, Normal(-3.3, 0.5)),
    Parameter("curvature", "mag/dex2", r"$c$", "quadratic term", 3, Normal(0.0, 0.5)),
    Parameter(
        "slope_metallicity",
        "mag/dex2",
        r"$Z_b$",
        "change of the slope with metallicity",
        3,
        Normal(0.0, 0.5),
    ),
    Parameter(
        "overtone_offset", "mag", r"$M_1$", "offset of overtone pulsators", 3, Normal(-0.5, 0.5)
    ),
    Parameter(
        "zero_point_offset", "mag", r"$\Delta M_0$", "zero-point offset", 3, Normal(0.0, 0.3)
    ),
    Parameter("slope_offset", "mag/dex", r"$\Delta b$", "slope offset", 3, Normal(0.0, 0.5)),
    Parameter("scatter", "mag", r"$t$", "intrinsic scatter of the relation", 3, HalfNormal(0.3)),
    Parameter(
        "outlier_fraction",
        "",
        r"$f_o$",
        "fraction of outliers among the Cepheids of hosts",
        3,
        Uniform(0.0, 0.5),
    ),
    Parameter(
        "outlier_width",
        "mag",
        r"$w_o$",
        "width of the outliers' deviations beyond that of other stars",
        2,
        LogNormal(1.0, 1.5),
    ),
    Parameter("outlier_offset", "mag", r"$\delta_o$", "mean deviation of outliers", 2, Fixed(0.0)),
    Parameter(
        "degrees_of_freedom",
        "",
        r"$\nu$",
        "degrees of freedom of the deviations",
        1,
        LogNormal(10.0, 2.5),
    ),
    Parameter(
        "parallax_outlier_fraction",
        "",
        r"$f_\varpi$",
        "fraction of outliers among the parallax stars",
        3,
        Uniform(0.0, 0.5),
    ),
    Parameter(
        "parallax_outlier_width",
        "mag",
        r"$w_\varpi$",
        "width of the parallax stars' outliers beyond that of other stars",
        2,
        LogNormal(1.0, 1.5),
    ),
    Parameter(
        "parallax_outlier_offset",
        "mag",
        r"$\delta_\varpi$",
        "mean deviation of the parallax stars' outliers",
        2,
        Fixed(0.0),
    ),
    Parameter(
        "metallicity_spread",
        "dex",
        r"$\tau$",
        "spread of metallicity within a host",
        3,
        HalfNormal(0.3),
    ),
    Parameter(
        "parallax_metallicity",
        "dex",
        r"$o_\varpi$",
        "mean metallicity of the parallax stars, less the reference",
        3,
        Normal(0.0, 1.0),
    ),
    Parameter(
        "reddening_ratio",
        "",
        r"$R$",
        "ratio of total to selective absorption",
        3,
        Normal(0.4, 0.2),
    ),
    Parameter(
        "intrinsic_colour_slope",
        "mag/dex",
        r"$c_1$",
        "slope of the colour with log period",
        3,
        Normal(0.25, 0.5),
    ),
    Parameter(
        "intrinsic_colour_scatter",
        "mag",
        r"$\tau_c$",
        "scatter of intrinsic colours at a period",
        3,
        LogNormal(0.08, 0.5),
    ),
    Parameter(
        "intrinsic_colour_term",
        "",
        r"$\eta$",
        "weight of intrinsic colour beyond the ratio",
        2,
        Normal(0.0, 0.3),
    ),
    Parameter(
        "reddening_spread",
        "mag",
        r"$\sigma_E$",
        "spread of reddening within a host",
        3,
        HalfNormal(0.3),
    ),
    Parameter(
        "parallax_colour",
        "mag",
        r"$\bar{c}_\varpi$",
        "mean colour of the parallax stars at the pivot",
        3,
        Normal(1.0, 1.0),
    ),
    Parameter(
        "parallax_reddening_spread",
        "mag",
        r"$\sigma_{E,\varpi}$",
        "spread of the parallax stars' reddening",
        3,
        HalfNormal(0.5),
    ),
    Parameter(
        "shared_photometry",
        "",
        r"$\sigma_s$",
        "spread of a photometric error that a host's stars share",
        3,
        HalfNormal(0.1),
    ),
    Parameter("shared_error", "", r"$s$", "shared error of anchors", 2, Normal(0.0, 1.0)),
    Parameter(
        "parallax_offset", "mas", r"$\varpi_0$", "residual parallax offset", 4, Normal(0.0, 0.02)
    ),
    Parameter(
        "parallax_offset_slope",
        "mas/mag",
        r"$\varpi_G$",
        "change of the residual parallax offset with G",
        4,
        Normal(0.0, 0.01),
    ),
    Parameter(
        "parallax_error_scale", "", r"$\kappa$", "scale of the parallax errors", 3, Fixed(1.0)
    ),
    Parameter(
        "distance_length", "kpc", r"$L$", "scale length of the distance prior", 3, Fixed(1.0)
    ),
    Parameter(
        "parallax_field",
        "",
        r"$f$",
        "mode of the parallax errors shared on the sky",
        2,
        Normal(0.0, 1.0),
    ),
    Parameter("peak_magnitude", "mag", r"$M$", "standard peak magnitude", 3, Normal(-19.3, 2.0)),
    Parameter("peak_scatter", "mag", r"$t_\mathrm{SN}$", "supernova scatter", 3, HalfNormal(0.3)),
    Parameter("alpha", "mag", r"$\alpha$", "coefficient of the width", 3, Normal(0.0, 2.0)),
    Parameter("beta", "", r"$\beta$", "coefficient of the colour", 3, Normal(3.0, 2.0)),
    Parameter(
        "decline_slope", "", r"$b_\mathrm{d}$", "slope with the decline rate", 3, Normal(0.8, 2.0)
    ),
    Parameter(
        "decline_curvature",
        "1/mag",
        r"$c_\mathrm{d}$",
        "quadratic term in the decline rate",
        3,
        Normal(0.0, 2.0),
    ),
    Parameter("mass_step", "mag", r"$\gamma$", "step with the host's mass", 3, Normal(0.0, 0.1)),
    Parameter("survey_offset", "mag", r"$\Delta m$", "offset of a survey", 3, Normal(0.0, 0.05)),
    Parameter(
        "width_mean", "", r"$\bar{w}$", "mean width, less the reference", 3, Normal(0.0, 2.0)
    ),
    Parameter("width_spread", "", r"$\sigma_w$", "spread of the width", 3, HalfNormal(2.0)),
    Parameter(
        "decline_rate_mean",
        "mag",
        r"$\bar{d}$",
        "mean decline rate, less the reference",
        3,
        Normal(0.0, 0.5),
    ),
    Parameter(
        "decline_rate_spread",
        "mag",
        r"$\sigma_d$",
        "spread of the decline rate",
        3,
        HalfNormal(0.5),
    ),
    Parameter(
        "colour_mean", "mag", r"$\bar{c}$", "mean colour, less the reference", 3, Normal(0.0, 0.3)
    ),
    Parameter("colour_spread", "mag", r"$\sigma_c$", "spread of the colour", 3, HalfNormal(0.3)),
    Parameter(
        "shape_colour_correlation",
        "",
        r"$\rho$",
        "correlation of true shape and colour",
        2,
        Fixed(0.0),
    ),
    Parameter("hubble_constant", "km/s/Mpc", r"$H_0$", "Hubble constant", 2, LogNormal(70.0, 1.0)),
    Parameter("intercept", "", r"$a_B$", "intercept of the expansion", 4, None),
    Parameter(
        "velocity_constant", "km/s", r"$v_0$", "velocity at zero distance", 1, Normal(0.0, 1000.0)
    ),
    Parameter("velocity_scatter", "km/s", r"$s_v$", "velocity scatter", 1, HalfNormal(500.0)),
    Parameter("modulus", "mag", r"$\mu$", "distance modulus", 3, None),
)

PARAMETERS: dict[str, Parameter] = {parameter.name: parameter for parameter in _ALL}
DERIVED = ("intercept",)  # functions of parameters, without a prior of their own
HEADLINE = tuple(p.name for p in _ALL if p.prior is not None and p.name != "parallax_field")


def with_group(name: str, group: str) -> str:
    """``NAME[GROUP]``."""
    return f"{name}[{group}]"


def base_name(name: str) -> str:
    """The name without its group."""
    return name.split("[", 1)[0]


def group_of(name: str) -> str | None:
    """The group or host in ``NAME[GROUP]``, or None."""
    return name.split("[", 1)[1].removesuffix("]") if "[" in name else None


def parameter(name: str) -> Parameter:
    """Look a parameter up by its name, with or without a group.

    Raises
    ------
    KeyError
        If no parameter has this name.
    """
    return PARAMETERS[base_name(name)]


def label(name: str, *, unit: bool = True) -> str:
    """Symbol, group and unit as a figure prints them."""
    known, group = parameter(name), group_of(name)
    symbol = known.symbol
    if group is not None:
        symbol = f"{symbol} {group}"
    return f"{symbol} [{known.unit}]" if unit else symbol
