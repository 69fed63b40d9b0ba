"""What a free ratio, shared terms and limits need of the other choices."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from ladderfit import schema
from ladderfit.choices.parallaxes import Parallaxes
from ladderfit.choices.relation import Relation
from ladderfit.choices.stars import Cepheids, Magnitude
from ladderfit.errors import Problem

MAGNITUDES = ("cepheids.magnitude", "anchors.parallaxes.magnitude")


def magnitudes_in_use(
    cepheids: Cepheids | None, stars: Parallaxes | None
) -> Mapping[str, Magnitude]:
    """The magnitudes of both samples, by dotted key."""
    found = {} if cepheids is None else {MAGNITUDES[0]: cepheids.magnitude}
    if stars is not None and stars.use and stars.magnitude is not None:
        found[MAGNITUDES[1]] = stars.magnitude
    return found


def reddening_faults(
    relation: Relation, cepheids: Cepheids | None, stars: Parallaxes | None
) -> Iterator[Problem]:
    """A free ratio needs an index, and an error for each of its bands."""
    if relation.reddening == "fixed":
        return
    for key, magnitude in magnitudes_in_use(cepheids, stars).items():
        if magnitude.wesenheit is None:
            yield Problem(
                found=f"the one band {magnitude.band}, yet the ratio is to be free",
                expected="a Wesenheit index",
                remedy='write wesenheit = {...}, or set relation.reddening = "fixed"',
                key=key,
            )
        elif "total" in magnitude.errors:
            yield Problem(
                found="the error of the whole index alone, yet the ratio is to be free",
                expected="an error column for each band or colour",
                remedy='name them in place of total, or set relation.reddening = "fixed"',
                key=f"{key}.errors",
            )


def completeness_faults(
    relation: Relation, cepheids: Cepheids | None, *, covariances: Mapping[str, bool]
) -> Iterator[Problem]:
    """Limits are met host by host in one dimension: what else ties a host's stars is refused."""
    if cepheids is None or cepheids.completeness is None:
        return
    metallicity = relation.metallicity
    populations = metallicity != "none" and metallicity.errors == "population"
    others = {
        "relation.reddening": relation.reddening != "fixed" and relation.reddening.population,
        "cepheids.shared": bool(cepheids.shared),
        "relation.metallicity.errors": populations and "metallicity_error" in cepheids.columns,
        **covariances,
    }
    for key, present in others.items():
        if present:
            yield Problem(
                found=f"magnitude limits together with {key}",
                expected="one of the two: limits are integrated over one modulus per host",
                remedy=_REMEDIES.get(key, f"take {key} out, or cut periods in place of limits"),
                key=schema.join("cepheids", "completeness"),
            )


_REMEDIES = {
    "relation.reddening": 'write colours = "in the variance", or cut periods in place of limits',
    "relation.metallicity.errors": 'write errors = "in the variance", '
    "or cut periods in place of limits",
}
