"""The measured quantities of an existing ladder, drawn again from given true values.

Stars, periods, metallicities, stated errors, hosts and redshifts stay; magnitudes,
parallaxes, anchor moduli, peaks and velocities are simulated one object at a
time.  Magnitudes and indices become one column, W; where the ratio of an index is
free, its bands are simulated one by one.

Parallax stars keep their magnitudes unless a range of moduli is stated: a
distance prior without ends says what the modulus, and so the parallax, may be
given the magnitude, and nothing of the magnitude itself.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from astropy.table import MaskedColumn, Table

from ladderfit.errors import InputError, Problem, raise_if
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.mock.contamination import (
    contamination_beyond,
    contamination_needs,
    outliers_given_magnitudes,
)
from ladderfit.mock.peak_redraw import peak_beyond, peak_needs, peaks_again
from ladderfit.mock.peaks import peak_in_flow
from ladderfit.mock.photometry_redraw import (
    Light,
    band_columns,
    cepheids_again,
    free_moduli,
    photometry_needs,
    shine_again,
)
from ladderfit.mock.restated import beyond, restated
from ladderfit.mock.tables import digits_column, text_column
from ladderfit.names import with_group
from ladderfit.samples import FloatArray, FlowSample, PeakSample, StarSample, VelocitySample

Rng = np.random.Generator


@dataclass(frozen=True)
class Redrawn:
    """A simulated ladder on its way: choices as a nested mapping, tables by section."""

    choices: Mapping[str, Any]
    tables: Mapping[str, Table]


def mock_from_ladder(
    ladder: Ladder,
    truth: Mapping[str, float],
    rng: Rng,
    parallax_moduli: tuple[float, float] | None = None,
) -> Ladder:
    """A ladder like the given one, with its data drawn from known truth.

    Parameters
    ----------
    ladder : Ladder
        Gives the objects, their exact properties, their errors and all choices.
    truth : mapping of str to float
        A true value for every parameter by name, host moduli included.
    rng : Generator
        Source of randomness.
    parallax_moduli : pair of float, optional
        Range [mag] in which the parallax stars' true moduli follow the distance
        prior of the choices, whatever else is known of the star.  The fit does not
        know the ends of the range, which pulls it a little.  By default the true
        modulus is drawn from what prior and magnitude say of it, which is what
        the fit assumes.

    Returns
    -------
    Ladder
        Without alternatives and objects set aside.

    Raises
    ------
    InputError
        If a parameter has no true value, or the ladder has a term that the
        simulator does not know.
    """
    drawn = redraw(ladder, truth, rng, parallax_moduli)
    return build_ladder(drawn.choices, drawn.tables)


def redraw(
    ladder: Ladder,
    truth: Mapping[str, float],
    rng: Rng,
    parallax_moduli: tuple[float, float] | None = None,
) -> Redrawn:
    """Choices and tables of `mock_from_ladder`, before they are put together."""
    raise_if([*beyond(ladder), *peak_beyond(ladder), *contamination_beyond(ladder)])
    lacking = [name for name in needed(ladder) if name not in truth]
    if lacking:
        raise InputError(
            Problem("no true value", f"one for {name}", "add it to the truth") for name in lacking
        )
    of_hosts, of_stars, of_peaks, of_flow, of_anchors = rng.spawn(5)
    tables: dict[str, Table] = {}
    if ladder.cepheids is not None:
        tables["cepheids"] = _cepheids(ladder, ladder.cepheids, truth, of_hosts)
    if ladder.parallax_stars is not None:
        tables["anchors.parallaxes"] = _parallax_stars(
            ladder, ladder.parallax_stars, truth, of_stars, parallax_moduli
        )
    if ladder.peaks is not None:
        tables["supernovae"] = _peaks(ladder, ladder.peaks, truth, of_peaks)
    if ladder.flow is not None:
        tables["expansion"] = _flow(ladder, ladder.flow, truth, of_flow)
    if ladder.velocities is not None:
        tables["expansion"] = _velocities(ladder.velocities, truth, of_flow)
    return Redrawn(restated(ladder, truth, of_anchors), tables)


def needed(ladder: Ladder) -> tuple[str, ...]:
    """Names of the parameters that need a true value."""
    expansion = ladder.choices.expansion
    linear = expansion is not None and expansion.linear
    names: list[str] = []
    if ladder.cepheids is not None or ladder.parallax_stars is not None:
        names += ["slope", "zero_point", "scatter"]
        names += ["metallicity"] if ladder.choices.relation.metallicity != "none" else []
    names += ["parallax_offset"] if ladder.parallax_stars is not None else []
    if ladder.peaks is not None or (expansion is not None and not linear):
        names += ["peak_magnitude", "peak_scatter"]
    names += (*peak_needs(ladder), *photometry_needs(ladder), *contamination_needs(ladder))
    names += ["hubble_constant"] if expansion is not None else []
    if expansion is not None and linear:
        names += ["velocity_scatter"]
        names += ["velocity_constant"] if expansion.velocity_constant else []
    return (*names, *(with_group("modulus", host) for host in ladder.hosts))


def absolute(ladder: Ladder, stars: StarSample, truth: Mapping[str, float]) -> FloatArray:
    """Mean absolute magnitude of each star [mag], shape (n,), by the true relation."""
    relation = ladder.choices.relation
    dex = stars.log_period - np.log10(relation.pivot)
    mean = truth["zero_point"] + truth["slope"] * dex
    if relation.metallicity != "none":
        mean = mean + truth["metallicity"] * (stars.metallicity - relation.metallicity.reference)
    return np.asarray(mean)


def _host_moduli(ladder: Ladder, truth: Mapping[str, float]) -> FloatArray:
    return np.array([truth[with_group("modulus", host)] for host in ladder.hosts])


def _star_columns(
    ladder: Ladder, stars: StarSample, photometry: list[MaskedColumn]
) -> list[MaskedColumn]:
    columns = [
        text_column("ID", stars.star, "star"),
        digits_column("P", 10.0**stars.log_period, 10, "d", "period of pulsation"),
        *photometry,
    ]
    if ladder.choices.relation.metallicity != "none":
        columns.append(digits_column("OH", stars.metallicity, 8, "dex", "metallicity"))
    return columns


def _cepheids(ladder: Ladder, stars: StarSample, truth: Mapping[str, float], rng: Rng) -> Table:
    mean = _host_moduli(ladder, truth)[stars.host] + absolute(ladder, stars, truth)
    columns = _star_columns(ladder, stars, cepheids_again(ladder, stars, mean, truth, rng))
    galaxy = [ladder.hosts[number] for number in stars.host]
    return Table([columns[0], text_column("Galaxy", galaxy, "host galaxy"), *columns[1:]])


def _parallax_stars(
    ladder: Ladder,
    stars: StarSample,
    truth: Mapping[str, float],
    rng: Rng,
    moduli: tuple[float, float] | None,
) -> Table:
    section = ladder.choices.anchors.parallaxes
    if section is None or stars.parallax_error is None:  # a ladder with such stars has both
        raise AssertionError
    prior, mean = str(section.distance_prior), absolute(ladder, stars, truth)
    if moduli is not None:
        modulus = _moduli_between(prior, moduli, len(stars), rng)
        light = shine_again(ladder, stars, modulus + mean, truth, rng)
    elif ladder.choices.relation.reddening != "fixed":
        modulus, light = free_moduli(ladder, stars, mean, truth, rng)
    else:
        modulus = _moduli_given_magnitudes(ladder, stars, truth, prior, rng)
        light = Light({"W": stars.magnitude}, {"W": np.sqrt(stars.variance)})
    columns = _star_columns(ladder, stars, band_columns(light))
    true = 10.0 ** (2.0 - 0.2 * modulus) + truth["parallax_offset"]
    measured = true + stars.parallax_error * rng.normal(size=len(stars))
    columns += [
        digits_column("plx", measured, 8, "mas", "parallax, simulated"),
        digits_column("e_plx", stars.parallax_error, 8, "mas", "error of plx"),
    ]
    return Table(columns)


def _moduli_given_magnitudes(
    ladder: Ladder, stars: StarSample, truth: Mapping[str, float], prior: str, rng: Rng
) -> FloatArray:
    """Moduli as prior and magnitude have them: normal, and farther where volume counts."""
    tilt = 0.0 if prior == "flat in modulus" else 0.6 * np.log(10.0)
    offset, extra = outliers_given_magnitudes(ladder, stars, truth, tilt, rng)
    variance = stars.variance + truth["scatter"] ** 2 + extra
    mean = stars.magnitude - absolute(ladder, stars, truth) - offset + tilt * variance
    return np.asarray(mean + np.sqrt(variance) * rng.normal(size=len(stars)))


def _moduli_between(prior: str, ends: tuple[float, float], size: int, rng: Rng) -> FloatArray:
    """Moduli between two ends, by the distance prior: flat, or as the volume grows."""
    if prior == "flat in modulus":
        return rng.uniform(*ends, size)
    smallest = 10.0 ** (0.6 * (ends[0] - ends[1]))
    return np.asarray(ends[1] + np.log10(rng.uniform(smallest, 1.0, size)) / 0.6)


def _peaks(ladder: Ladder, peaks: PeakSample, truth: Mapping[str, float], rng: Rng) -> Table:
    mean = _host_moduli(ladder, truth)[peaks.host] + truth["peak_magnitude"]
    galaxy = [ladder.hosts[number] for number in peaks.host]
    return Table(
        [
            text_column("SN", peaks.name, "supernova"),
            text_column("Galaxy", galaxy, "host galaxy"),
            *peaks_again(ladder.choices, peaks, "hosts", mean, truth, rng),
        ]
    )


def _flow(ladder: Ladder, flow: FlowSample, truth: Mapping[str, float], rng: Rng) -> Table:
    expansion = ladder.choices.expansion
    if expansion is None:  # a ladder with a flow has one
        raise AssertionError
    law = (truth["peak_magnitude"], truth["hubble_constant"], expansion.q0, expansion.j0)
    velocity = expansion.peculiar_velocity * rng.normal(size=len(flow))
    mean = peak_in_flow(law, flow.redshift, flow.redshift_heliocentric, velocity)
    return Table(
        [
            text_column("SN", flow.name, "supernova"),
            digits_column("zcmb", flow.redshift, 10, None, "redshift, background at rest"),
            digits_column("zhel", flow.redshift_heliocentric, 10, None, "redshift, Sun at rest"),
            *peaks_again(ladder.choices, flow, "expansion", mean, truth, rng),
        ]
    )


def _velocities(sample: VelocitySample, truth: Mapping[str, float], rng: Rng) -> Table:
    mean = truth["hubble_constant"] * sample.distance + truth.get("velocity_constant", 0.0)
    measured = mean + truth["velocity_scatter"] * rng.normal(size=len(sample))
    return Table(
        [
            text_column("name", sample.name, "object"),
            digits_column("distance", sample.distance, 10, "Mpc", "distance"),
            digits_column("velocity", measured, 8, "km / s", "velocity, simulated"),
        ]
    )
