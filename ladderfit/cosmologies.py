"""Named cosmologies, of which only the shape of the expansion is used.

Names are those of `astropy.cosmology`: a published set of parameters such as
``Planck18``, or a class such as ``FlatLambdaCDM`` with parameters of one's own.
"""

from __future__ import annotations

import inspect
from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
import numpy.typing as npt
from astropy import cosmology

from ladderfit.errors import Problem, nearest
from ladderfit.units import LIGHT_SPEED

FloatArray = npt.NDArray[np.float64]

KINEMATIC = "kinematic"

_OURS = ("H0", "name", "meta")  # arguments of a class that are not the user's to give
_TRIAL = np.array([0.001, 0.1, 1.0])


def luminosity_shape(
    model: str, parameters: Mapping[str, float], redshift: npt.ArrayLike
) -> FloatArray:
    """Luminosity distance times H0 / c: what is left of a cosmology when H0 is free.

    Parameters
    ----------
    model : str
        A name known to astropy, not `KINEMATIC`.
    parameters : mapping of str to float
        Of a class; none for a published set.
    redshift : array_like
        Cosmological redshift, any shape.

    Raises
    ------
    ValueError
        If the model or a parameter is unknown or impossible.
    """
    found = _cosmology(model, parameters)
    z = np.asarray(redshift, dtype=float)
    distance = np.asarray(found.luminosity_distance(z).to_value("Mpc"), dtype=float)
    return np.asarray(distance * found.H0.to_value("km / (s Mpc)") / LIGHT_SPEED)


def cosmology_faults(model: str, parameters: Mapping[str, float]) -> Iterator[Problem]:
    """What is wrong with the choice of a cosmology."""
    if model == KINEMATIC:
        if parameters:
            yield _extra(parameters, "q0 and j0, which stand in [expansion] themselves")
        return
    known = {KINEMATIC, *_published(), *_classes()}
    if model not in known:
        yield Problem(
            found=f"the unknown cosmology {model!r}",
            expected=f"{KINEMATIC!r}, or a cosmology that astropy knows",
            remedy=nearest(model, known),
            key="model",
        )
        return
    accepted = _arguments(model)
    unknown = [name for name in parameters if name not in accepted]
    if unknown:
        words = "no parameters, as the published set has its own"
        yield _extra(unknown, f"among {', '.join(accepted)}" if accepted else words)
        return
    try:
        shape = luminosity_shape(model, parameters, _TRIAL)
        good = bool(np.all(np.isfinite(shape) & (shape > 0.0)))
        reason = "no finite distances"
    except (ValueError, TypeError, ZeroDivisionError) as error:
        good, reason = False, " ".join(str(error).split())[:160]
    if not good:
        yield Problem(
            found=reason,
            expected=f"parameters that give {model} distances up to redshift 1",
            remedy="correct or complete the parameters",
            key="parameters",
        )


def _extra(names: Mapping[str, float] | list[str], expected: str) -> Problem:
    first = next(iter(names))
    remedy = "take it out: H0 is fitted" if first == "H0" else "take it out, or correct its name"
    return Problem(f"the parameter {first!r}", expected, remedy, key="parameters")


def _published() -> tuple[str, ...]:
    return tuple(cosmology.available)


def _classes() -> dict[str, Any]:
    found = {}
    for name in dir(cosmology):
        value = getattr(cosmology, name)
        if inspect.isclass(value) and issubclass(value, cosmology.FLRW):
            found[name] = value
    del found["FLRW"]
    return {name: value for name, value in found.items() if not inspect.isabstract(value)}


def _arguments(model: str) -> tuple[str, ...]:
    if model in _published():
        return ()
    return tuple(n for n in inspect.signature(_classes()[model]).parameters if n not in _OURS)


def _cosmology(model: str, parameters: Mapping[str, float]) -> Any:
    if model in _published():
        return getattr(cosmology, model)
    if model not in _classes():
        raise ValueError(f"no cosmology is called {model!r}")
    return _classes()[model](H0=70.0, **parameters)
