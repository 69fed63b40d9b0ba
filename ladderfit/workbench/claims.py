"""A claims file beside the ladder file, its claims held against the live posterior; no widgets.

Which number a claim is about is read as `ladderfit.review` reads it; nothing is
refitted here.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from ladderfit.errors import InputError
from ladderfit.ladder import Ladder
from ladderfit.result import Result
from ladderfit.review.claims import OF_THE_RELATION, Claim
from ladderfit.review.claims_file import read_claims
from ladderfit.review.joint import number_claimed, posterior_values
from ladderfit.review.judged import refusal
from ladderfit.review.refits import moved

_CLAIMS = re.compile(rb"^\s*\[*\s*\"?claim", re.MULTILINE)
_SNIFFED = 1_000_000  # bytes in which a claim begins
_MOST_FILES = 60
_LACKS = {
    "slope": "stars",
    "zero_point": "stars",
    "metallicity": "metallicity term",
    "scatter": "stars",
    "modulus": "modulus of {host}",
    "peak_magnitude": "supernovae in hosts",
    "hubble_constant": "expansion",
}


@dataclass(frozen=True)
class Compared:
    """One claim beside the posterior.

    Attributes
    ----------
    claim : Claim
        As published.
    moved : Claim
        On the table's photometric system, where the claim gives a transformation.
    mean, sd : float
        Of the posterior, for the number that the claim is about [its unit].
    reason : str
        Why there is nothing to compare; "" where there is.
    """

    claim: Claim
    moved: Claim
    mean: float = float("nan")
    sd: float = float("nan")
    reason: str = ""

    @property
    def error(self) -> float:
        """Root of the sum of both squared errors; the posterior's alone where none is stated."""
        return float(np.hypot(self.moved.error or 0.0, self.sd))

    @property
    def shift(self) -> float:
        """Published value less the posterior mean, in `error`; NaN where that is no number."""
        return (self.moved.value - self.mean) / self.error if self.error > 0.0 else float("nan")


@dataclass(frozen=True)
class Beside:
    """All claims of one file.

    Attributes
    ----------
    title : str
    rows : tuple of Compared
    trouble : tuple of str
        What is wrong with the file, a line each; then there are no rows.
    offered : bool
        Whether some claims file can be picked.
    """

    title: str = ""
    rows: tuple[Compared, ...] = ()
    trouble: tuple[str, ...] = ()
    offered: bool = False


class ClaimsFiles:
    """The claims files beside a ladder file, and the one that was picked.

    Parameters
    ----------
    ladder : Ladder

    Attributes
    ----------
    chosen : str
        Name of the file; "" for none.
    """

    def __init__(self, ladder: Ladder) -> None:
        self.chosen = ""
        self._folder, self._own = ladder.base, ladder.path
        self._known: tuple[Any, Result, Beside] | None = None

    def offered(self) -> list[str]:
        """Names of files in which claims stand, and of the one picked."""
        own = None if self._own is None else Path(self._own).name
        try:
            paths = sorted(self._folder.glob("*.toml"))
        except OSError:
            paths = []
        found = [path.name for path in paths if path.name != own and _has_claims(path)]
        found = found[:_MOST_FILES]
        return found if self.chosen in ("", *found) else [*found, self.chosen]

    def beside(self, result: Result) -> Beside:
        """The file's claims against a posterior; read again once the file has changed."""
        if not self.chosen:
            return Beside(offered=bool(self.offered()))
        path = self._folder / Path(self.chosen).name
        stamp = _stamp(path)
        if self._known is None or self._known[0] != stamp or self._known[1] is not result:
            self._known = (stamp, result, _read(path, result))
        return self._known[2]


def _read(path: Path, result: Result) -> Beside:
    try:
        claims = read_claims(path)
    except InputError as error:
        lines = (str(replace(problem, file=path.name)) for problem in error.problems)
        return Beside(trouble=tuple(" ".join(line.split()) for line in lines), offered=True)
    rows = tuple(compare(result, claim, claims.system) for claim in claims.claims)
    return Beside(claims.title or path.name, rows, offered=True)


def compare(result: Result, claim: Claim, table_system: str | None = None) -> Compared:
    """Hold one claim against a posterior.

    Parameters
    ----------
    result : Result
    claim : Claim
    table_system : str or None
        The table's photometric system, as the claims file names it.
    """
    ladder, shifted = result.ladder, moved(claim)
    reason = next(_reasons(ladder, claim, table_system), "")
    if not reason:
        overtone = claim.method.mode == "overtone"
        wanted = number_claimed(shifted, ladder.choices, ladder.hosts, overtone=overtone)
        values = posterior_values(result, wanted)
        if values is not None:
            return Compared(claim, shifted, float(np.mean(values)), float(np.std(values)))
        reason = f"the ladder has no {_LACKS[claim.quantity].format(host=claim.host)}"
        if claim.apparent and claim.host is not None:
            reason = f"the ladder has no modulus of {claim.host}"
    return Compared(claim, shifted, reason=reason)


def _reasons(ladder: Ladder, claim: Claim, table_system: str | None) -> Iterator[str]:
    """Why a claim is not about a number of this ladder."""
    cepheids, parallaxes = ladder.choices.cepheids, ladder.choices.anchors.parallaxes
    section = cepheids or parallaxes
    if claim.quantity in OF_THE_RELATION and section is None:
        yield f"the ladder has no {_LACKS[claim.quantity]}"
    if claim.quantity == "scatter" and not claim.intrinsic:
        yield "a scatter with errors in it is of the paper's own stars; the ladder's is intrinsic"
    if claim.transformation is None:
        yield from filter(None, (refusal(ladder, claim, table_system),))
    if claim.host is not None and claim.host not in ladder.hosts:
        yield f"the ladder has no host {claim.host}"
    if claim.apparent and claim.host is None and len(ladder.hosts) != 1:
        yield "an apparent magnitude of which host is not stated"
    if claim.method.mode == "overtone" and (section is None or section.overtones != "offset"):
        yield "the claim is of overtone pulsators, which have no line of their own in the ladder"


def _has_claims(path: Path) -> bool:
    try:
        if not path.is_file():
            return False
        with path.open("rb") as file:
            return _CLAIMS.search(file.read(_SNIFFED)) is not None or "claim" in path.name.lower()
    except OSError:
        return "claim" in path.name.lower()


def _stamp(path: Path) -> Any:
    try:
        known = path.stat()
    except OSError:
        return path, 0, 0
    return path, known.st_mtime_ns, known.st_size
