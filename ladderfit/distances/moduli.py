"""A saved calibration applied to new objects: joint moduli, as if they had been in the fit.

New objects tell of the calibration's parameters too, so its draws are weighted by
the density of the new data with the new moduli integrated out; given a draw, a
new modulus is normal.  This is the posterior of the joint fit itself, with no
anchor in a new host.  The weights are Pareto-smoothed; where they are too uneven, or
a new host is one of the calibration's own, the joint fit is drawn anew.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import pandas as pd

from ladderfit.diagnostics import TRUSTED_K
from ladderfit.distances.joined_ladders import repeated, together
from ladderfit.distances.new_objects import NewObjects, new_objects
from ladderfit.distances.weights import Found, needed, understood, weighted
from ladderfit.errors import LadderfitError, raise_if
from ladderfit.ladder import Ladder
from ladderfit.names import base_name, group_of, parameter, with_group
from ladderfit.posterior.joint import posterior
from ladderfit.ranges import Ranges, calibrated_ranges, outside
from ladderfit.result import Result
from ladderfit.samples import FloatArray, Kept, PeakSample, StarSample
from ladderfit.sampling.run import draw

_MOVED = 0.5  # of the calibration's errors: smaller shifts are not worth a word
_FAR = 2.5  # of the shift's own error: larger ones are


@dataclass(frozen=True, eq=False)
class Distances:
    """Joint posterior of new moduli.

    Attributes
    ----------
    draws : mapping of str to array, shape (n,)
        Distance modulus of each new host [mag], jointly drawn.
    parameters : mapping of str to array, shape (n,)
        The calibration's parameters given the new data too, draw by draw with `draws`.
    route : str
        ``weights``, of the saved draws; or ``fit``, drawn anew together.
    ess : float
        Effective number of draws.
    pareto_k : float
    kept : mapping of str to Kept
        How many new objects take part, and why the others do not.
    counts : mapping of str to pair of int
        Cepheids and supernovae per host.
    warnings : tuple of str
        What lies outside what was calibrated, in sentences.
    notes : tuple of str
    """

    draws: Mapping[str, FloatArray]
    parameters: Mapping[str, FloatArray]
    route: Literal["weights", "fit"]
    ess: float
    pareto_k: float
    kept: Mapping[str, Kept]
    counts: Mapping[str, tuple[int, int]]
    warnings: tuple[str, ...]
    notes: tuple[str, ...]

    @property
    def hosts(self) -> tuple[str, ...]:
        """Names of the new hosts."""
        return tuple(self.draws)

    def covariance(self) -> FloatArray:
        """Covariance of the moduli [mag^2], shape (h, h), in the order of `hosts`."""
        return np.atleast_2d(np.cov(np.stack([self.draws[host] for host in self.hosts])))

    def summary(self) -> pd.DataFrame:
        """One row per host.

        Returns
        -------
        DataFrame
            ``modulus``, ``modulus_sd``, ``modulus_q16``, ``_q50``, ``_q84`` [mag]; the same of
            ``distance`` [Mpc]; ``cepheids``, ``supernovae``.
        """
        rows = {}
        for host, draws in self.draws.items():
            row: dict[str, float] = {}
            for name, values in (("modulus", draws), ("distance", megaparsecs(draws))):
                row[name], row[f"{name}_sd"] = float(np.mean(values)), float(np.std(values, ddof=1))
                for point in (16, 50, 84):
                    row[f"{name}_q{point}"] = float(np.quantile(values, 0.01 * point))
            row["cepheids"], row["supernovae"] = self.counts[host]
            rows[host] = row
        return pd.DataFrame.from_dict(rows, orient="index")


def megaparsecs(modulus: FloatArray) -> FloatArray:
    """Distances [Mpc] of moduli [mag]."""
    return np.asarray(10.0 ** (0.2 * modulus - 5.0))


def distances_of(
    result: Result,
    tables: Sequence[Any],
    *,
    changes: Mapping[str, Any] | None = None,
    ranges: Ranges | None = None,
    seed: int | None = None,
) -> Distances:
    """Distances of new hosts from a calibration and tables of their Cepheids or supernovae.

    Parameters
    ----------
    result : Result
        The calibration, fresh or read back.
    tables : sequence of path or table
        At most one of Cepheids and one of supernovae, with the columns of the
        calibration's own tables.  No modulus, no anchor.
    changes : mapping of str to value, optional
        Where the new tables differ, by dotted key: columns, and the range of periods.
    ranges : Ranges, optional
        What the calibration covers; by default from its ladder, if that is known.
    seed : int, optional
        By default the calibration's.

    Returns
    -------
    Distances

    Raises
    ------
    InputError
        If a table does not fit, or an object is in the calibration already.
    LadderfitError
        If the joint fit has to be drawn anew and the calibration's tables are gone.
    """
    new = new_objects(result.choices, tables, changes)
    if result.source is not None:
        raise_if(repeated(result.source, new.ladder))
    seed = result.diagnostics.seed if seed is None else seed
    if ranges is None:
        ranges = Ranges() if result.source is None else calibrated_ranges(result.source)
    warnings = tuple(outside(ranges, new.ladder.cepheids, new.ladder.hosts))
    known = {str(group_of(n)) for n in result.draws if base_name(n) == "modulus"}
    shared = [host for host in new.ladder.hosts if host in known]
    reason = f"{', '.join(shared)}: in the calibration already" if shared else ""
    found = None
    if not shared:
        joint = posterior(new.ladder)
        absent = [name for name in needed(joint) if name not in result.draws]
        if absent or not understood(joint):
            reason = f"the calibration has no {', '.join(absent) or 'draws of all it needs'}"
        else:
            found = weighted(result, joint, np.random.default_rng(seed))
            if found.pareto_k > TRUSTED_K:
                reason = f"the weights are too uneven (Pareto k = {found.pareto_k:.2f})"
    if reason:
        found = _refitted(result, new.ladder, seed, reason)
    if found is None:
        raise AssertionError  # not reached: without a reason there are weights
    return _told(result, new, found, warnings)


def _refitted(result: Result, new: Ladder, seed: int, reason: str) -> Found:
    """The joint fit drawn anew."""
    if result.source is None:
        raise LadderfitError(
            f"{reason}: the joint fit has to be drawn anew, and the calibration's tables are "
            "missing or changed; restore them"
        )
    both = draw(together(result.source, new), seed=seed, draws=result.size)
    found = both.diagnostics
    notes: tuple[str, ...] = (f"The joint fit was drawn anew: {reason}.",)
    if found.pareto_k is not None and found.pareto_k > TRUSTED_K:
        notes = (*notes, f"Do not trust it either: Pareto k = {found.pareto_k:.2f}.")
    worst = min(ess for ess in found.ess.values() if np.isfinite(ess))
    return Found(both.draws, "fit", worst, found.pareto_k or 0.0, notes)


def _told(result: Result, new: NewObjects, found: Found, warnings: tuple[str, ...]) -> Distances:
    hosts = new.ladder.hosts
    draws = {host: found.values[with_group("modulus", host)] for host in hosts}
    parameters = {n: v for n, v in found.values.items() if base_name(n) != "modulus"}
    counts = {
        host: (_count(new.ladder.cepheids, place), _count(new.ladder.peaks, place))
        for place, host in enumerate(hosts)
    }
    notes = (*new.notes, *found.notes, *_moved(result, parameters), *_unsaid(new.ladder))
    return Distances(
        draws, parameters, found.route, found.ess, found.pareto_k, new.kept, counts, warnings, notes
    )


def _count(sample: StarSample | PeakSample | None, place: int) -> int:
    return 0 if sample is None else int(np.sum(sample.host == place))


def _moved(result: Result, parameters: Mapping[str, FloatArray]) -> list[str]:
    """Parameters that the new data moved farther than data of the same kind should.

    Where the same model holds for old and new data, a shift has the variance that the
    new data took off the posterior (Gratton & Challinor 2020, MNRAS 499, 3410).
    """
    notes = []
    for name, draws in parameters.items():
        before = result.sd(name) if name in result.draws else 0.0
        if before > 0.0:
            shift = float(np.mean(draws)) - result.mean(name)
            gained = max(before**2 - float(np.var(draws)), 0.0)
            if abs(shift) > max(_FAR * gained**0.5, _MOVED * before):
                notes.append(
                    f"The new data move the {parameter(name).words} ({name}) by "
                    f"{shift / before:+.1f} of the calibration's errors, more than they should "
                    "where both follow one relation: look whether they belong together."
                )
    return notes


def _unsaid(new: Ladder) -> list[str]:
    notes = []
    if new.cepheids is not None and new.cepheids.system is None:
        notes.append(
            "No photometric system is named: that the new magnitudes are on that of the "
            "calibration is taken for granted."
        )
    if new.peaks is not None:
        notes.append("New supernovae are taken as independent of those of the calibration.")
    return notes
