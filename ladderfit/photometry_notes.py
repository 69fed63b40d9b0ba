"""What a reader should know of a free ratio, shared errors and limits, in plain sentences."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from ladderfit.choices import Choices
from ladderfit.samples import StarSample

_RATIO = {
    "intrinsic relation": "the ratio is free; what is intrinsic colour and what is dust rests on "
    "the priors of intrinsic_colour_scatter and intrinsic_colour_term",
    "one population": "the ratio is free, and intrinsic colour and dust share it: it is the slope "
    "of magnitude with colour among stars of a period, no reddening law "
    '(relation.reddening.colours = "intrinsic relation" tells the two apart)',
    "in the variance": "the ratio is free, and the colours' errors only widen the magnitudes': it "
    "comes out diluted and is no reddening law "
    '(relation.reddening.colours = "intrinsic relation" would be one)',
}


def photometry_notes(choices: Choices, samples: Sequence[StarSample]) -> Iterator[str]:
    """Notes on the photometric choices in force."""
    reddening, cepheids = choices.relation.reddening, choices.cepheids
    hosts = [stars for stars in samples if stars.parallax is None]
    count = sum(len(stars) for stars in hosts)
    if reddening != "fixed" and samples:
        yield _RATIO[reddening.colours]
    if cepheids is None or not hosts:
        return
    limited = sum(_limited(stars) for stars in hosts)
    if limited and cepheids.completeness is not None:
        yield (
            f"magnitude limits in {cepheids.completeness.band} are accounted for in hosts with "
            f"{limited:,} stars, conditional on each star's own colour"
        )
    if count and (reddening != "fixed" or limited):
        yield f"{count:,} Cepheids are summed one by one in every draw, which takes longer"


def _limited(stars: StarSample) -> int:
    return 0 if stars.headroom is None else int(np.isfinite(stars.headroom).sum())
