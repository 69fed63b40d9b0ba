"""One sample of parallax stars under several distance priors, side by side."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import pandas as pd

from ladderfit.errors import InputError
from ladderfit.ladder import Ladder
from ladderfit.result import Result
from ladderfit.sampling.run import draw

_KEY = "anchors.parallaxes"

PRIORS: Mapping[str, Any] = {
    "flat in modulus": "flat in modulus",
    "uniform in volume": "uniform in volume",
    "exponential, 2 kpc": {"exponential": 2.0},
    "disc, 2.5 and 0.1 kpc": {"disc": {"length": 2.5, "height": 0.1}},
}


def along_distance_priors(
    ladder: Ladder,
    priors: Mapping[str, Any] = PRIORS,
    *,
    seed: int | None = None,
    draws: int | None = None,
    progress: Callable[[float], None] | None = None,
) -> dict[str, Result]:
    """Draw a ladder's posterior under each distance prior of its parallax stars.

    All else stays as it is, the selection included.

    Parameters
    ----------
    ladder : Ladder
        With parallax stars.
    priors : mapping of str to value
        Values of the key anchors.parallaxes.distance_prior, by what to call them.
    seed, draws : int, optional
        In place of the ladder's own.
    progress : callable, optional
        Told the fraction done.

    Returns
    -------
    dict of str to Result
        In the order of `priors`; those that the ladder's tables or choices do not
        allow (a disc without positions, a flat prior with a selection and no bounds)
        are left out.

    Raises
    ------
    InputError
        If the ladder has no parallax stars, or allows none of the priors.
    """
    found: dict[str, Result] = {}
    refused: list[InputError] = []
    for place, (name, prior) in enumerate(priors.items()):
        if progress is not None:
            progress(place / len(priors))
        changes: dict[str, Any] = {f"{_KEY}.distance_prior": prior}
        if prior != "flat in modulus":
            changes[f"{_KEY}.modulus_bounds"] = None
        try:
            changed = ladder.change(changes)
        except InputError as error:
            refused.append(error)
            continue
        found[name] = draw(changed, seed=seed, draws=draws)
    if not found and refused:
        raise refused[0]
    return found


def comparison(results: Mapping[str, Result]) -> pd.DataFrame:
    """Zero point and offset under each prior: a row per prior.

    Returns
    -------
    DataFrame
        Columns zero_point, zero_point_sd [mag], parallax_offset, parallax_offset_sd
        [mas]; NaN where there is no common offset.
    """
    rows = {}
    for label, result in results.items():
        row: dict[str, float] = {}
        for name in ("zero_point", "parallax_offset"):
            known = name in result.draws
            row[name] = result.mean(name) if known else float("nan")
            row[f"{name}_sd"] = result.sd(name) if known else float("nan")
        rows[label] = row
    return pd.DataFrame.from_dict(rows, orient="index")
