"""Objects set aside by hand: what a click changes, and which stars to show as crosses."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from ladderfit.checks.residuals import HostResiduals, cepheid_residuals
from ladderfit.choices import Choices, SetAside
from ladderfit.errors import InputError
from ladderfit.ladder import Ladder
from ladderfit.result import Result

BY_HAND = "set aside by hand"
_STARS = ("cepheids", "anchors.parallaxes")


def entries(choices: Choices, section: str) -> tuple[SetAside, ...]:
    """What is set aside in a section of the ladder file."""
    found: Any = choices
    for part in section.split("."):
        found = getattr(found, part)
        if found is None:
            return ()
    known: tuple[SetAside, ...] = found.set_aside
    return known


def entry_of(choices: Choices, section: str, name: str, host: str = "") -> SetAside | None:
    """The entry that sets an object aside; None where nothing does."""
    for entry in entries(choices, section):
        if name in (entry.star, entry.name) and (not host or entry.host in (None, host)):
            return entry
    return None


def toggled(
    ladder: Ladder, section: str, name: str, host: str = "", reason: str = ""
) -> Mapping[str, Any]:
    """Changes that set an object aside, or take it back if it is."""
    known = entries(ladder.choices, section)
    found = entry_of(ladder.choices, section, name, host)
    if found is not None:
        return {f"{section}.set_aside": [_plain(entry) for entry in known if entry is not found]}
    key = "star" if section in _STARS else "name"
    entry = SetAside(reason=reason.strip() or BY_HAND, **{key: name})
    if section == "cepheids" and host and _ambiguous(ladder, name):
        entry = replace(entry, host=host)
    return {f"{section}.set_aside": [_plain(item) for item in (*known, entry)]}


def with_reason(choices: Choices, section: str, found: SetAside, reason: str) -> Mapping[str, Any]:
    """Changes that record another reason."""
    new = replace(found, reason=reason.strip() or BY_HAND)
    known = entries(choices, section)
    return {f"{section}.set_aside": [_plain(new if entry is found else entry) for entry in known]}


def shown_as(entry: SetAside) -> tuple[str, str]:
    """What an entry is in a list of objects and whole hosts."""
    if entry.whole_host:
        return "host", entry.host or ""
    return "name", entry.star or entry.name or ""


def in_list(
    choices: Choices, section: str, offered: Sequence[tuple[str, str]]
) -> tuple[tuple[str, str], ...]:
    """Which of a list's objects and whole hosts are set aside, in the list's order."""
    known = {shown_as(entry) for entry in entries(choices, section)}
    return tuple(one for one in offered if one in known)


def with_chosen(
    choices: Choices,
    section: str,
    offered: Sequence[tuple[str, str]],
    chosen: Sequence[tuple[str, str]],
) -> Mapping[str, Any]:
    """Changes that set aside what is chosen of a list of supernovae and whole hosts.

    Entries that stay keep their place, reason and host; those that the list does not
    offer stay as they are.
    """
    known = entries(choices, section)
    kept = [e for e in known if shown_as(e) in chosen or shown_as(e) not in offered]
    there = {shown_as(entry) for entry in known}
    new = [
        SetAside(reason=BY_HAND, **{key: value})
        for key, value in offered
        if (key, value) in chosen and (key, value) not in there
    ]
    return {f"{section}.set_aside": [_plain(entry) for entry in (*kept, *new)]}


def _plain(entry: SetAside) -> dict[str, str]:
    parts = {"star": entry.star, "host": entry.host, "name": entry.name, "reason": entry.reason}
    return {key: value for key, value in parts.items() if value is not None}


def _ambiguous(ladder: Ladder, name: str) -> bool:
    stars = ladder.cepheids
    return stars is not None and int(np.sum(stars.star == name)) > 1


def aside_residuals(result: Result) -> HostResiduals | None:
    """Residuals of Cepheids that are set aside by hand and pass every other cut."""
    ladder = result.ladder
    if ladder.cepheids is None or not entries(ladder.choices, "cepheids"):
        return None
    try:
        whole = ladder.change({"cepheids.set_aside": []})
    except InputError:
        return None
    stars = whole.cepheids
    if stars is None:
        return None
    known = [f"modulus[{whole.hosts[host]}]" in result.draws for host in stars.host]
    left = ~np.isin(stars.row, ladder.cepheids.row) & np.array(known, bool)
    found = cepheid_residuals(replace(result, choices=whole.choices, source=whole))
    if found is None or not left.any():
        return None
    return HostResiduals(
        found.name[left],
        found.x[left],
        found.data[left],
        found.model[left],
        found.sd[left],
        found.host[left],
    )
