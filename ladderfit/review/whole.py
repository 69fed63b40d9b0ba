"""Reviewing all claims of a file against a ladder."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace

from ladderfit.errors import InputError, LadderfitError
from ladderfit.ladder import Ladder
from ladderfit.review.bench import Bench
from ladderfit.review.checks import (
    Check,
    error_check,
    freedom_check,
    pivot_check,
    possible_error,
    rounding_check,
)
from ladderfit.review.claims import OF_THE_RELATION, Claim, Claims, Method
from ladderfit.review.fits import Treatment
from ladderfit.review.judged import beyond_the_table, refusal, undetermined
from ladderfit.review.refits import (
    JOINT_WEIGHTS,
    Refit,
    Way,
    moved,
    refits,
    tolerance,
    way_described,
)
from ladderfit.review.reliance import smallest_set, variations
from ladderfit.review.unstated import Explanation, explanation
from ladderfit.review.verdicts import (
    CANNOT_BE_JUDGED,
    ClaimReview,
    Verdict,
    error_verdict,
    meets_description,
    value_verdict,
    words_of,
)

Progress = Callable[[str, float], None]


@dataclass(frozen=True, eq=False, repr=False)
class Review:
    """Claims against a table.

    Attributes
    ----------
    title : str
    ladder : Ladder
        As the file has it.
    claims : tuple of ClaimReview
        In the order of the claims file.
    seed, draws : int
        Of the resampling and the joint fits.
    """

    title: str
    ladder: Ladder
    claims: tuple[ClaimReview, ...]
    seed: int
    draws: int
    notes: tuple[str, ...] = field(default=())

    def __repr__(self) -> str:
        """The title and how many claims have which verdict."""
        names = [found.verdict for found in self.claims]
        counts = ", ".join(f"{names.count(name)} {name}" for name in dict.fromkeys(names))
        return f"<Review {self.title!r}: {counts}>"

    def summary(self) -> str:
        """One paragraph per claim: what is claimed, the verdicts, the evidence."""
        lines = []
        for found in self.claims:
            lines.append(f"{found.claim.words} {found.claim.printed}")
            lines += [f"  {verdict}" for verdict in found.verdicts]
        return "\n".join(lines)


@dataclass(frozen=True, eq=False)
class _Open:
    """A claim that can be judged, with its refits."""

    claim: Claim
    way: Way
    found: list[Refit]
    failed: tuple[str, ...]


def review(
    ladder: Ladder,
    claims: Claims,
    *,
    seed: int = 1,
    draws: int = 2000,
    progress: Progress | None = None,
) -> Review:
    """Review claims against a ladder's table.

    Parameters
    ----------
    ladder : Ladder
        Says which table, columns, magnitude, anchors and terms; its period range is
        one of the choices tried where a paper states none.
    claims : Claims
        Of `read_claims`.
    seed : int
        Of the resampling and the joint fits.
    draws : int
        Of each joint fit; 0 leaves the hierarchical fits out.
    progress : callable, optional
        Called with a stage in words and the fraction of it that is done.

    Returns
    -------
    Review

    Raises
    ------
    InputError
        If the ladder's tables do not fit without its own cuts.
    """
    bench = Bench(ladder, seed=seed, draws=draws)
    total = max(len(claims.claims), 1)
    opened: list[_Open | ClaimReview] = []
    for number, claim in enumerate(claims.claims):
        if progress is not None:
            progress("refitting", 0.5 * number / total)
        opened.append(_opened(bench, claims, claim))
    found: list[ClaimReview] = []
    for number, each in enumerate(opened):
        if progress is not None:
            progress("looking what it rests on", 0.5 + 0.5 * number / total)
        if isinstance(each, ClaimReview):
            found.append(each)
        else:
            published = claims.claims[number]
            found.append(_judged(bench, published, each, list(_relatives(each, opened))))
    notes = bench.system(bench.described(Method())).notes
    return Review(claims.title, ladder, tuple(found), seed, draws, notes)


def _opened(bench: Bench, claims: Claims, claim: Claim) -> _Open | ClaimReview:
    """Refits of a claim, or the review of one that cannot be judged."""

    def cannot(reason: str) -> ClaimReview:
        return ClaimReview(claim, claim, (Verdict(CANNOT_BE_JUDGED, reason),), claim.method.words)

    reason = None if claim.transformation else refusal(bench.ladder, claim, claims.system)
    reason = reason or beyond_the_table(bench, claim)
    if reason is not None:
        return cannot(reason)
    judged = moved(claim)
    if judged.pivot is None and claim.quantity == "zero_point":
        judged = replace(judged, pivot=bench.ladder.choices.relation.pivot)
    try:
        way = way_described(bench, claim)
        failed: list[str] = []
        made = refits(bench, judged, way, failed)
        if not made and bench.draws and not way.joint:
            way = Way(way.selection, Treatment(JOINT_WEIGHTS, way.treatment.clip), joint=True)
            made = refits(bench, judged, way, failed)
    except InputError as error:
        return cannot("; ".join(problem.found for problem in error.problems))
    except LadderfitError as error:
        return cannot(str(error))
    return _Open(judged, way, made, tuple(failed)) if made else cannot(undetermined(bench, claim))


def _relatives(each: _Open, opened: list[_Open | ClaimReview]) -> Iterator[_Open]:
    """The numbers of the same relation: one paper, one method, one magnitude."""
    for other in opened:
        if isinstance(other, _Open) and (
            other is each
            or (
                each.claim.quantity in OF_THE_RELATION
                and other.claim.quantity in OF_THE_RELATION
                and (other.claim.paper, other.claim.method, other.claim.magnitude)
                == (each.claim.paper, each.claim.method, each.claim.magnitude)
            )
        ):
            yield other


def _judged(bench: Bench, published: Claim, each: _Open, relatives: list[_Open]) -> ClaimReview:
    claim, way, found = each.claim, each.way, each.found
    reach = tolerance(claim, found)
    pivot = pivot_check(bench, claim, way, found[0], reach)
    explained = None
    if not meets_description(claim, found):
        explained = _explained(bench, each, relatives)
    trusted = _trusted(found, explained)
    if pivot is not None and pivot.pivot is not None:
        trusted = refits(bench, replace(claim, pivot=pivot.pivot), way)
    checks = _checks(bench, claim, way, trusted, relatives)
    verdicts = [value_verdict(claim, found, explained, pivot)]
    wrong = error_verdict(checks)
    step = claim.error if claim.error is not None else found[0].spread
    return ClaimReview(
        claim=published,
        judged=claim,
        verdicts=(*verdicts, wrong) if wrong else tuple(verdicts),
        described=words_of(way),
        refits=tuple(found),
        reach=reach,
        explanation=explained,
        variations=tuple(variations(bench, claim, way, step)) if step > 0.0 else (),
        smallest=smallest_set(bench, claim, way, step) if step > 0.0 else None,
        checks=tuple([*checks, pivot] if pivot else checks),
        failed=each.failed,
    )


def _explained(bench: Bench, each: _Open, relatives: list[_Open]) -> Explanation | None:
    """One explanation for all numbers of the relation; failing that, for this one alone."""
    method = each.claim.method
    if len(relatives) > 1:
        together = [each.claim, *(other.claim for other in relatives if other is not each)]
        found = explanation(bench, together, each.way, method)
        if found is not None:
            return found
    return explanation(bench, [each.claim], each.way, method)


def _trusted(found: list[Refit], explained: Explanation | None) -> list[Refit]:
    """The refits whose errors the claim's error is held against."""
    if explained is None or explained.stated:
        return found
    return [explained.refits[0]]


def _checks(
    bench: Bench, claim: Claim, way: Way, found: list[Refit], relatives: list[_Open]
) -> list[Check]:
    scatter = next(
        (
            other.claim.value
            for other in relatives
            if other.claim.quantity == "scatter" and not other.claim.intrinsic
        ),
        None,
    )
    listed = [
        error_check(claim, found),
        possible_error(bench, claim, way, scatter),
        rounding_check(claim),
        freedom_check(bench, claim, way),
    ]
    return [check for check in listed if check is not None]
