"""Ladders with one object set aside by their own choices, to hold leave-one-out against."""

from __future__ import annotations

from typing import Any

from ladderfit.influence.sets import CEPHEID, FLOW, HOST, PEAK, STAR
from ladderfit.ladder import Ladder

SECTION = {
    CEPHEID: "cepheids",
    STAR: "anchors.parallaxes",
    PEAK: "supernovae",
    FLOW: "expansion",
}


def set_aside(ladder: Ladder, kind: str, name: str, host: str) -> Ladder:
    """The ladder with an object, or all objects of a host and its anchor, left out."""
    if kind != HOST:
        return ladder.change(entries(ladder, kind, [(name, host)]))
    changes: dict[str, Any] = {}
    place = ladder.hosts.index(host)
    stars, peaks = ladder.cepheids, ladder.peaks
    if stars is not None and (stars.host == place).any():
        listed = [(str(star), host) for star in stars.star[stars.host == place]]
        changes |= entries(ladder, CEPHEID, listed)
    if peaks is not None and (peaks.host == place).any():
        changes |= entries(ladder, PEAK, [(str(n), "") for n in peaks.name[peaks.host == place]])
    if any(anchor.name == host for anchor in ladder.geometric):
        changes[f"anchors.geometric.{host}.use"] = False
    return ladder.change(changes)


def entries(ladder: Ladder, kind: str, objects: list[tuple[str, str]]) -> dict[str, Any]:
    """The change that sets some objects aside, beside those set aside before."""
    key, role = f"{SECTION[kind]}.set_aside", "star" if kind in (CEPHEID, STAR) else "name"
    listed = _before(ladder, key)
    for name, host in objects:
        listed.append(
            {role: name, "reason": "left out"} | ({"host": host} if kind == CEPHEID else {})
        )
    return {key: listed}


def _before(ladder: Ladder, key: str) -> list[dict[str, Any]]:
    try:
        return list(ladder.choices.value(key))
    except KeyError:
        return []
