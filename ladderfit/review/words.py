"""A review as headings, sentences and tables, from which every page is made."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from ladderfit.review.claims import fixed_point
from ladderfit.review.refits import Refit
from ladderfit.review.reliance import Variation
from ladderfit.review.verdicts import CANNOT_BE_JUDGED, ClaimReview
from ladderfit.review.whole import Review

_FIGURE = (
    "refits with their spread under resampling, and single choices with the change to be "
    "expected of other stars; dotted, the refit as described"
)
_NAMED = 12  # stars of the smallest set that are named
_HOSTS = 10  # hosts whose leaving out is shown
_ORDER = ("shortest period [d]", "longest period [d]", "clip [s.d.]", "break", "modes")


@dataclass(frozen=True)
class Heading:
    """A heading; 1 is the page's own."""

    text: str
    level: int


@dataclass(frozen=True)
class Paragraph:
    """A paragraph; `lead` stands out before it."""

    text: str
    lead: str = ""


@dataclass(frozen=True)
class Table:
    """A table; columns after the first `words` hold numbers."""

    head: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    words: int = 1


@dataclass(frozen=True)
class Picture:
    """The figure of one claim, by its number from 1."""

    number: int
    text: str


Block = Heading | Paragraph | Table | Picture


def blocks(review: Review) -> list[Block]:
    """The whole page."""
    title = review.title or "Review of published values"
    made: list[Block] = [Heading(title, 1), Paragraph(_table_words(review))]
    rows = tuple(
        (str(number), found.claim.words, found.claim.printed, "; ".join(found.names))
        for number, found in enumerate(review.claims, start=1)
    )
    made.append(Table(("", "claim", "published", "verdict"), rows, words=4))
    for number, found in enumerate(review.claims, start=1):
        made += _claim(number, found)
    made += [Heading("How to read this", 2), *(Paragraph(text) for text in _reading(review))]
    return made


def _table_words(review: Review) -> str:
    ladder = review.ladder
    parts = [
        f"{source.path} (SHA-256 {source.sha256[:12]}, {source.rows:,} rows)"
        for source in ladder.sources.values()
    ]
    name = f"{ladder.choices.title}: " if ladder.choices.title else ""
    return f"Held against {name}" + "; ".join(parts) + "."


def _claim(number: int, found: ClaimReview) -> Iterator[Block]:
    claim = found.claim
    yield Heading(f"{number}. {claim.name or claim.words}: {claim.printed}", 2)
    source = ", ".join(text for text in (claim.paper, claim.note) if text)
    if source:
        yield Paragraph(f"{source}.", "Source.")
    yield Paragraph(f"{_upper(claim.method.words)}.", "What the paper says of its method.")
    if claim.transformation is not None:
        law = claim.transformation
        text = (
            f"{found.judged.printed} after the transformation to the table's system ({law.source})."
        )
        yield Paragraph(text, "On the table's system.")
    for verdict in found.verdicts:
        yield Paragraph(f"{_upper(verdict.evidence)}.", f"{_upper(verdict.name)}.")
    if found.verdict == CANNOT_BE_JUDGED:
        return
    yield Picture(number, f"{claim.words}: {_FIGURE}")
    yield Heading("Refits of the same stars", 3)
    yield refit_table(found)
    text = f"The claim counts as reproduced within {_digits(found, found.reach)} {claim.unit} of "
    yield Paragraph(f"{text}the refit as described ({found.described}).")
    if found.failed:
        yield Paragraph(f"{'; '.join(found.failed)}.", "Refits that could not be made.")
    yield Heading("What it rests on", 3)
    yield Paragraph(fewest(found))
    if found.variations:
        yield variation_table(found)
    yield Heading("The claim itself", 3)
    yield Table(("question", "answer"), tuple((c.about, c.words) for c in found.checks), words=2)


def _upper(text: str) -> str:
    return f"{text[0].upper()}{text[1:]}"


def refit_table(found: ClaimReview) -> Table:
    """Every refit: value, error, spread, stars, and its difference from the claim."""
    head = (
        "refit",
        f"value [{found.claim.unit}]",
        "error",
        "resampled",
        "stars",
        "claim less refit",
        "paired",
        "within",
    )
    return Table(head, tuple(_refit(found, refit) for refit in found.refits))


