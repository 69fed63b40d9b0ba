"""How the posterior is drawn."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from ladderfit.errors import Problem
from ladderfit.schema import choice


@dataclass(frozen=True)
class Sampling:
    """How the posterior is drawn."""

    sampler: Literal["direct", "ensemble"] = choice("which sampler", default="direct")
    draws: int = choice("number of draws", default=4000)
    seed: int = choice("seed of the random generator", default=1)

    def check(self) -> Iterator[Problem]:
        """Counts."""
        if not 100 <= self.draws <= 10_000_000:
            yield Problem(
                str(self.draws), "100 to 10,000,000 draws", "write 4000, say", key="draws"
            )
        if self.seed < 0:
            yield Problem(str(self.seed), "a seed of 0 or more", "write 1, say", key="seed")
