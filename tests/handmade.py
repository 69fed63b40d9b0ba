"""Results made by hand, so that figures and residuals are tested without drawing anything."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import builders
import numpy as np

from ladderfit.ladder import Ladder, build_ladder
from ladderfit.names import with_group
from ladderfit.result import Diagnostics, Result, ordered

# Mean and standard deviation of each parameter's draws.
NUMBERS = {
    "slope": (-3.3, 0.05),
    "zero_point": (-5.9, 0.02),
    "metallicity": (-0.2, 0.08),
    "scatter": (0.07, 0.01),
    "parallax_offset": (-0.01, 0.006),
    "peak_magnitude": (-19.3, 0.04),
    "peak_scatter": (0.1, 0.02),
    "hubble_constant": (70.0, 1.8),
}
MODULI = {"Tavin": (18.49, 0.02), "Orrel": (29.4, 0.03), "Q07": (31.0, 0.05)}
RUNGS = {  # which sections are missing
    "whole": (),
    "no expansion": ("expansion",),
    "relation and distances": ("supernovae", "expansion"),
    "relation and parallaxes": ("cepheids", "supernovae", "expansion"),
    "supernovae and anchors": ("cepheids",),
    "supernovae in anchors": ("cepheids", "expansion"),
}


def ladder(rung: str = "whole") -> Ladder:
    """The ladder of `builders` without the sections that a rung lacks."""
    choices, tables = builders.choices(), builders.tables()
    magnitude = choices["cepheids"]["magnitude"]
    for section in RUNGS[rung]:
        del choices[section], tables[section]
    if "cepheids" not in choices and "supernovae" in choices:
        del tables["anchors.parallaxes"]
        known = {host: {"modulus": MODULI[host][0], "error": 0.05} for host in ("Orrel", "Q07")}
        choices["anchors"] = {"geometric": known}
    elif "cepheids" not in choices:
        choices["anchors"]["geometric"] = {}
        choices["anchors"]["parallaxes"]["magnitude"] = magnitude
    return build_ladder(choices, tables)


def velocity_ladder(*, constant: bool = False) -> Ladder:
    """Seven galaxies with distances and velocities."""
    distance = np.array([0.5, 0.9, 1.1, 1.4, 1.7, 2.0, 2.0])
    velocity = np.array([290.0, 650.0, 500.0, 500.0, 960.0, 850.0, 1090.0])
    expansion = {
        "columns": {"name": "G", "distance": "d", "velocity": "v"},
        "velocity_constant": constant,
    }
    table = {"G": [f"G{i}" for i in range(7)], "d": distance, "v": velocity}
    return build_ladder({"expansion": expansion}, {"expansion": table})


def names_of(found: Ladder) -> dict[str, tuple[float, float]]:
    """The parameters that a ladder has, with mean and standard deviation."""
    if found.velocities is not None:
        numbers = {"hubble_constant": (470.0, 60.0), "velocity_scatter": (180.0, 40.0)}
        expansion = found.choices.expansion
        if expansion is not None and expansion.velocity_constant:
            numbers["velocity_constant"] = (20.0, 90.0)
        return numbers
    wanted: list[str] = []
    if found.cepheids is not None or found.parallax_stars is not None:
        wanted += ["slope", "zero_point", "metallicity", "scatter"]
    if found.parallax_stars is not None:
        wanted += ["parallax_offset"]
    if found.peaks is not None or found.flow is not None:
        wanted += ["peak_magnitude", "peak_scatter"]
    if found.flow is not None:
        wanted += ["hubble_constant"]
    numbers = {name: NUMBERS[name] for name in wanted}
    return numbers | {with_group("modulus", host): MODULI[host] for host in found.hosts}


def result(
    found: Ladder,
    *,
    size: int = 500,
    diagnostics: Mapping[str, Any] | None = None,
    **fixed: float,
) -> Result:
    """Independent normal draws whose mean is exact; `fixed` gives parameters without spread."""
    rng = np.random.default_rng(3)
    draws = {}
    for name, (mean, sd) in names_of(found).items():
        noise = rng.normal(0.0, 1.0, size)
        values = np.full(size, fixed[name]) if name in fixed else mean + sd * (noise - noise.mean())
        draws[name] = values
    known = {"ess": dict.fromkeys(draws, float(size)), **(diagnostics or {})}
    return Result(found.choices, ordered(draws), Diagnostics("direct", 1, **known), found)
