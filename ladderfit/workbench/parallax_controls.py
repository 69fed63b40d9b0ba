"""Controls of the parallax sample: distance prior, residual offset, selection."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from ladderfit.choices import Choices
from ladderfit.choices.parallaxes import Disc, Parallaxes
from ladderfit.ladder import Ladder
from ladderfit.priors import Fixed, LogNormal, Normal, Prior
from ladderfit.schema import written
from ladderfit.workbench.controls import Changes, Control, menu, number, span, switch
from ladderfit.workbench.selection_controls import selection_control

KEY = "anchors.parallaxes"
FLAT, BOUNDED, VOLUME = "flat in modulus", "flat within bounds", "uniform in volume"
FIXED, FREE, DISC = "exponential, fixed", "exponential, free", "exponential disc"
_LENGTH, _FREE_SD = 2.0, 1.5  # kpc, and mag of the prior of a free length: a factor of two
_DISC = {"length": 2.5, "height": 0.1}  # kpc
_BOUNDS = (6.0, 16.0)  # mag
_NORMAL, _FIXED, _OTHER = "free, normal prior", "fixed", "as in the file"


def parallax_controls(ladder: Ladder) -> Iterator[Control]:
    """Use, distance prior, offset and selection of the parallax stars, if there are any."""
    if ladder.choices.anchors.parallaxes is None:
        return
    yield switch("Parallaxes of Milky Way Cepheids", f"{KEY}.use", lambda c: _stars(c).use)
    yield _distance_prior(ladder.choices)
    yield _offset(ladder.choices)
    yield selection_control(ladder)


def _stars(choices: Choices) -> Parallaxes:
    """The section, which is there as long as its controls are."""
    stars = choices.anchors.parallaxes
    if stars is None:
        raise LookupError(KEY)
    return stars


def prior_kind(choices: Choices) -> str:
    """Which of the distance priors is in force."""
    stars = _stars(choices)
    if stars.disc is not None:
        return DISC
    if stars.exponential is not None:
        return FIXED if isinstance(choices.prior("distance_length"), Fixed) else FREE
    if stars.distance_prior == FLAT and stars.modulus_bounds is not None:
        return BOUNDED
    return str(stars.distance_prior)


def _distance_prior(start: Choices) -> Control:
    """The kind, and below it the numbers that the kind has."""
    stars = _stars(start)
    length = _LENGTH if stars.exponential is None else stars.exponential
    disc = _DISC if stars.disc is None else written(stars.disc)
    bounds = list(_BOUNDS if stars.modulus_bounds is None else stars.modulus_bounds)
    stated = start.priors.get("distance_length")
    free = {"log_normal": [length, _FREE_SD]}
    free = free if stated is None or isinstance(stated, Fixed) else stated.written()

    def write(kind: str, _: Choices) -> Changes:
        densities: dict[str, Any] = {FIXED: {"exponential": length}, FREE: {"exponential": length}}
        densities[DISC] = {"disc": disc}
        return {
            f"{KEY}.distance_prior": densities.get(kind, VOLUME if kind == VOLUME else FLAT),
            f"{KEY}.modulus_bounds": bounds if kind == BOUNDED else None,
            "priors.distance_length": free if kind == FREE else None,
        }

    def is_kind(*kinds: str) -> Any:
        return lambda choices: prior_kind(choices) in kinds

    under = [
        span(
            "Between moduli",
            f"{KEY}.modulus_bounds",
            (0.0, 25.0),
            lambda c: _stars(c).modulus_bounds or _BOUNDS,
            unit="mag",
            log=False,
            when=is_kind(BOUNDED),
        ),
        number(
            "Scale length",
            (0.1, 20.0),
            _length,
            _write_length,
            unit="kpc",
            log=True,
            when=is_kind(FIXED, FREE),
        ),
        _of_disc("Scale length", "length", (0.5, 10.0)),
        _of_disc("Scale height", "height", (0.02, 2.0)),
    ]
    kinds = [(words, words) for words in (FLAT, BOUNDED, VOLUME, FIXED, FREE, DISC)]
    return menu("Prior of distances", kinds, prior_kind, write, under=under)


def _length(choices: Choices) -> float:
    """The fixed scale length, or the typical one of its prior [kpc]."""
    prior = choices.prior("distance_length")
    return float(prior.median if isinstance(prior, LogNormal) else prior.centre)


def _write_length(value: float, choices: Choices) -> Changes:
    changes: dict[str, Any] = {f"{KEY}.distance_prior": {"exponential": value}}
    prior = choices.prior("distance_length")
    if isinstance(prior, LogNormal):
        changes["priors.distance_length"] = {"log_normal": [value, prior.deviation]}
    elif "distance_length" in choices.priors:
        changes["priors.distance_length"] = None
    return changes


def _of_disc(words: str, field: str, ends: tuple[float, float]) -> Control:
    def read(choices: Choices) -> float:
        disc = _stars(choices).disc or Disc(**_DISC)
        return float(getattr(disc, field))

    def write(value: float, choices: Choices) -> Changes:
        disc = _stars(choices).disc or Disc(**_DISC)
        return {f"{KEY}.distance_prior": {"disc": {**written(disc), field: value}}}

    return number(
        words, ends, read, write, unit="kpc", log=True, when=lambda c: prior_kind(c) == DISC
    )


def _offset(start: Choices) -> Control:
    """The prior of the residual offset: its family, and below it the family's numbers."""
    key, stated = "priors.parallax_offset", start.prior("parallax_offset")
    width = stated.deviation if isinstance(stated, Normal) else 0.02

    def family(prior: Prior) -> str:
        if isinstance(prior, Normal):
            return _NORMAL
        return _FIXED if isinstance(prior, Fixed) else _OTHER

    def kind(choices: Choices) -> str:
        return family(choices.prior("parallax_offset"))

    def centre(choices: Choices) -> float:
        return float(choices.prior("parallax_offset").centre)

    def write(chosen: str, choices: Choices) -> Changes:
        if chosen == _OTHER:
            return {key: stated.written()}
        fixed = {"fixed": centre(choices)}
        return {key: fixed if chosen == _FIXED else {"normal": [centre(choices), width]}}

    def write_centre(value: float, choices: Choices) -> Changes:
        prior = choices.prior("parallax_offset")
        if isinstance(prior, Normal):
            return {key: {"normal": [value, prior.deviation]}}
        return {key: {"fixed": value}}

    def write_width(value: float, choices: Choices) -> Changes:
        return {key: {"normal": [centre(choices), value]}}

    families = [_NORMAL, _FIXED] + ([_OTHER] if family(stated) == _OTHER else [])
    under = [
        number(
            "Value, or centre of its prior",
            (-0.06, 0.06),
            centre,
            write_centre,
            unit="mas",
            when=lambda c: kind(c) != _OTHER,
        ),
        number(
            "Width of its prior",
            (0.001, 0.1),
            lambda c: float(c.prior("parallax_offset").sd),
            write_width,
            unit="mas",
            log=True,
            when=lambda c: kind(c) == _NORMAL,
        ),
    ]
    return menu("Residual offset", [(f, f) for f in families], kind, write, under=under)
