"""A whole survey from a plan."""

from __future__ import annotations

import numpy as np
from astropy.table import Table, vstack

from ladderfit.mock.peaks import flow_supernovae, host_supernovae
from ladderfit.mock.plan import Mock, Plan
from ladderfit.mock.stars import host_stars, milky_way_stars, star_table
from ladderfit.mock.tables import lose, number_column, text_column


def simulate(plan: Plan, rng: np.random.Generator) -> Mock:
    """Observe the galaxies, stars and supernovae of a plan.

    Parameters
    ----------
    plan : Plan
        True values and the design of the survey.
    rng : Generator
        Source of randomness; each table draws from a child of its own.

    Returns
    -------
    Mock
        Tables, measured anchor moduli and the truth.
    """
    of_hosts, of_stars, of_peaks, of_flow, of_anchors = rng.spawn(5)
    return Mock(
        cepheids=_cepheids(plan, of_hosts),
        parallax_stars=_parallax_stars(plan, of_stars),
        supernovae=host_supernovae(plan, of_peaks),
        flow=flow_supernovae(plan, of_flow),
        anchors={
            host.name: (
                round(host.modulus + host.geometric_error * float(of_anchors.normal()), 3),
                host.geometric_error,
            )
            for host in plan.hosts
            if host.geometric_error is not None
        },
        truth=plan.truth(),
    )


def _cepheids(plan: Plan, rng: np.random.Generator) -> Table:
    parts = []
    for host in plan.hosts:
        names = [f"{host.name[:3]}-{number:03d}" for number in range(1, host.cepheids + 1)]
        part = star_table(names, host_stars(plan, rng, host), rng)
        part.add_column(text_column("Galaxy", [host.name] * host.cepheids, "host galaxy"), index=1)
        parts.append(part)
    table = vstack(parts, join_type="exact")
    lose(table, rng, ("Hmag", "OH", "Vmag"), plan.missing_cepheids)
    return table


def _parallax_stars(plan: Plan, rng: np.random.Generator) -> Table:
    stars, modulus = milky_way_stars(plan, rng)
    names = [f"EM-{number:02d}" for number in range(1, plan.parallax_stars + 1)]
    table = star_table(names, stars, rng)
    error = np.round(rng.uniform(*plan.parallax_errors, len(names)), 4)
    true = 10.0 ** (2.0 - 0.2 * modulus) + plan.parallax_offset
    measured = true + error * rng.normal(size=len(names))
    table.add_columns(
        [
            number_column("plx", measured, 4, "mas", "parallax, published recipe applied"),
            number_column("e_plx", error, 4, "mas", "error of plx"),
        ]
    )
    lose(table, rng, ("plx", "Hmag"), plan.missing_parallax_stars)
    return table
