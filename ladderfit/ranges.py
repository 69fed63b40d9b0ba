"""What a calibration rests on: ranges of period, metallicity and colour, and systems."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from ladderfit.ladder import Ladder
from ladderfit.samples import FloatArray, StarSample

Range = tuple[float, float]

_SLACK = 1e-9  # a file keeps ten digits or more


@dataclass(frozen=True)
class Ranges:
    """What the Cepheids of a calibration cover, those with parallaxes included.

    Attributes
    ----------
    period, metallicity, colour : pair of float, or None
        Least and greatest value [d], on the scale of the choices [dex], [mag]; None
        where the calibration has none.
    systems : tuple of str
        Photometric systems of its stars; empty where its tables name none.
    """

    period: Range | None = None
    metallicity: Range | None = None
    colour: Range | None = None
    systems: tuple[str, ...] = ()

    def written(self) -> dict[str, Any]:
        """For provenance.json."""
        ends = {"period": self.period, "metallicity": self.metallicity, "colour": self.colour}
        found: dict[str, Any] = {name: list(pair) for name, pair in ends.items() if pair}
        return {**found, "systems": list(self.systems)} if self.systems else found

    @classmethod
    def read(cls, mapping: Mapping[str, Any]) -> Ranges:
        """The inverse of `written`.

        Raises
        ------
        TypeError, ValueError
            If an entry is not what `written` gives.
        """
        pairs = {}
        for name in ("period", "metallicity", "colour"):
            if name in mapping:
                low, high = mapping[name]
                pairs[name] = (float(low), float(high))
        return cls(**pairs, systems=tuple(str(name) for name in mapping.get("systems", ())))


def calibrated_ranges(ladder: Ladder) -> Ranges:
    """The ranges of the stars that take part in a calibration."""
    return ranges_of([s for s in (ladder.cepheids, ladder.parallax_stars) if s is not None])


def ranges_of(samples: list[StarSample]) -> Ranges:
    """The ranges of samples together."""
    return Ranges(
        period=_ends([10.0**stars.log_period for stars in samples]),
        metallicity=_ends([stars.metallicity for stars in samples]),
        colour=_ends([s.photometry.colour for s in samples if s.photometry is not None]),
        systems=tuple(
            sorted({str(name) for s in samples if s.system is not None for name in s.system})
        ),
    )


def _ends(parts: list[FloatArray]) -> Range | None:
    values = np.concatenate(parts) if parts else np.empty(0)
    known = values[np.isfinite(values)]
    return (float(known.min()), float(known.max())) if known.size else None


def outside(covered: Ranges, stars: StarSample | None, hosts: tuple[str, ...]) -> Iterator[str]:
    """Warnings, host by host, where new stars lie outside what a calibration covers.

    Parameters
    ----------
    covered : Ranges
    stars : StarSample or None
        New Cepheids.
    hosts : tuple of str
        Theirs.

    Yields
    ------
    str
        A sentence per host and quantity.
    """
    if stars is None:
        return
    colour = None if stars.photometry is None else stars.photometry.colour
    quantities: tuple[tuple[str, str, Range | None, FloatArray | None], ...] = (
        ("period", " d", covered.period, 10.0**stars.log_period),
        ("metallicity", " dex", covered.metallicity, stars.metallicity),
        ("colour", " mag", covered.colour, colour),
    )
    for place, host in enumerate(hosts):
        here = stars.host == place
        for words, unit, ends, values in quantities:
            if ends is not None and values is not None:
                yield from _beyond(host, words, unit, ends, values[here])
        if covered.systems and stars.system is not None:
            yield from _strange(host, covered.systems, [str(name) for name in stars.system[here]])


def _beyond(host: str, words: str, unit: str, ends: Range, values: FloatArray) -> Iterator[str]:
    low, high = ends
    slack = _SLACK * max(abs(low), abs(high))
    below, above = values < low - slack, values > high + slack
    count = int(np.sum(below | above))
    if count:
        reach = []
        if below.any():
            reach.append(f"down to {values.min():.3g}")
        if above.any():
            reach.append(f"up to {values.max():.3g}")
        yield (
            f"{host}: {count:,} of {len(values):,} Cepheids outside the calibrated {words}, "
            f"{low:.3g} to {high:.3g}{unit} ({' and '.join(reach)})"
        )


def _strange(host: str, known: tuple[str, ...], systems: list[str]) -> Iterator[str]:
    for name in dict.fromkeys(systems):
        if name not in known:
            yield (
                f"{host}: {systems.count(name):,} of {len(systems):,} Cepheids in the photometric "
                f"system {name!r}; the calibration has {', '.join(map(repr, known))}"
            )
