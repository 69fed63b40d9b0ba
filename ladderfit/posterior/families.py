"""Which stars share a law of deviations, and what its parameters are called."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from ladderfit.choices import Choices, Outliers
from ladderfit.choices.outliers import MIXTURE
from ladderfit.ladder import Ladder
from ladderfit.names import with_group
from ladderfit.relations import members, scatters
from ladderfit.samples import IntArray, StarSample

CEPHEIDS, PARALLAXES = "", "parallax_"  # what names of parameters start with
_OWN = ("outlier_fraction", "outlier_width", "outlier_offset", "degrees_of_freedom")


@dataclass(frozen=True)
class Family:
    """Stars whose deviations have one law.

    Attributes
    ----------
    treatment : str
        ``mixture`` or ``Student-t``.
    scatter : str
        The intrinsic scatter's name.
    fraction, width, offset, freedom : str
        Names of the law's own parameters; which of them it has depends on the treatment.
    """

    treatment: str
    scatter: str
    fraction: str
    width: str
    offset: str
    freedom: str

    @property
    def own(self) -> tuple[str, ...]:
        """Names of the parameters it has, apart from the scatter."""
        if self.treatment == MIXTURE:
            return (self.fraction, self.width, self.offset)
        return (self.freedom,)


def families(
    ladder: Ladder, stars: StarSample, outliers: Outliers, prefix: str = CEPHEIDS
) -> tuple[tuple[Family, ...], IntArray]:
    """The families that occur in a sample, and which of them each star belongs to, shape (n,)."""
    choices = ladder.choices
    names, which = scatters(choices, stars, ladder.hosts)
    index = np.zeros(len(stars), dtype=np.int64)
    for place, group in reversed(list(enumerate(outliers.groups, start=1))):
        index[members(choices.groups[group], stars, ladder.hosts)] = place
    both = which * (len(outliers.groups) + 1) + index
    used, compact = np.unique(both, return_inverse=True)

    def named(name: str, group: int) -> str:
        whole = f"{prefix}{name}"
        return with_group(whole, outliers.groups[group - 1]) if group else whole

    found = []
    for code in used.tolist():
        scatter, group = divmod(code, len(outliers.groups) + 1)
        own = (named(name, group) for name in _OWN)
        found.append(Family(outliers.treatment, names[scatter], *own))
    return tuple(found), compact.astype(np.int64)


def outliers_of(choices: Choices, prefix: str = CEPHEIDS) -> Outliers | None:
    """The robust treatment of Cepheids in hosts, or of parallax stars; None where there is none."""
    section = choices.cepheids if prefix == CEPHEIDS else choices.anchors.parallaxes
    return None if section is None or not section.outliers.robust else section.outliers


def outlier_parameters(ladder: Ladder) -> Iterator[str]:
    """Names of all parameters of outliers, each once."""
    seen: set[str] = set()
    samples = {CEPHEIDS: ladder.cepheids, PARALLAXES: ladder.parallax_stars}
    for prefix, stars in samples.items():
        outliers = outliers_of(ladder.choices, prefix)
        if outliers is None or stars is None:
            continue
        for family in families(ladder, stars, outliers, prefix)[0]:
            yield from (name for name in family.own if name not in seen)
            seen.update(family.own)
