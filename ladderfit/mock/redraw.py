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
from ladderfit.mock.contamination import contamination_beyond, contamination_needs
from ladderfit.mock.parallax_redraw import (
    cluster_parallaxes,
    parallax_beyond,
    parallax_needs,
    parallaxes_again,
)
from ladderfit.mock.peak_redraw import correlated_errors, peak_beyond, peak_needs, peaks_again
from ladderfit.mock.peaks import peak_in_flow
from ladderfit.mock.photometry_redraw import cepheids_again, photometry_needs
from ladderfit.mock.restated import beyond, restated
from ladderfit.mock.star_law import absolute, law_needs, stars_again
from ladderfit.mock.tables import digits_column, text_column
from ladderfit.names import with_group
from ladderfit.samples import FloatArray, FlowSample, PeakSample, StarSample, VelocitySample

__all__ = ["Redrawn", "absolute", "mock_from_ladder", "needed", "redraw"]

Rng = np.random.Generator


@dataclass(frozen=True)
class Redrawn:
    """A simulated ladder on its way: choices as a nested mapping, tables by section.

    Covariances are among the tables, as arrays under their dotted keys.
    """

    choices: Mapping[str, Any]
    tables: Mapping[str, Any]


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
    strange = (beyond, parallax_beyond, peak_beyond, contamination_beyond)
    raise_if([problem for each in strange for problem in each(ladder)])
    lacking = [name for name in needed(ladder) if name not in truth]
    if lacking:
        raise InputError(
            Problem("no true value", f"one for {name}", "add it to the truth") for name in lacking
        )
    of_hosts, of_stars, of_peaks, of_flow, of_anchors = rng.spawn(5)
    tables: dict[str, Any] = {}
    if ladder.cepheids is not None:
        tables["cepheids"] = _cepheids(ladder, ladder.cepheids, truth, of_hosts)
    clusters: dict[str, float] = {}
    if ladder.parallax_stars is not None:
        stars, clusters = _parallax_stars(
            ladder, ladder.parallax_stars, truth, of_stars, parallax_moduli
        )
        tables["anchors.parallaxes"] = stars
    shared, matrices = correlated_errors(ladder, of_peaks)
    tables |= matrices
    if ladder.peaks is not None:
        tables["supernovae"] = _peaks(ladder, ladder.peaks, truth, shared, of_peaks)
    if ladder.flow is not None:
        tables["expansion"] = _flow(ladder, ladder.flow, truth, shared, of_flow)
    if ladder.velocities is not None:
        tables["expansion"] = _velocities(ladder.velocities, truth, of_flow)
    if ladder.anchor_covariance is not None:
        tables["anchors.covariance"] = ladder.anchor_covariance
    return Redrawn(restated(ladder, truth, clusters, of_anchors), tables)


def needed(ladder: Ladder) -> tuple[str, ...]:
    """Names of the parameters that need a true value."""
    expansion = ladder.choices.expansion
    linear = expansion is not None and expansion.linear
    names = [*law_needs(ladder), *parallax_needs(ladder)]
    if ladder.peaks is not None or (expansion is not None and not linear):
        names.append("peak_magnitude")
    if ladder.peaks is not None or ladder.flow is not None:
        names += dict.fromkeys(ladder.choices.peak_scatters)
    elif expansion is not None and not linear:
        names.append("peak_scatter")
    names += (*peak_needs(ladder), *photometry_needs(ladder), *contamination_needs(ladder))
    names += ["hubble_constant"] if expansion is not None else []
    if expansion is not None and linear:
        names += ["velocity_scatter"]
        names += ["velocity_constant"] if expansion.velocity_constant else []
    return (*names, *(with_group("modulus", host) for host in ladder.hosts))


def _host_moduli(ladder: Ladder, truth: Mapping[str, float]) -> FloatArray:
    return np.array([truth[with_group("modulus", host)] for host in ladder.hosts])


