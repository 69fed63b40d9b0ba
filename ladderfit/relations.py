"""The terms of the period-luminosity relation, each a column of the design matrix.

A term knows its parameter's name, when the choices ask for it, and its column.
To add one, write a `Term` and put it into `TERMS`; priors, names in results and
the split into linear and non-linear parameters follow from its name.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ladderfit.choices import Relation
from ladderfit.samples import StarSample

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Term:
    """One linear term.

    Attributes
    ----------
    name : str
        Name of its coefficient, as in `ladderfit.names`.
    present : callable
        Whether the choices ask for the term.
    column : callable
        The column for a sample, shape (n,), in the unit that makes
        coefficient times column a magnitude.
    """

    name: str
    present: Callable[[Relation], bool]
    column: Callable[[Relation, StarSample], FloatArray]


def _ones(_: Relation, stars: StarSample) -> FloatArray:
    return np.ones(len(stars))


def _log_period(relation: Relation, stars: StarSample) -> FloatArray:
    return stars.log_period - float(np.log10(relation.pivot))


def _metallicity(relation: Relation, stars: StarSample) -> FloatArray:
    if relation.metallicity == "none":
        return np.zeros(len(stars))
    return stars.metallicity - relation.metallicity.reference


TERMS: tuple[Term, ...] = (
    Term("zero_point", lambda _: True, _ones),
    Term("slope", lambda _: True, _log_period),
    Term("metallicity", lambda relation: relation.metallicity != "none", _metallicity),
)


def coefficient_names(relation: Relation) -> tuple[str, ...]:
    """Names of the coefficients that the choices ask for, in order."""
    return tuple(term.name for term in TERMS if term.present(relation))


def design_matrix(relation: Relation, stars: StarSample) -> FloatArray:
    """Columns of all terms present, shape (n, k), in the order of `coefficient_names`."""
    columns = [term.column(relation, stars) for term in TERMS if term.present(relation)]
    return np.stack(columns, axis=1)
