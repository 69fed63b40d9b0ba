"""The choices of a ladder, restated for tables that are simulated after it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import MISSING, fields
from typing import Any

import numpy as np

from ladderfit import schema
from ladderfit.choices import Cepheids, Parallaxes
from ladderfit.errors import Problem
from ladderfit.ladder import Ladder
from ladderfit.ladder_file import as_written
from ladderfit.mock.peak_redraw import role_columns
from ladderfit.mock.photometry_redraw import (
    photometry_beyond,
    restated_cepheids,
    restated_magnitude,
)
from ladderfit.names import with_group
from ladderfit.samples import StarSample

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
    "overtones",
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
    "cepheids": (*_ROWS, "columns", "magnitude", "periods", "completeness", "shared", "outliers"),
    "relation": ("pivot", "metallicity", "reddening"),
    "anchors": ("geometric", "parallaxes"),
    "anchors.parallaxes": (
        *_ROWS,
        "columns",
        "magnitude",
        "distance_prior",
        "periods",
        "use",
        "outliers",
    ),
    "hosts": ("distance_prior",),
    "supernovae": (*_ROWS, "columns"),
    "expansion": (
        *_ROWS,
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
    stars = {"cepheids": ladder.cepheids, "anchors.parallaxes": ladder.parallax_stars}
    for key, sample in stars.items():
        if sample is not None:
            yield from _strange_stars(key, sample)
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
    prior = getattr(section, "distance_prior", "flat in modulus")
    if prior not in ("flat in modulus", "uniform in volume"):
        yield _problem(as_written(schema.written(prior)), f"{key}.distance_prior")


def _strange_stars(key: str, sample: StarSample) -> Iterator[Problem]:
    if sample.log_period_error is not None:
        yield _problem("errors of the periods", f"{key}.columns")
    if sample.metallicity_error is not None:
        yield _problem("errors of the metallicity", f"{key}.columns")
    if sample.overtone is not None:
        yield _problem("overtones with an offset", f"{key}.overtones")


def restated(ladder: Ladder, truth: Mapping[str, float], rng: Rng) -> dict[str, Any]:
    """The ladder's choices, made to fit the new tables; anchors measured again."""
    plain = ladder.choices.to_mapping()
    plain.pop("alternatives", None)
    plain.pop("groups", None)
    for section in ("cepheids", "supernovae", "expansion"):
        if section in plain:
            plain[section] = _fitted(plain[section], _COLUMNS[section])
    for section, sample in (("supernovae", ladder.peaks), ("expansion", ladder.flow)):
        if sample is not None:
            plain[section]["columns"] |= role_columns(sample.inputs)
    if ladder.velocities is not None:
        plain["expansion"]["columns"] = {role: role for role in ("name", "distance", "velocity")}
    metallic = ladder.choices.relation.metallicity != "none"
    if "cepheids" in plain:
        plain["cepheids"] |= restated_cepheids(plain["cepheids"])
        plain["cepheids"]["magnitude"] = _magnitude(ladder, ladder.choices.cepheids)
        plain["cepheids"]["columns"] |= {"metallicity": "OH"} if metallic else {}
    plain["anchors"] = _anchors(ladder, truth, rng)
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
    return kept | {"columns": dict(columns)}


def _anchors(ladder: Ladder, truth: Mapping[str, float], rng: Rng) -> dict[str, Any]:
    plain: dict[str, Any] = ladder.choices.to_mapping().get("anchors", {})
    used = {anchor.name for anchor in ladder.geometric}
    geometric = {}
    for host, anchor in plain.get("geometric", {}).items():
        if host in used:
            true = truth[with_group("modulus", host)]
            value = round(true + anchor["error"] * float(rng.normal()), 6)
            geometric[host] = {**anchor, "modulus": value}
    anchors: dict[str, Any] = {"geometric": geometric} if geometric else {}
    if ladder.parallax_stars is not None:
        stars = _fitted(plain["parallaxes"], _COLUMNS["anchors.parallaxes"])
        own = ladder.choices.anchors.parallaxes
        has_own = own is not None and own.magnitude is not None
        stars["magnitude"] = _magnitude(ladder, own if has_own else ladder.choices.cepheids)
        if ladder.choices.relation.metallicity != "none":
            stars["columns"]["metallicity"] = "OH"
        anchors["parallaxes"] = stars
    return anchors
