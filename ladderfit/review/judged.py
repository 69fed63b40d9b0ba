"""Whether a claim can be judged from this table at all."""

from __future__ import annotations

from ladderfit.choices import Magnitude, Wesenheit
from ladderfit.ladder import Ladder
from ladderfit.review.bench import Bench
from ladderfit.review.claims import OF_THE_RELATION, WORDS, Claim

_MORE = 1.1  # times the stars of the table: a paper with more had another table


def refusal(ladder: Ladder, claim: Claim, table_system: str | None) -> str | None:
    """Why a claim is on another magnitude than the table's; None where it is not.

    Parameters
    ----------
    ladder : Ladder
    claim : Claim
        Without a transformation of its own.
    table_system : str or None
        The table's photometric system, as the claims file names it.
    """
    own = _magnitude(ladder)
    claimed = claim.magnitude
    if own is None:
        return None
    if claimed.band is not None and own.band != claimed.band:
        return f"the claim is for the band {claimed.band}, the ladder file for {own.label}"
    if claimed.wesenheit is not None:
        words = _index_differs(own, claimed.wesenheit)
        if words is not None:
            return words
    return _system_differs(ladder, claimed.system, table_system)


def _magnitude(ladder: Ladder) -> Magnitude | None:
    cepheids, stars = ladder.choices.cepheids, ladder.choices.anchors.parallaxes
    if cepheids is not None:
        return cepheids.magnitude
    return None if stars is None else stars.magnitude


def _index_differs(own: Magnitude, claimed: Wesenheit) -> str | None:
    theirs = f"{claimed.band} - {claimed.ratio:g} ({_colour(claimed)})"
    if own.wesenheit is None:
        return f"the claim is for the index {theirs}, the ladder file for the band {own.band}"
    mine = own.wesenheit
    if (mine.band, _colour(mine)) != (claimed.band, _colour(claimed)):
        return f"the claim is for the index {theirs}, the ladder file for {own.label}"
    if abs(mine.ratio - claimed.ratio) > 1e-9:
        return (
            f"the claim has the Wesenheit ratio {claimed.ratio:g}, the ladder file "
            f"{mine.ratio:g}; the bands are there: set the ratio in the ladder file, or give "
            "the claim a transformation"
        )
    return None


def _colour(index: Wesenheit) -> str:
    return index.colour if isinstance(index.colour, str) else "-".join(index.colour)


def _system_differs(ladder: Ladder, claimed: str | None, named: str | None) -> str | None:
    if claimed is None:
        return None
    stars = ladder.cepheids or ladder.parallax_stars
    present = set() if stars is None or stars.system is None else {str(s) for s in stars.system}
    if named is not None:
        present = {named}
    if present == {claimed}:
        return None
    if not present:
        return (
            f"the claim is on the system {claimed!r}, and nothing says which the table is on; "
            "name it as system in the claims file, or give the claim a transformation"
        )
    table = ", ".join(repr(name) for name in sorted(present))
    return (
        f"the claim is on the photometric system {claimed!r}, the table on {table}; "
        "give the claim a transformation"
    )


def beyond_the_table(bench: Bench, claim: Claim) -> str | None:
    """Why the table cannot tell the number claimed; None where nothing speaks against it."""
    ladder, stars = bench.opened, bench.stars
    choices = ladder.choices
    if claim.quantity in OF_THE_RELATION and stars is None and ladder.parallax_stars is None:
        return "the ladder file has no Cepheids"
    if claim.quantity in claim.method.fixed:
        return f"the paper holds the {WORDS[claim.quantity]} fixed; no star speaks on it"
    unknown = [host for host in claim.method.hosts if host not in ladder.hosts]
    if claim.host is not None and claim.host not in ladder.hosts:
        unknown.append(claim.host)
    if unknown:
        return f"the table has no host {', '.join(sorted(set(unknown)))}"
    known = set() if stars is None else {str(name) for name in stars.star}
    strangers = [name for name in claim.method.set_aside if name not in known]
    if strangers:
        return f"the paper sets aside {', '.join(strangers)}, which the table does not have"
    if claim.quantity == "metallicity" and choices.relation.metallicity == "none":
        return "the ladder file has no metallicity term"
    if claim.method.metallicity and choices.relation.metallicity == "none":
        return "the paper has a metallicity term, the ladder file none"
    terms = bench.system(bench.described(claim.method)).names
    strangers = [name for name in claim.method.fixed if name not in terms]
    if strangers:
        return f"the paper holds {', '.join(strangers)} fixed, a term the ladder file lacks"
    if claim.method.mode == "overtone" and bench.overtone is None:
        return "the table does not tell overtone pulsators"
    if claim.apparent and claim.host is None and len(ladder.hosts) > 1:
        return "an apparent magnitude of which host is not stated"
    if claim.apparent and stars is None:
        return "the table has no Cepheids in a galaxy"
    if claim.quantity == "peak_magnitude" and choices.supernovae is None:
        return "the ladder file has no supernovae in hosts"
    if claim.quantity == "hubble_constant" and choices.expansion is None:
        return "the ladder file has no expansion"
    sample = stars if stars is not None else ladder.parallax_stars
    if claim.stars is not None and sample is not None:
        total = len(sample)
        if claim.stars > _MORE * total + 1:
            return f"the paper has {claim.stars:,} stars, the table {total:,}"
    return None


def undetermined(bench: Bench, claim: Claim) -> str:
    """Why no refit gives the number, where nothing above speaks against it."""
    ladder = bench.opened
    anchored = bool(ladder.geometric) or ladder.parallax_stars is not None
    scale = claim.quantity in ("zero_point", "modulus", "peak_magnitude", "hubble_constant")
    if scale and not claim.apparent and not anchored:
        return "nothing in the ladder file sets the absolute scale: no anchor is in use"
    if ladder.peak_covariance is not None and not bench.draws:
        return "with correlated supernovae only the joint fit could tell, and it is left out"
    return "under the method described the stars that are left do not determine it"
