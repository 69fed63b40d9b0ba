"""Peaks against one input of the relation, all other terms taken off; for figures."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ladderfit.checks.peak_predictions import expected, terms_of
from ladderfit.checks.residuals import Residuals, flow_residuals, peak_residuals
from ladderfit.peak_terms import EXPANSION, HOSTS, Supernovae, step_of
from ladderfit.result import Result
from ladderfit.samples import BoolArray, FloatArray

VIEWS = ("width", "decline_rate", "colour", "host_mass")
_LABELS = {
    "width": "Width",
    "decline_rate": "Decline rate [mag]",
    "colour": "Colour [mag]",
    "host_mass": r"$\log_{10}$ of stellar mass [$M_\odot$]",
}


@dataclass(frozen=True)
class PeakView(Residuals):
    """Supernovae against one input.

    `data` is the peak less distance, standard peak and all terms but this one [mag];
    `model` is what this term is expected to be, given the measured input, and `sd` the
    spread expected of `data` round it.

    Attributes
    ----------
    term : str
        One of `VIEWS`.
    x_error : array, shape (n,)
        Error of the input; 0 where it has none.
    in_hosts : array of bool, shape (n,)
        Whether the supernova is in a host, not in the expansion.
    """

    term: str
    x_error: FloatArray
    in_hosts: BoolArray

    @property
    def label(self) -> str:
        """What `x` is, with its unit, in matplotlib's mathtext."""
        return _LABELS[self.term]

    @property
    def diluted(self) -> bool:
        """Whether measured inputs follow a shallower line than true ones."""
        return bool(np.any(self.x_error > 0.0))


def views_of(result: Result) -> tuple[str, ...]:
    """The views that a result has: one for each term of its peak-magnitude relation."""
    if result.source is None or not terms_of(result).groups:
        return ()
    relation = result.choices.peak_relation
    return tuple(name for name in VIEWS if getattr(relation, name) != "none")


def peak_view(result: Result, term: str) -> PeakView:
    """Supernovae in hosts and in the expansion against one input.

    Parameters
    ----------
    result : Result
        With its ladder.
    term : str
        One of `views_of(result)`.

    Raises
    ------
    ValueError
        If the relation has no such term.
    """
    if term not in views_of(result):
        raise ValueError(f"the peak-magnitude relation has no term in {term}")
    ladder = result.ladder
    parts = []
    for sample, group, left in (
        (ladder.peaks, HOSTS, peak_residuals(result)),
        (ladder.flow, EXPANSION, flow_residuals(result)),
    ):
        if sample is not None and left is not None:
            parts.append(_part(result, sample, group, term, left))
    name, x, data, model, sd, error, inside = (
        np.concatenate(arrays) for arrays in zip(*parts, strict=True)
    )
    return PeakView(name, x, data, model, sd, term, error, inside)


def _part(
    result: Result, sample: Supernovae, group: str, term: str, left: Residuals
) -> tuple[npt.NDArray[np.generic], ...]:
    of_term = expected(result, sample, group).terms[term]
    x = sample.inputs.values[term]
    error = sample.inputs.values.get(f"{term}_error", np.zeros(len(sample)))
    inside = np.full(len(sample), group == HOSTS)
    return sample.name, x, left.residual + of_term, of_term, left.sd, error, inside


def term_draws(result: Result, term: str, x: npt.ArrayLike) -> FloatArray:
    """The term as the relation has it for a true input, per draw [mag].

    Parameters
    ----------
    result : Result
    term : str
        One of `views_of(result)`.
    x : array_like, shape (m,)
        Inputs, as in the tables.

    Returns
    -------
    array, shape (n_draws, m)
    """
    place, relation = np.asarray(x, dtype=float), result.choices.peak_relation
    if term == "host_mass":
        return np.asarray(result.draws["mass_step"][:, None] * step_of(relation, place))
    off = place - relation.reference(term)
    parts = [
        power.sign * result.draws[power.name][:, None] * off**power.power
        for power in terms_of(result).powers(term)
    ]
    return np.asarray(sum(parts))


def measured_line(view: PeakView, x: npt.ArrayLike) -> FloatArray:
    """What is expected of the term at a measured input, on average over the supernovae [mag].

    The errors of the input dilute the relation: the straight line (or parabola) is
    that through the expected terms of the supernovae, by least squares.

    Parameters
    ----------
    view : PeakView
    x : array_like, shape (m,)
    """
    degree = 2 if view.term == "decline_rate" else 1
    centre = float(np.mean(view.x))
    return np.asarray(
        np.polyval(np.polyfit(view.x - centre, view.model, degree), np.asarray(x) - centre)
    )
