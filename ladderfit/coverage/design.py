"""The design prior: proper, stated, and used twice, to draw truths and to fit their mocks.

Ranks of truths are uniform if truths come from the prior of the fit (Cook, Gelman &
Rubin 2006, J. Comput. Graph. Stat. 15, 675).  A ladder's own priors are often so wide
that most truths would be absurd; by default the design prior is the ladder's own
posterior made wider, with all parameters independent.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from ladderfit.names import base_name, group_of, with_group
from ladderfit.priors import Fixed, HalfNormal, LogNormal, Normal, Prior, Uniform
from ladderfit.result import Result
from ladderfit.samples import FloatArray

WIDEN = 5.0
_CLEAR = 4.0  # errors by which a scatter must differ from zero to be logarithmic
_NEAR_ZERO = 2.0  # root mean squares, for a scatter that may be zero
_COVARIANCE = "anchors.covariance"
_WIDEST = 1.5  # mag of 5 log10 of a scatter: a factor of two


@dataclass(frozen=True)
class Design:
    """A prior on every parameter and every modulus, all independent.

    Attributes
    ----------
    priors : mapping of str to Prior
        By parameter.
    moduli : mapping of str to Normal
        By host [mag].
    """

    priors: Mapping[str, Prior]
    moduli: Mapping[str, Normal]

    def truth(self, rng: np.random.Generator) -> dict[str, float]:
        """One draw of everything, by parameter name; moduli as ``modulus[HOST]``."""
        found = {name: float(prior.draw(rng, 1)[0]) for name, prior in self.priors.items()}
        for host, prior in self.moduli.items():
            found[with_group("modulus", host)] = float(prior.draw(rng, 1)[0])
        return found

    def imposed(
        self, choices: Mapping[str, Any], tables: Mapping[str, Any]
    ) -> tuple[dict[str, Any], dict[str, Any]]:
        """Choices and tables of a mock with this prior in place of the ladder's own.

        A normal prior on moduli and measured ones are both normal in them: their
        product is one normal, which stands as the hosts' geometric anchors.  Errors that
        anchors share are summed over, so that they are no parameters any more.
        """
        anchors = dict(choices.get("anchors", {}))
        shared = anchors.pop("shared_errors", {})
        tied = bool(shared) or anchors.pop("covariance", None) is not None
        measured = dict(anchors.get("geometric", {}))
        kept = {key: table for key, table in tables.items() if key != _COVARIANCE}
        if tied:
            whole = _covariance(measured, shared, tables.get(_COVARIANCE))
            anchors["geometric"], kept[_COVARIANCE] = _joint_product(self.moduli, measured, whole)
        else:
            anchors["geometric"] = {
                host: _product(prior, measured.get(host)) for host, prior in self.moduli.items()
            }
        hosts = {**choices.get("hosts", {}), "distance_prior": "flat in modulus"}
        priors = {name: prior.written() for name, prior in self.priors.items()}
        imposed = {**choices, "anchors": anchors, "hosts": hosts, "priors": priors}
        return imposed, kept

    def table(self) -> pd.DataFrame:
        """One row per parameter: name and prior."""
        moduli = {with_group("modulus", host): prior for host, prior in self.moduli.items()}
        rows = [(name, str(prior)) for name, prior in {**self.priors, **moduli}.items()]
        return pd.DataFrame(rows, columns=["parameter", "prior"])


def design_of(result: Result, widen: float = WIDEN) -> Design:
    """The posterior of a ladder, `widen` times as wide.

    Coefficients and moduli are normal; scatters and what else is positive are
    log-normal, or half-normal where zero is not excluded.  No prior is wider than the
    ladder's own; uniform and fixed ones stay.

    Parameters
    ----------
    result : Result
        With its ladder.
    widen : float
    """
    priors: dict[str, Prior] = {}
    moduli: dict[str, Normal] = {}
    for name, draws in result.draws.items():
        if base_name(name) == "modulus":
            spread = widen * float(np.std(draws, ddof=1))
            moduli[str(group_of(name))] = Normal(float(np.mean(draws)), spread)
    for name in result.headline:
        if base_name(name) == "shared_error":  # summed over in the fits
            continue
        priors[name] = _wider(result.choices.prior(name), result.draws[name], widen)
    return Design(priors, moduli)


def _wider(own: Prior, draws: FloatArray, widen: float) -> Prior:
    if isinstance(own, Fixed | Uniform):
        return own
    mean, sd = float(np.mean(draws)), float(np.std(draws, ddof=1))
    if isinstance(own, Normal):
        return Normal(mean, min(widen * sd, own.deviation))
    if isinstance(own, HalfNormal) and mean < _CLEAR * sd:
        return HalfNormal(min(own.scale, _NEAR_ZERO * float(np.sqrt(np.mean(draws**2)))))
    magnitudes = 5.0 * np.log10(draws)
    limit = own.deviation if isinstance(own, LogNormal) else _WIDEST
    spread = min(widen * float(np.std(magnitudes, ddof=1)), limit)
    return LogNormal(float(10.0 ** (0.2 * np.mean(magnitudes))), spread)


def _product(prior: Normal, measured: Mapping[str, Any] | None) -> dict[str, Any]:
    """Prior and measurement of a modulus as one normal."""
    weight, total = prior.deviation**-2, prior.mean * prior.deviation**-2
    if measured is not None:
        own = float(measured["error"]) ** -2
        weight, total = weight + own, total + own * float(measured["modulus"])
    return {"modulus": total / weight, "error": float(weight**-0.5), "use": True}


def _covariance(
    measured: Mapping[str, Any], shared: Mapping[str, Any], given: FloatArray | None
) -> FloatArray:
    """Of the measured moduli, shared errors included, shape (n, n) [mag^2]."""
    errors = np.array([float(anchor["error"]) for anchor in measured.values()])
    whole = np.diag(errors**2) if given is None else np.array(given)
    for term in shared.values():
        loads = np.array([float(term["loads"].get(host, 0.0)) for host in measured])
        whole = whole + float(term["error"]) ** 2 * np.outer(loads, loads)
    return np.asarray(whole)


def _joint_product(
    moduli: Mapping[str, Normal], measured: Mapping[str, Any], covariance: FloatArray
) -> tuple[dict[str, Any], FloatArray]:
    """Prior and correlated measurements as one normal: anchors, and their covariance."""
    hosts = list(moduli)
    weight = np.diag([prior.deviation**-2 for prior in moduli.values()])
    total = weight @ np.array([prior.mean for prior in moduli.values()])
    places = [hosts.index(host) for host in measured]
    own = np.linalg.inv(covariance)
    weight[np.ix_(places, places)] += own
    total[places] += own @ np.array([float(each["modulus"]) for each in measured.values()])
    whole = np.linalg.inv(weight)
    whole = 0.5 * (whole + whole.T)
    mean, errors = whole @ total, np.sqrt(np.diag(whole))
    anchors = {
        host: {"modulus": float(m), "error": float(e), "use": True}
        for host, m, e in zip(hosts, mean, errors, strict=True)
    }
    return anchors, whole
