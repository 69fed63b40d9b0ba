"""The choices of a ladder, restated for tables that are simulated after it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import MISSING, fields
from typing import Any

import numpy as np

from ladderfit import schema
from ladderfit.assembly import IN_MEMORY
from ladderfit.choices import Cepheids, Parallaxes
from ladderfit.errors import Problem
from ladderfit.ladder import Ladder
from ladderfit.ladder_file import as_written
from ladderfit.mock.peak_redraw import role_columns
from ladderfit.mock.photometry_redraw import (
    SEEN,
    photometry_beyond,
    restated_cepheids,
    restated_magnitude,
)
from ladderfit.names import with_group
from ladderfit.samples import StarSample

_IN_MEMORY = {"file": IN_MEMORY}
_MAGNITUDE = {"bands": {"W": "W"}, "errors": {"W": "e_W"}, "band": "W"}
_COLUMNS = {
    "cepheids": {"star": "ID", "host": "Galaxy", "period": "P"},
    "anchors.parallaxes": {
        "star": "ID",
        "period": "P",
        "parallax": "plx",
        "parallax_error": "e_plx",
    },
    "supernovae": {"name": "SN", "host": "Galaxy", "peak": "mB", "peak_error": "e_mB"},
    "expansion": {
        "name": "SN",
        "redshift": "zcmb",
        "redshift_heliocentric": "zhel",
        "peak": "mB",
        "peak_error": "e_mB",
    },
}
_ROWS = (  # decided already which rows take part, and what they hold
    "table",
    "set_aside",
    "conversion",
    "extinction_max",
    "min_signal",
    "corrected",
    "shortest",
)
_KNOWN: dict[str, tuple[str, ...]] = {
    "": (
        "title",
        "cepheids",
        "relation",
        "groups",
        "anchors",
        "hosts",
        "supernovae",
        "peak_relation",
        "expansion",
        "priors",
        "sampling",
        "alternatives",
    ),
    "cepheids": (
        *_ROWS,
        "overtones",
        "columns",
        "magnitude",
        "periods",
        "completeness",
        "shared",
        "outliers",
    ),
    "relation": (
        "pivot",
        "metallicity",
        "reddening",
        "break_",
        "curvature",
        "slope_metallicity",
        "scatter",
        "zero_points",
        "slopes",
    ),
    "anchors": ("geometric", "parallaxes", "shared_errors", "covariance"),
    "anchors.parallaxes": (
        *_ROWS,
        "overtones",
        "offsets",
        "modulus_bounds",
        "selection",
        "clusters",
        "columns",
        "magnitude",
        "distance_prior",
        "periods",
        "use",
        "outliers",
    ),
    "hosts": ("distance_prior",),
    "supernovae": (*_ROWS, "columns", "covariance", "scatter"),
    "expansion": (
        *_ROWS,
        "covariance",
        "columns",
        "intercept",
        "redshifts",
        "q0",
        "j0",
        "peculiar_velocity",
        "velocity_constant",
    ),
}
Rng = np.random.Generator


def beyond(ladder: Ladder) -> Iterator[Problem]:
    """What a ladder asks for and the simulator does not know: never passed over."""
    choices = ladder.choices
    sections: dict[str, Any] = {
        "": choices,
        "cepheids": choices.cepheids,
        "relation": choices.relation,
        "anchors": choices.anchors,
        "anchors.parallaxes": ladder.parallax_stars and choices.anchors.parallaxes,
        "hosts": choices.hosts,
        "supernovae": choices.supernovae,
        "expansion": choices.expansion,
    }
    for key, section in sections.items():
        if section is not None:
            yield from _strange_keys(key, section)
    yield from photometry_beyond(ladder)
    if ladder.flow is not None and ladder.flow.peculiar_velocity_error is not None:
        yield _problem("errors of single peculiar velocities", "expansion.columns")


def _problem(found: str, key: str) -> Problem:
    return Problem(
        found, "terms that the simulator knows", "take it out to simulate the rest", key=key
    )


def _strange_keys(key: str, section: Any) -> Iterator[Problem]:
    for item in fields(section):
        value = getattr(section, item.name)
        default = item.default if item.default_factory is MISSING else item.default_factory()
        if item.name not in _KNOWN[key] and value != default:
            yield _problem(as_written(schema.written(value)), schema.join(key, schema.key_of(item)))


def restated(
    ladder: Ladder, truth: Mapping[str, float], clusters: Mapping[str, float], rng: Rng
) -> dict[str, Any]:
    """The ladder's choices, made to fit the new tables; anchors measured again."""
    plain = ladder.choices.to_mapping()
    plain.pop("alternatives", None)
    plain |= _groups(ladder)
    for section in ("cepheids", "supernovae", "expansion"):
        if section in plain:
            plain[section] = _fitted(plain[section], _COLUMNS[section])
    for section, sample in (("supernovae", ladder.peaks), ("expansion", ladder.flow)):
        if sample is not None:
            plain[section]["columns"] |= role_columns(sample.inputs)
    if ladder.velocities is not None:
        plain["expansion"]["columns"] = {role: role for role in ("name", "distance", "velocity")}
    if "cepheids" in plain:
        plain["cepheids"] |= restated_cepheids(plain["cepheids"])
        plain["cepheids"]["magnitude"] = _magnitude(ladder, ladder.choices.cepheids)
        plain["cepheids"]["columns"] |= _input_roles(ladder, ladder.cepheids)
    plain["anchors"] = _anchors(ladder, truth, clusters, rng)
    given = ladder.choices.peak_covariance
    if given is not None:
        plain = schema.with_value(plain, given[0], _IN_MEMORY)
    published = plain.get("expansion", {}).get("intercept")
    if published is not None:
        true = float(np.log10(truth["hubble_constant"])) - 0.2 * truth["peak_magnitude"] - 5.0
        value = true + published["error"] * float(rng.normal())
        plain["expansion"]["intercept"] = {**published, "value": value}
        plain["expansion"]["columns"] = {}
    return plain