def _star_columns(
    ladder: Ladder, stars: StarSample, metallicity: FloatArray, photometry: list[MaskedColumn]
) -> list[MaskedColumn]:
    period = 10.0**stars.log_period
    columns = [
        text_column("ID", stars.star, "star"),
        digits_column("P", period, 10, "d", "period of pulsation"),
        *photometry,
    ]
    if stars.log_period_error is not None:
        error = stars.log_period_error * period * np.log(10.0)
        columns.append(digits_column("e_P", error, 10, "d", "error of P"))
    if ladder.choices.relation.metallicity != "none":
        columns.append(digits_column("OH", metallicity, 8, "dex", "metallicity"))
        if stars.metallicity_error is not None:
            error = stars.metallicity_error
            columns.append(digits_column("e_OH", error, 8, "dex", "error of OH"))
    if stars.overtone is not None:
        mode = np.where(stars.overtone, "1O", "F")
        columns.append(text_column("Mode", mode, "F fundamental, 1O overtone"))
    if stars.system is not None:
        columns.append(text_column("System", stars.system, "photometric system"))
    return columns


def _cepheids(ladder: Ladder, stars: StarSample, truth: Mapping[str, float], rng: Rng) -> Table:
    again = stars_again(ladder, stars, truth, rng)
    mean = _host_moduli(ladder, truth)[stars.host] + again.mean
    light = cepheids_again(ladder, stars, mean, truth, rng)
    columns = _star_columns(ladder, stars, again.metallicity, light)
    galaxy = [ladder.hosts[number] for number in stars.host]
    return Table([columns[0], text_column("Galaxy", galaxy, "host galaxy"), *columns[1:]])


def _parallax_stars(
    ladder: Ladder,
    stars: StarSample,
    truth: Mapping[str, float],
    rng: Rng,
    moduli: tuple[float, float] | None,
) -> tuple[Table, dict[str, float]]:
    section = ladder.choices.anchors.parallaxes
    if section is None or stars.parallax_error is None:  # a ladder with such stars has both
        raise AssertionError
    found = parallaxes_again(ladder, stars, section, truth, rng, moduli)
    columns = _star_columns(ladder, stars, found.metallicity, found.columns)
    columns += [
        digits_column("plx", found.parallax, 8, "mas", "parallax, simulated"),
        digits_column("e_plx", stars.parallax_error, 8, "mas", "error of plx"),
    ]
    sky = stars.extras
    if sky.longitude is not None and sky.latitude is not None:
        columns.append(digits_column("l", sky.longitude, 10, "deg", "Galactic longitude"))
        columns.append(digits_column("b", sky.latitude, 10, "deg", "Galactic latitude"))
    if sky.cluster is not None:
        names = [sky.clusters[place] if place >= 0 else "" for place in sky.cluster]
        columns.append(text_column("Cluster", names, "cluster"))
    return Table(columns), cluster_parallaxes(ladder, found.clusters, truth, rng)


def _peaks(
    ladder: Ladder,
    peaks: PeakSample,
    truth: Mapping[str, float],
    shared: Mapping[str, FloatArray],
    rng: Rng,
) -> Table:
    mean = _host_moduli(ladder, truth)[peaks.host] + truth["peak_magnitude"]
    galaxy = [ladder.hosts[number] for number in peaks.host]
    return Table(
        [
            text_column("SN", peaks.name, "supernova"),
            text_column("Galaxy", galaxy, "host galaxy"),
            *peaks_again(ladder.choices, peaks, "hosts", mean, truth, rng, shared.get("hosts")),
        ]
    )


def _flow(
    ladder: Ladder,
    flow: FlowSample,
    truth: Mapping[str, float],
    shared: Mapping[str, FloatArray],
    rng: Rng,
) -> Table:
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
            *peaks_again(
                ladder.choices, flow, "expansion", mean, truth, rng, shared.get("expansion")
            ),
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
