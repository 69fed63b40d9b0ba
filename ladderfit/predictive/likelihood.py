"""Log prior and log likelihood of every draw, theta and host moduli included.

The draws have everything but the moduli of parallax stars and, where the inputs have
errors, true metallicities: these are integrated out, with the populations that are
part of the data's model.  Where outliers are modelled, moduli of hosts are integrated
out too, as each is then one integral over its host's mixture of stars.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import log_ndtr

from ladderfit.errors import LadderfitError
from ladderfit.influence.given import Given, coordinates
from ladderfit.kernels.arrow import LOG_2PI
from ladderfit.names import base_name, with_group
from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.posterior.moduli import log_modulus_norm, tilt_of
from ladderfit.priors import Fixed, LogNormal, Prior
from ladderfit.result import Result
from ladderfit.samples import FloatArray

OF_THE_DATA = ("shared_error", "parallax_field")  # their unit normals are errors of data
_DOUBT = 6.0  # standard errors by which the check of chi squared may be off


@dataclass(frozen=True, eq=False)
class LogTerms:
    """Log densities of the draws that were looked at, shape (s,) each.

    Attributes
    ----------
    draws : mapping of str to array, shape (s,)
        The parameters, in the order of the result.
    priors : mapping of str to array
        By parameter with a prior that is not fixed.
    likelihood : array
        Of all data, anchors included.
    """

    draws: dict[str, FloatArray]
    priors: dict[str, FloatArray]
    likelihood: FloatArray


def log_terms(result: Result, most: int = 4000) -> LogTerms:
    """Log prior by parameter, and log likelihood, of at most `most` draws.

    A log-normal prior counts as a normal one in 5 log10 of its parameter, the
    quantity in which the ladder is linear.

    Raises
    ------
    LadderfitError
        If the ladder's posterior holds more than this knows, or its tables are missing.
    """
    joint = posterior(result.ladder)
    z = coordinates(joint, result, most)
    if z.size:
        joint.focus(z.min(axis=0), z.max(axis=0))
    step = max(1, -(-result.size // most))
    draws = {name: values[::step] for name, values in result.draws.items()}
    integrated = joint.robust is not None
    gaussian = (_integrated if integrated else _gaussian)(joint, z, draws)
    parts = joint.split
    priors, of_theta = {}, np.zeros(len(z))
    for name in (*parts.coefficients, *parts.phi_names):
        prior = result.choices.prior(name)
        if isinstance(prior, Fixed) or name in priors:
            continue
        density = _log_density(prior, draws[name])
        if name in parts.theta:
            density = parts.theta_prior[parts.theta.index(name)].log_density(
                _coefficient(joint, name, draws[name])
            )
            of_theta += density
        if base_name(name) not in OF_THE_DATA:
            priors[name] = density
    likelihood = gaussian - of_theta
    if not integrated:
        likelihood = likelihood - _log_modulus_priors(joint, draws)
    if joint.parallaxes is not None:
        likelihood = likelihood + joint.log_parallaxes(z).sum(axis=1)
    return LogTerms(draws, priors, likelihood)


def _log_density(prior: Prior, values: FloatArray) -> FloatArray:
    if isinstance(prior, LogNormal):
        return prior.in_magnitudes().log_density(5.0 * np.log10(values))
    return prior.log_density(values)


def _coefficient(joint: Posterior, name: str, values: FloatArray) -> FloatArray:
    return 5.0 * np.log10(values) if name in joint.split.logarithmic else values


def _gaussian(joint: Posterior, z: FloatArray, draws: dict[str, FloatArray]) -> FloatArray:
    """Log density of data, theta's priors and moduli at the draws of theta."""
    given = Given(joint, z, ())
    moments, frame = given.solution.moments, joint.frame
    columns = [_coefficient(joint, name, draws[name]) for name in joint.split.coefficients]
    coefficients = np.stack(columns, axis=1) if columns else np.empty((len(z), 0))
    moduli = [draws[with_group("modulus", host)] for host in joint.ladder.hosts]
    local = np.empty((len(z), 0))
    if moduli:
        local = np.stack(moduli, axis=1) - frame.origin + coefficients @ frame.centroid.T

    def at(local: FloatArray, coefficients: FloatArray) -> FloatArray:
        signed = np.concatenate([coefficients, np.full((len(z), 1), -1.0)], axis=1)
        total = np.einsum("si,sij,sj->s", signed, moments.square, signed)
        total += np.einsum("sh,shk,sk->s", local, 2.0 * moments.cross, signed)
        total += np.sum(moments.local * local**2, axis=1)
        if moments.coupling is not None and moments.coupled is not None:
            some = local[:, moments.coupled]
            total += np.einsum("si,sij,sj->s", some, moments.coupling, some)
        return np.asarray(moments.constant - 0.5 * total)

    found = at(local, coefficients)
    whole = given.solution.log_evidence + joint.split.log_prior(z)
    whole = whole + joint.log_parallaxes(z).sum(axis=1)
    if joint.limits is None:
        square = 2.0 * (at(given.locals.mean, given.solution.coefficients) - found)
        _check(square, len(given.solution.free) + local.shape[1])
    else:
        whole = whole + joint.limits.log_factor(given.solution, given.value)
        lead, width = joint.limits.leads(given.value, coefficients)
        runs = joint.limits.runs
        host = np.repeat(runs[:, 0], runs[:, 2] - runs[:, 1])
        found = found - np.sum(log_ndtr((lead - local[:, host]) / width), axis=1)
    if len(z) and not np.allclose(whole, joint.log_density(z), rtol=0.0, atol=1e-6):
        _refuse()
    return found


def _integrated(joint: Posterior, z: FloatArray, draws: dict[str, FloatArray]) -> FloatArray:
    """Log density of data and theta at the draws, moduli integrated out.

    It is the evidence of phi times the density of theta given phi.
    """
    solution, names = joint.solution(z), joint.split.coefficients
    columns = [_coefficient(joint, names[i], draws[names[i]]) for i in solution.free.tolist()]
    off = np.stack(columns, axis=1) - solution.mean if columns else solution.mean
    white = np.einsum("sji,sj->si", solution.factor, off)
    logs = np.log(np.diagonal(solution.factor, axis1=1, axis2=2)).sum(axis=1)
    normal = logs - 0.5 * np.sum(white**2, axis=1) - 0.5 * white.shape[1] * LOG_2PI
    return np.asarray(solution.log_evidence + normal)


def _check(square: FloatArray, freedom: int) -> None:
    """Draws of theta given phi have distances of chi squared from its mean."""
    error = np.sqrt(2.0 * max(freedom, 1) / max(len(square), 1))
    if freedom and abs(float(np.mean(square)) - freedom) > _DOUBT * error:
        _refuse()


def _refuse() -> None:
    raise LadderfitError(
        "the sensitivity to priors does not cover this ladder yet: its posterior holds more "
        "than its rows, anchors and priors; change the priors and draw anew instead"
    )


def _log_modulus_priors(joint: Posterior, draws: dict[str, FloatArray]) -> FloatArray:
    prior = joint.ladder.choices.hosts.distance_prior
    total = np.zeros(len(next(iter(draws.values()))))
    for host in joint.ladder.hosts:
        modulus = draws[with_group("modulus", host)]
        total += tilt_of(prior) * modulus - log_modulus_norm(prior)
    return total
