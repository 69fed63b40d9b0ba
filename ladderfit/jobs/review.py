"""A review as a folder: the page in HTML and Markdown, the verdicts, one figure per claim."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from ladderfit.files import new_folder
from ladderfit.ladder import Ladder
from ladderfit.plots import save_figure
from ladderfit.plots.review import review_figure
from ladderfit.review import ClaimReview, Claims, Review
from ladderfit.review import review as review_claims
from ladderfit.review.page import html_page, markdown_page
from ladderfit.review.whole import Progress


def write_review(review: Review, folder: str | Path) -> Path:
    """Write a review into a new folder, whole or not at all.

    Parameters
    ----------
    review : Review
    folder : str or Path
        Must not exist.

    Returns
    -------
    Path
        The folder, with ``review.html``, ``review.md``, ``verdicts.json`` and ``figures/``.

    Raises
    ------
    InputError
        If the folder exists.
    OSError
        If it cannot be written.
    """
    with new_folder(folder) as made:
        _fill(review, made)
    return Path(folder)


def review_into(
    folder: str | Path,
    ladder: Ladder,
    claims: Claims,
    *,
    seed: int = 1,
    progress: Progress | None = None,
) -> Review:
    """Review claims and write them into a new folder, refused before any work if it exists.

    Parameters and errors are those of `ladderfit.review.review` and `write_review`.
    """
    with new_folder(folder) as made:
        found = review_claims(ladder, claims, seed=seed, progress=progress)
        if progress is not None:
            progress("drawing figures", 0.0)
        _fill(found, made)
    return found


def _fill(review: Review, folder: Path) -> None:
    names = _figures(review, folder / "figures")
    images = {number: (folder / "figures" / name).read_bytes() for number, name in names.items()}
    paths = {number: f"figures/{name}" for number, name in names.items()}
    (folder / "review.html").write_text(html_page(review, images), encoding="utf-8")
    (folder / "review.md").write_text(markdown_page(review, paths), encoding="utf-8")
    text = json.dumps(verdicts_of(review), indent=2, ensure_ascii=False)
    (folder / "verdicts.json").write_text(text + "\n", encoding="utf-8")


def _figures(review: Review, folder: Path) -> dict[int, str]:
    """Draw every claim's figure as PNG and PDF; returns the PNG's name by claim."""
    folder.mkdir()
    names = {}
    for number, found in enumerate(review.claims, start=1):
        figure = review_figure(found)
        if figure is None:
            continue
        stem = folder / f"claim-{number:02d}"
        save_figure(figure, [stem.with_suffix(suffix) for suffix in (".pdf", ".png")])
        names[number] = f"{stem.name}.png"
    return names


def verdicts_of(review: Review) -> dict[str, Any]:
    """The verdicts and the numbers behind them, for programs."""
    sources = {key: source.sha256 for key, source in review.ladder.sources.items()}
    return {
        "title": review.title,
        "seed": review.seed,
        "draws": review.draws,
        "sha256": sources,
        "claims": [_claim(found) for found in review.claims],
    }


def _claim(found: ClaimReview) -> dict[str, Any]:
    claim = found.claim
    return {
        "quantity": claim.quantity,
        "value": claim.value,
        "error": claim.error,
        "unit": claim.unit,
        "paper": claim.paper,
        "verdicts": [{"name": v.name, "evidence": v.evidence} for v in found.verdicts],
        "refits": [
            {
                "way": refit.words,
                "value": refit.value,
                "error": refit.error,
                "spread": refit.spread,
                "stars": refit.stars,
            }
            for refit in found.refits
        ],
        "fewest_stars": None if found.smallest is None else found.smallest.size,
    }
