"""The review of one claim: refits, what it rests on, checks, and the verdicts they lead to."""

from __future__ import annotations

from dataclasses import dataclass

from ladderfit.review.checks import Check
from ladderfit.review.claims import Claim, fixed_point
from ladderfit.review.refits import Refit, Way, count_agrees, tolerance
from ladderfit.review.reliance import SmallestSet, Variation
from ladderfit.review.unstated import Explanation

AS_DESCRIBED = "reproduced as described"
BY_ANOTHER_METHOD = "reproduced by another method"
UNDER_A_CHOICE = "reproduced only under a choice not stated"
NOT_REPRODUCED = "not reproduced"
ERROR_TOO_SMALL = "its error is too small"
ERROR_TOO_LARGE = "its error is too large"
ANOTHER_PIVOT = "stated at another pivot"
CANNOT_BE_JUDGED = "cannot be judged from this table"
VERDICTS = (
    AS_DESCRIBED,
    BY_ANOTHER_METHOD,
    UNDER_A_CHOICE,
    NOT_REPRODUCED,
    ERROR_TOO_SMALL,
    ERROR_TOO_LARGE,
    ANOTHER_PIVOT,
    CANNOT_BE_JUDGED,
)
REPRODUCED = (AS_DESCRIBED, BY_ANOTHER_METHOD)


@dataclass(frozen=True)
class Verdict:
    """One of `VERDICTS`, and the sentence of evidence for it."""

    name: str
    evidence: str

    def __str__(self) -> str:
        """Verdict and evidence."""
        return f"{self.name}: {self.evidence}"


@dataclass(frozen=True, eq=False)
class ClaimReview:
    """Everything found on one claim.

    Attributes
    ----------
    claim : Claim
        As published.
    judged : Claim
        On the table's photometric system; equal to `claim` without a transformation.
    verdicts : tuple of Verdict
        The first is on the value, a second one on the error.
    described : str
        What the refit as described did.
    refits : tuple of Refit
        The one as described first; empty where the claim cannot be judged.
    reach : float
        How far the claim may lie from the refit as described.
    explanation : Explanation or None
        What gives the value where the description does not.
    variations : tuple of Variation
    smallest : SmallestSet or None
    checks : tuple of Check
    failed : tuple of str
        Refits that could not be made, and why.
    """

    claim: Claim
    judged: Claim
    verdicts: tuple[Verdict, ...]
    described: str
    refits: tuple[Refit, ...] = ()
    reach: float = float("nan")
    explanation: Explanation | None = None
    variations: tuple[Variation, ...] = ()
    smallest: SmallestSet | None = None
    checks: tuple[Check, ...] = ()
    failed: tuple[str, ...] = ()

    @property
    def verdict(self) -> str:
        """The verdict on the value."""
        return self.verdicts[0].name

    @property
    def names(self) -> tuple[str, ...]:
        """Names of all verdicts."""
        return tuple(verdict.name for verdict in self.verdicts)

    @property
    def step(self) -> float:
        """What changes are counted in: the claim's error, or the value's spread without one."""
        if self.judged.error is not None:
            return self.judged.error
        return self.refits[0].spread if self.refits else float("nan")


def meets_description(claim: Claim, found: list[Refit]) -> bool:
    """Whether the refit as described gives value and number of stars."""
    first = found[0]
    near = abs(first.difference) <= tolerance(claim, found)
    return near and count_agrees(claim, first.stars)


def value_verdict(
    claim: Claim,
    found: list[Refit],
    explained: Explanation | None,
    pivot: Check | None,
) -> Verdict:
    """The verdict on the value.

    Parameters
    ----------
    claim : Claim
    found : list of Refit
        The one as described first.
    explained : Explanation or None
        Of the whole relation, or of this number alone.
    pivot : Check or None
    """
    first = found[0]
    if meets_description(claim, found):
        return Verdict(AS_DESCRIBED, _reproduced(claim, first))
    if pivot is not None and pivot.fault == "another pivot":
        return Verdict(ANOTHER_PIVOT, pivot.words)
    if explained is not None:
        mine = explained.refits[0]
        differs = "" if count_agrees(claim, first.stars) else f" (the paper has {claim.stars:,})"
        text = f"as described {_value(claim, first)}{differs}; "
        text += f"with {explained.words} {_value(claim, mine)}"
        tries = f"{explained.met} of {explained.tried} ways tried meet it"
        text += f", within {_nearness(claim, mine)} ({tries})"
        return Verdict(BY_ANOTHER_METHOD if explained.stated else UNDER_A_CHOICE, text)
    if abs(first.difference) <= tolerance(claim, found):
        text = f"{_reproduced(claim, first)}, but the paper states {claim.stars:,} stars"
        return Verdict(AS_DESCRIBED, text)
    text = f"as described {_value(claim, first)}, {_off(claim, first)}"
    nearest = min(found, key=lambda refit: abs(refit.difference))
    if nearest is not first:
        text += (
            f"; the nearest of {len(found)} refits is {_value(claim, nearest)} ({nearest.words})"
        )
    if pivot is not None:
        text += f"; {pivot.words}"
    return Verdict(NOT_REPRODUCED, text)


def error_verdict(checks: list[Check]) -> Verdict | None:
    """The verdict on the error, if it fails."""
    faults = [check for check in checks if check.fault in ("too small", "too large")]
    if not faults:
        return None
    small = faults[0].fault == "too small"
    return Verdict(ERROR_TOO_SMALL if small else ERROR_TOO_LARGE, faults[0].words)


def _reproduced(claim: Claim, refit: Refit) -> str:
    return f"{_value(claim, refit)}, within {_nearness(claim, refit)}"


def _value(claim: Claim, refit: Refit) -> str:
    places = 6 if claim.decimals is None else max(claim.decimals, 0) + 1
    value, error = fixed_point(refit.value, places), fixed_point(refit.error, places)
    stars = f" from {refit.stars:,} stars" if refit.stars else ""
    return f"{value} ± {error} {claim.unit}{stars}"


def _nearness(claim: Claim, refit: Refit) -> str:
    if refit.within_rounding:
        return "the rounding of the claim"
    share = abs(refit.difference) / refit.spread if refit.spread > 0.0 else float("inf")
    return f"{max(share, 0.01):.2f} of its spread under resampling of the same stars"


def _off(claim: Claim, refit: Refit) -> str:
    places = 6 if claim.decimals is None else max(claim.decimals, 0)
    text = f"off by {fixed_point(abs(refit.difference), places)} {claim.unit}"
    if claim.error is not None:
        text += f", {abs(refit.difference) / claim.error:.1f} of its errors"
    if refit.spread > 0.0:
        text += f" and {abs(refit.difference) / refit.spread:.1f} spreads under resampling"
    return text


def words_of(way: Way) -> str:
    """A way and its selection in one phrase."""
    return f"{way.words}; {way.selection.words}"
