"""The choices of a ladder, restated for tables that are simulated after it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import fields
from typing import Any

import numpy as np

from ladderfit import schema
from ladderfit.choices import Relation
from ladderfit.errors import Problem
from ladderfit.ladder import Ladder
from ladderfit.names import with_group

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
Rng = np.random.Generator


def beyond(ladder: Ladder) -> Iterator[Problem]:
    """What a ladder asks for and the simulator does not know: never passed over."""
    remedy = "take it out to simulate the rest"
    expected = "terms that the simulator knows"
    relation = ladder.choices.relation
    plain = Relation(pivot=relation.pivot, metallicity=relation.metallicity)
    for item in fields(Relation):
        value = getattr(relation, item.name)
        if value != getattr(plain, item.name):
            key = f"relation.{schema.key_of(item)}"
            yield Problem(repr(value), expected, remedy, key=key)
    if ladder.choices.anchors.shared_errors:
        yield Problem("a shared error", expected, remedy, key="anchors.shared_errors")
    yield from _beyond_parallaxes(ladder)
    stars = {"cepheids": ladder.cepheids, "anchors.parallaxes": ladder.parallax_stars}
    for key, sample in stars.items():
        if sample is not None and sample.log_period_error is not None:
            yield Problem("errors of the periods", expected, remedy, key=f"{key}.columns")
        if sample is not None and sample.metallicity_error is not None:
            yield Problem("errors of the metallicity", expected, remedy, key=f"{key}.columns")
        if sample is not None and sample.overtone is not None:
            yield Problem("overtones with an offset", expected, remedy, key=f"{key}.overtones")


def _beyond_parallaxes(ladder: Ladder) -> Iterator[Problem]:
    """Treatments of parallaxes that the simulator does not know."""
    section = ladder.choices.anchors.parallaxes
    if ladder.parallax_stars is None or section is None:
        return
    known = ("flat in modulus", "uniform in volume")
    unknown = {
        "distance_prior": section.distance_prior not in known,
        "modulus_bounds": section.modulus_bounds is not None,
        "offsets": bool(section.offsets),
        "offset_slope": section.offset_slope,
        "correlation": section.correlation is not None,
        "selection": section.selection is not None,
        "min_signal": section.min_signal is not None,
        "columns.cluster": "cluster" in section.columns,
    }
    for key, asked in unknown.items():
        if asked:
            yield Problem(
                found="a treatment of parallaxes that the simulator does not know",
                expected="one offset, one star a modulus, and one of the priors "
                + " and ".join(known),
                remedy="take it out to simulate the rest",
                key=f"anchors.parallaxes.{key}",
            )
    if ladder.choices.states_prior("parallax_error_scale"):
        yield Problem(
            found="a scale of the parallax errors",
            expected="terms that the simulator knows",
            remedy="take it out to simulate the rest",
            key="priors.parallax_error_scale",
        )


def restated(ladder: Ladder, truth: Mapping[str, float], rng: Rng) -> dict[str, Any]:
    """The ladder's choices, made to fit the new tables; anchors measured again."""
    plain = ladder.choices.to_mapping()
    plain.pop("alternatives", None)
    for section in ("cepheids", "supernovae", "expansion"):
        if section in plain:
            plain[section] = _fitted(plain[section], _COLUMNS[section])
    if ladder.velocities is not None:
        plain["expansion"]["columns"] = {role: role for role in ("name", "distance", "velocity")}
    metallic = ladder.choices.relation.metallicity != "none"
    if "cepheids" in plain:
        plain["cepheids"]["magnitude"] = _MAGNITUDE
        plain["cepheids"]["columns"] |= {"metallicity": "OH"} if metallic else {}
    plain["anchors"] = _anchors(ladder, truth, rng)
    published = plain.get("expansion", {}).get("intercept")
    if published is not None:
        true = float(np.log10(truth["hubble_constant"])) - 0.2 * truth["peak_magnitude"] - 5.0
        value = true + published["error"] * float(rng.normal())
        plain["expansion"]["intercept"] = {**published, "value": value}
        plain["expansion"]["columns"] = {}
    return plain


def _fitted(section: Mapping[str, Any], columns: Mapping[str, str]) -> dict[str, Any]:
    """A section without its table and what was done to its rows, its columns named anew."""
    done = ("table", "set_aside", "overtones", "conversion")
    kept = {key: value for key, value in section.items() if key not in done}
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
        stars["magnitude"] = _MAGNITUDE
        if ladder.choices.relation.metallicity != "none":
            stars["columns"]["metallicity"] = "OH"
        anchors["parallaxes"] = stars
    return anchors
