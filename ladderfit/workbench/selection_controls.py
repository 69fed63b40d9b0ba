"""Controls of the parallax sample's selection: what the file says, changed or switched off."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np

from ladderfit.choices import Choices
from ladderfit.choices.parallaxes import Selection
from ladderfit.ladder import Ladder
from ladderfit.samples import FloatArray
from ladderfit.schema import written
from ladderfit.workbench.controls import Changes, Control, menu, number

KEY = "anchors.parallaxes"
NONE, MAGNITUDE, PARALLAX, BOTH = "none", "magnitude limit", "parallax limit", "both limits"
_BLUEST = ("V", "G")  # in which limits are usually stated


def selection_kind(choices: Choices) -> str:
    """Which limits the fit accounts for."""
    chosen = _stated(choices)
    if chosen is None:
        return NONE
    if chosen.limit is None:
        return PARALLAX
    return MAGNITUDE if chosen.parallax_min is None else BOTH


def _stated(choices: Choices) -> Selection | None:
    stars = choices.anchors.parallaxes
    return None if stars is None else stars.selection


def selection_control(ladder: Ladder) -> Control:
    """The kind of limit, and below it the limits."""
    known = _Limits(ladder)
    kinds = [NONE, MAGNITUDE, PARALLAX, BOTH] if known.bands else [NONE, PARALLAX]
    return menu(
        "Selection",
        [(kind, kind) for kind in kinds],
        selection_kind,
        known.switched,
        under=known.controls(),
    )


class _Limits:
    """What the table says of limits, for a start where the file has none."""

    def __init__(self, ladder: Ladder) -> None:
        self._ladder = ladder
        stars, cepheids = ladder.choices.anchors.parallaxes, ladder.choices.cepheids
        magnitude = None if stars is None else stars.magnitude
        if magnitude is None and cepheids is not None:
            magnitude = cepheids.magnitude
        self.bands = {} if magnitude is None else dict(magnitude.bands)
        self.stated = _stated(ladder.choices) or Selection()
        if self.stated.band is not None:
            self.bands.setdefault(self.stated.band, self.stated.band)
        usual = next((band for band in _BLUEST if band in self.bands), next(iter(self.bands), ""))
        self._band = self.stated.band or usual

    def switched(self, kind: str, choices: Choices) -> Changes:
        """Changes that account for a kind of limit: stated ones, or those that lose no star."""
        own, chosen = _stated(choices) or self.stated, dict[str, Any]()
        if kind in (MAGNITUDE, BOTH):
            chosen |= self._magnitude(own.band or self._band, own)
        if kind in (PARALLAX, BOTH):
            known = (own.parallax_min, self.stated.parallax_min, self._least_parallax())
            chosen["parallax_min"] = next(value for value in known if value is not None)
        return {f"{KEY}.selection": chosen or None}

    def controls(self) -> list[Control]:
        """Band, limit, softness; least parallax."""
        faint = [self._faintest(band) for band in self.bands] or [20.0]
        limit = number(
            "Faintest magnitude",
            (min(faint) - 6.0, max(faint) + 4.0),
            lambda choices: self._now(choices).limit or max(faint),
            _part("limit"),
            unit="mag",
            when=_has(MAGNITUDE, BOTH),
        )
        softness = number(
            "Softness (0: sharp)",
            (0.0, 1.0),
            lambda choices: self._now(choices).softness,
            _part("softness"),
            unit="mag",
            when=_has(MAGNITUDE, BOTH),
        )
        least = number(
            "Least parallax",
            (-0.5, 2.0),
            lambda choices: self._now(choices).parallax_min or 0.0,
            _part("parallax_min"),
            unit="mas",
            when=_has(PARALLAX, BOTH),
        )
        return [self._band_menu(), limit, softness, least]

    def _band_menu(self) -> Control:
        def write(band: str, choices: Choices) -> Changes:
            own = self._now(choices)
            plain = {**written(own), **self._magnitude(band, own)}
            return {f"{KEY}.selection": plain}

        return menu(
            "Band of the limit",
            [(band, band) for band in self.bands],
            lambda choices: self._now(choices).band,
            write,
            when=_has(MAGNITUDE, BOTH),
        )

    def _now(self, choices: Choices) -> Selection:
        return _stated(choices) or self.stated

    def _magnitude(self, band: str, own: Selection) -> dict[str, Any]:
        limit = next((s.limit for s in (own, self.stated) if s.band == band), None)
        limit = self._faintest(band) if limit is None else limit
        return {"band": band, "limit": limit, "softness": own.softness}

    def _faintest(self, band: str) -> float:
        """The faintest star's magnitude, rounded so that it stays."""
        cells = self._cells(self.bands[band])
        return math.ceil(10.0 * float(np.max(cells))) / 10.0 if len(cells) else 20.0

    def _least_parallax(self) -> float:
        """The least parallax, rounded so that it stays."""
        stars = self._ladder.choices.anchors.parallaxes
        cells = self._cells(stars.columns["parallax"]) if stars is not None else np.empty(0)
        return math.floor(100.0 * float(np.min(cells))) / 100.0 if len(cells) else 0.0

    def _cells(self, column: str) -> FloatArray:
        """The finite numbers of a column."""
        table = self._ladder.table(KEY)
        if table is None or column not in table.columns:
            return np.empty(0)
        values = np.asarray(table.columns[column].values, dtype=float)
        return np.asarray(values[np.isfinite(values)])


def _part(field: str) -> Callable[[float, Choices], Changes]:
    return lambda value, _: {f"{KEY}.selection.{field}": value}


def _has(*kinds: str) -> Callable[[Choices], bool]:
    return lambda choices: selection_kind(choices) in kinds