def _refit(found: ClaimReview, refit: Refit) -> tuple[str, ...]:
    first = refit is found.refits[0]
    within = "rounding" if refit.within_rounding else "error" if refit.within_error else "neither"
    return (
        f"{refit.words} (as described)" if first else refit.words,
        _digits(found, refit.value),
        _digits(found, refit.error),
        _digits(found, refit.spread),
        f"{refit.stars:,}",
        _digits(found, refit.difference, sign=True),
        "" if first else _digits(found, refit.paired),
        within,
    )


def variation_table(found: ClaimReview) -> Table:
    """The value along every choice, the change in errors, and what resampling leads to expect."""
    head = (
        "choice",
        "",
        f"value [{found.claim.unit}]",
        "change",
        "in errors",
        "expected",
        "stars",
    )
    return Table(head, tuple(_variation(found, each) for each in shown(found)), words=2)


def shown(found: ClaimReview) -> list[Variation]:
    """Variations worth a line: of many hosts only those that matter most."""
    listed = [v for axis in _ORDER for v in found.variations if v.axis == axis]
    hosts = [v for v in found.variations if v.axis == "host left out"]
    hosts.sort(key=lambda v: -abs(v.change))
    return listed + hosts[:_HOSTS] + [v for v in found.variations if v.axis == "star left out"]


def _variation(found: ClaimReview, each: Variation) -> tuple[str, ...]:
    expected = "" if math.isnan(each.expected) else f"± {_digits(found, each.expected)}"
    return (
        each.axis,
        each.words,
        _digits(found, each.value),
        _digits(found, each.change, sign=True),
        fixed_point(each.in_errors + 0.0, 1) if abs(each.in_errors) >= 0.05 else "0.0",
        expected,
        f"{each.stars:,}",
    )


def fewest(found: ClaimReview) -> str:
    """How few stars carry the value, in one sentence."""
    step = "one of its errors" if found.judged.error is not None else "one spread"
    least = found.smallest
    if not found.variations:
        return "This number is known to the joint fit alone; single choices were not tried."
    if least is None:
        return f"No half of the stars, taken out by influence, moves the value by {step}."
    names = ", ".join(least.stars[:_NAMED])
    more = f" and {least.size - _NAMED:,} more" if least.size > _NAMED else ""
    share = 100.0 * least.size / least.of
    one = least.size == 1
    some = "One star of" if one else f"At most {least.size:,} stars of"
    need = "has" if one else "have"
    return (
        f"{some} {least.of:,} ({share:.2g} %) {need} to go for the value to move by {step}: "
        f"without {names}{more} it is {_digits(found, least.value)} {found.claim.unit}, by a refit."
    )


def _digits(found: ClaimReview, value: float, *, sign: bool = False) -> str:
    """One digit more than the paper prints."""
    decimals = found.claim.decimals
    places = 4 if decimals is None else max(decimals, 0) + 1
    text = fixed_point(value if abs(value) >= 0.5 * 10.0**-places else 0.0, places)
    return f"+{text}" if sign and value > 0.0 and text.strip("0.") else text


def _reading(review: Review) -> Sequence[str]:
    joint = (
        f"The hierarchical fit is the mean of {review.draws:,} draws of the joint posterior."
        if review.draws
        else "Hierarchical fits were left out."
    )
    return (
        "A refit uses the same stars as the paper. The claim is therefore held against how far "
        "defensible treatments of the same stars differ under resampling (paired), and not "
        "against both errors in quadrature: as described, 2.58 times the median of these, at "
        "least a quarter and at most the whole of the value's own spread under resampling, plus "
        "the rounding of the claim.",
        "Another method or a choice that is not stated explains a claim where it comes within "
        "the rounding and a quarter of that spread, for all numbers of the relation if it can, "
        "with the number of stars that is stated.",
        "Resampled: the jackknife (Efron & Stein 1981), and with a clip random exponential weights "
        "with the clip repeated (Rubin 1981). Expected: the change that another sample of stars "
        "would lead to by chance, one standard deviation. Fewest stars: by influence (Broderick, "
        "Giordano & Meager 2020), an upper bound, verified by a refit.",
        "An error is called too small below 0.6 of the smallest, too large above 1.6 of the "
        "largest that formulas and resampling give for these stars.",
        f"{joint} Seed {review.seed}.",
        *review.notes,
    )