def _magnitude(ladder: Ladder, section: Cepheids | Parallaxes | None) -> dict[str, Any]:
    """One column W, or bands and their errors where the ratio is free."""
    magnitude = None if section is None else section.magnitude
    bands = None if magnitude is None else restated_magnitude(ladder, magnitude)
    return _MAGNITUDE if bands is None else bands


def _fitted(section: Mapping[str, Any], columns: Mapping[str, str]) -> dict[str, Any]:
    """A section without its table and what was done to its rows, its columns named anew."""
    kept = {key: value for key, value in section.items() if key not in _ROWS}
    if kept.get("overtones") == "convert":  # done already
        del kept["overtones"]
    return kept | {"columns": dict(columns)}


def _groups(ladder: Ladder) -> dict[str, Any]:
    """Groups, without hosts that take no part: the new tables do not have them."""
    groups: dict[str, Any] = ladder.choices.to_mapping().get("groups", {})
    left = {}
    for name, group in groups.items():
        hosts = [host for host in group.get("hosts", ()) if host in ladder.hosts]
        left[name] = {**group, "hosts": hosts or group.get("hosts", [])}
    return {"groups": left} if left else {}


def _input_roles(ladder: Ladder, stars: StarSample | None) -> dict[str, str]:
    """Columns of what stars have beyond name, period and magnitude."""
    if stars is None:
        return {}
    metallic = ladder.choices.relation.metallicity != "none"
    present = {
        "period_error": ("e_P", stars.log_period_error is not None),
        "metallicity": ("OH", metallic),
        "metallicity_error": ("e_OH", metallic and stars.metallicity_error is not None),
        "mode": ("Mode", stars.overtone is not None),
        "system": ("System", stars.system is not None),
        "l": ("l", stars.extras.longitude is not None),
        "b": ("b", stars.extras.latitude is not None),
        "cluster": ("Cluster", stars.extras.cluster is not None),
    }
    return {role: column for role, (column, here) in present.items() if here}


def _anchors(
    ladder: Ladder, truth: Mapping[str, float], clusters: Mapping[str, float], rng: Rng
) -> dict[str, Any]:
    plain: dict[str, Any] = ladder.choices.to_mapping().get("anchors", {})
    anchors = _geometric(ladder, plain, truth, rng)
    if ladder.parallax_stars is not None:
        stars = _fitted(plain["parallaxes"], _COLUMNS["anchors.parallaxes"])
        own = ladder.choices.anchors.parallaxes
        has_own = own is not None and own.magnitude is not None
        stars["magnitude"] = _magnitude(ladder, own if has_own else ladder.choices.cepheids)
        stars["columns"] |= _input_roles(ladder, ladder.parallax_stars)
        if stars.get("selection") and "band" in stars["selection"]:
            stars["selection"] = {**stars["selection"], "band": SEEN}
        if stars.get("clusters"):
            stars["clusters"] = {
                name: {**stars["clusters"][name], "parallax": value}
                for name, value in clusters.items()
            }
        anchors["parallaxes"] = stars
    return anchors


def _geometric(
    ladder: Ladder, plain: Mapping[str, Any], truth: Mapping[str, float], rng: Rng
) -> dict[str, Any]:
    """Geometric anchors measured again, with what their errors have in common."""
    used = [anchor.name for anchor in ladder.geometric]
    if not used:
        return {}
    white = rng.normal(size=len(used))
    if ladder.anchor_covariance is None:
        noise = white * np.array([anchor.error for anchor in ladder.geometric])
    else:
        noise = np.linalg.cholesky(ladder.anchor_covariance) @ white
    shared = {}
    for name, term in ladder.choices.anchors.shared_errors.items():
        loads = {host: load for host, load in term.loads.items() if host in used}
        if loads:
            shared[name] = {"error": term.error, "loads": loads}
            amplitude = ladder.choices.prior(with_group("shared_error", name)).draw(rng, 1)[0]
            noise = noise + term.error * amplitude * np.array([loads.get(h, 0.0) for h in used])
    geometric = {}
    for host, error in zip(used, noise, strict=True):
        value = round(truth[with_group("modulus", host)] + float(error), 6)
        geometric[host] = {**plain["geometric"][host], "modulus": value}
    anchors: dict[str, Any] = {"geometric": geometric}
    if shared:
        anchors["shared_errors"] = shared
    if ladder.anchor_covariance is not None:
        anchors["covariance"] = _IN_MEMORY
    return anchors
