"""What the choices and the stars that are left have to agree on: groups, the break, overtones."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Sequence

import numpy as np

from ladderfit import schema
from ladderfit.choices import Choices, Group
from ladderfit.errors import Problem, nearest
from ladderfit.inputs.rows import nearest_few
from ladderfit.photometry_notes import photometry_notes
from ladderfit.relations import break_position, members
from ladderfit.samples import StarSample


def star_problems(
    choices: Choices,
    samples: Sequence[StarSample],
    hosts: tuple[str, ...],
    seen: Collection[str],
) -> Iterator[Problem]:
    """Groups of nobody, hosts that no table has, and a break with stars on one side only.

    Parameters
    ----------
    choices : Choices
    samples : sequence of StarSample
        Cepheids and parallax stars that take part.
    hosts : tuple of str
        The ladder's hosts.
    seen : collection of str
        Every host that a table names, whether or not something of it is left.
    """
    for name, group in choices.groups.items():
        key = schema.join("groups", name)
        unknown = [host for host in group.hosts if host not in seen]
        for host in unknown:
            yield Problem(
                found=f"the host {host!r}, which no table has",
                expected="hosts of the Cepheids",
                remedy=nearest_few(host, list(seen)),
                key=f"{key}.hosts",
            )
        inside = sum(int(np.sum(members(group, stars, hosts))) for stars in samples)
        if not inside and not unknown and not _switched_off(choices, group):
            yield Problem(
                found="no star that takes part",
                expected="at least one star that meets every criterion of the group",
                remedy=_remedy(group, samples),
                key=key,
            )
    yield from _break_problems(choices, samples)


def star_notes(choices: Choices, samples: Sequence[StarSample]) -> Iterator[str]:
    """Terms that no star informs, and what the photometric choices mean."""
    yield from photometry_notes(choices, samples)
    for name, group in choices.groups.items():
        if _switched_off(choices, group):
            yield f"group {name}: no star takes part, as the parallaxes are not in use"
    flags = [stars.overtone for stars in samples if stars.overtone is not None]
    if flags and not any(np.any(flag) for flag in flags):
        yield "no overtone pulsator takes part; their offset rests on its prior alone"


def _switched_off(choices: Choices, group: Group) -> bool:
    """Whether the group is one of parallax stars alone, and these are not in use."""
    stars = choices.anchors.parallaxes
    return group.parallax_stars and not group.hosts and stars is not None and not stars.use


def _remedy(group: Group, samples: Sequence[StarSample]) -> str:
    if group.system is not None:
        known = sorted({str(s) for stars in samples for s in _systems(stars)})
        if not known:
            return "name the column of photometric systems: columns.system"
        if group.system not in known:
            return nearest(group.system, known)
    if group.mode == "overtone" and not any(
        stars.overtone is not None and np.any(stars.overtone) for stars in samples
    ):
        return 'keep the overtones (overtones = "offset"), or take the group out'
    if group.parallax_stars and not group.hosts and all(s.parallax is None for s in samples):
        return "add [anchors.parallaxes], or take the group out"
    return "correct its criteria, widen the cuts, or take the group out"


def _systems(stars: StarSample) -> Sequence[str]:
    return [] if stars.system is None else list(np.unique(stars.system))


def _break_problems(choices: Choices, samples: Sequence[StarSample]) -> Iterator[Problem]:
    place = break_position(choices)
    if place is None or not samples:
        return
    place += float(np.log10(choices.relation.pivot))
    log_period = np.concatenate([stars.log_period for stars in samples])
    low, high = float(log_period.min()), float(log_period.max())
    if not low < place < high:
        yield Problem(
            found=f"{10.0**place:g} d, where the periods that take part run "
            f"from {10.0**low:.4g} to {10.0**high:.4g} d",
            expected="a period with stars on both sides",
            remedy='move the break, widen the period range, or write break = "none"',
            key="relation.break",
        )
