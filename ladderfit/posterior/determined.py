"""What the data determine, before anything is drawn.

The information of all data rows (parallax stars in linear order), without the
default priors, is searched for directions it leaves free.  A zero point, modulus,
peak magnitude or Hubble constant with a part in such a direction is undetermined:
its posterior would only repeat a default prior.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from ladderfit.errors import Problem, SamplingError, UndeterminedError
from ladderfit.names import base_name, parameter, with_group
from ladderfit.posterior.cepheids import plain_rows
from ladderfit.posterior.joint import Posterior
from ladderfit.posterior.parallaxes import ParallaxTerms
from ladderfit.posterior.supernovae import ladder_rows
from ladderfit.priors import Fixed

FloatArray = npt.NDArray[np.float64]

_SCALE = ("zero_point", "peak_magnitude", "hubble_constant", "modulus")
_TYPICAL = {"scatter": 0.1, "peak_scatter": 0.1, "velocity_scatter": 100.0}
_FREE = 1e-9  # relative information below which a direction counts as free
_ROUNDING = 1e-10  # of a direction of unit length


def undetermined(posterior: Posterior) -> tuple[str, ...]:
    """Names of coefficients and moduli that neither data nor stated priors determine.

    Raises
    ------
    SamplingError
        If a number in the tables is so absurd that sums over them overflow.
    """
    information, names, forms = _information(posterior)
    if not np.isfinite(information).all():
        raise SamplingError(
            "sums over the data overflow: look for absurd numbers in the tables and the priors"
        )
    size = np.sqrt(np.diag(information))
    scale = np.where(size > 0.0, size, 1.0)
    values, vectors = np.linalg.eigh(information / np.outer(scale, scale))
    free = vectors[:, values < _FREE * max(float(values.max(initial=0.0)), 1e-300)]
    free = free / scale[:, None]
    part = np.abs(forms @ free).max(axis=1, initial=0.0)
    whole = np.abs(forms) @ np.abs(free).max(axis=1, initial=0.0) if free.size else part
    noise = _ROUNDING * np.abs(forms) @ (1.0 / scale)  # what the eigenvectors are good to
    loose = part > np.maximum(1e-6 * whole, noise)
    return tuple(name for name, is_loose in zip(names, loose, strict=True) if is_loose)


def check_determined(posterior: Posterior) -> None:
    """Raise if the distance scale is undetermined.

    Raises
    ------
    UndeterminedError
        Naming what is undetermined and what would determine it.
    """
    every = undetermined(posterior)
    loose = [name for name in every if base_name(name) in _SCALE]
    if not loose:
        return
    words = list(dict.fromkeys(parameter(name).words for name in loose))
    moduli = sum(base_name(name) == "modulus" for name in loose)
    listed = ", ".join(
        f"{word} ({moduli} host{'s' if moduli > 1 else ''})" if word == "distance modulus" else word
        for word in words
    )
    ladder = posterior.ladder
    anchored = bool(ladder.geometric) or ladder.parallax_stars is not None
    found = "no anchor for these" if anchored else "no anchor in use"
    priors = [name for name in dict.fromkeys(map(base_name, loose)) if name != "modulus"]
    example = f"priors.{priors[0]}" if priors else "priors.zero_point"
    offsets = [name for name in every if base_name(name) == "zero_point_offset"]
    if anchored and offsets:  # a group's own zero point stands between anchor and hosts
        example = f'priors."{offsets[0]}"'
    raise UndeterminedError(
        Problem(
            found=f"{found}, so undetermined: {listed}",
            expected="at least one anchor (a geometric modulus or parallaxes) that they rest on",
            remedy=f"set an anchor's use = true, add one, or state a prior of your own ({example})",
            key="anchors",
            file=None if ladder.path is None else str(ladder.path),
        )
    )


def _information(posterior: Posterior) -> tuple[FloatArray, tuple[str, ...], FloatArray]:
    """Information of (coefficients, locals), with names and linear forms of the parameters."""
    parts, frame, ladder = posterior.split, posterior.frame, posterior.ladder
    k, hosts = len(parts.coefficients), frame.hosts
    information = np.zeros((k + hosts, k + hosts))
    for block, scatter in [
        *plain_rows(ladder, frame),
        *ladder_rows(ladder, frame, parts.coefficients),
    ]:
        extra = 0.0 if scatter is None else _TYPICAL[base_name(scatter)] ** 2
        sums = block.moments(np.array([extra]))
        information[:k, :k] += sums.square[0, :-1, :-1]
        information[k:, :k] += sums.cross[0, :, :-1]
        information[k:, k:] += np.diag(sums.local[0])
    for anchor in ladder.geometric:
        form = np.zeros(k + hosts)
        form[:k], form[k + anchor.host] = -frame.centroid[anchor.host], 1.0
        information += np.outer(form, form) / anchor.error**2
    if posterior.parallaxes is not None:
        places = [parts.coefficients.index(name) for name in posterior.parallaxes.coefficients]
        information[np.ix_(places, places)] += _parallax_information(posterior.parallaxes)
    for place, name in enumerate(parts.coefficients):
        prior = ladder.choices.prior(name)
        if ladder.choices.states_prior(name):
            sd = 1e-6 if isinstance(prior, Fixed) else max(prior.sd, 1e-6)
            information[place, place] += 1.0 / sd**2
    for place, name in enumerate(parts.coefficients):
        information[place, place] += base_name(name) == "shared_error"
        if base_name(name) == "survey_offset":  # its prior says how well surveys agree
            information[place, place] += 1.0 / ladder.choices.prior(name).sd ** 2
    information[:k, k:] = information[k:, :k].T
    forms = np.eye(k + hosts)
    forms[k:, :k] = -frame.centroid
    names = (*parts.coefficients, *(with_group("modulus", host) for host in ladder.hosts))
    return information, names, forms


def _parallax_information(terms: ParallaxTerms) -> FloatArray:
    signal = np.maximum(terms.parallax / terms.parallax_error, 0.1)
    variance = terms.variance + 0.1**2 + (5.0 / np.log(10.0) / signal) ** 2
    return np.asarray((terms.design / variance[:, None]).T @ terms.design)
