"""For the reviewer: whether a published number holds, by which method, and what it rests on.

Least squares of many kinds, the hierarchical fit, resampling in closed form:
`review(ladder, claims)` holds each claim against the table it came from.
"""

from ladderfit.review.claims import Claim, Claims, Method
from ladderfit.review.claims_file import claims_from, read_claims
from ladderfit.review.verdicts import VERDICTS, ClaimReview, Verdict
from ladderfit.review.whole import Review, review

__all__ = [
    "VERDICTS",
    "Claim",
    "ClaimReview",
    "Claims",
    "Method",
    "Review",
    "Verdict",
    "claims_from",
    "read_claims",
    "review",
]
