"""Clipping of Cepheids as in older papers: for comparing with them only.

An unweighted fit with a constant for every host and the relation's other terms, of
which stars beyond some residual standard deviations are set aside, again and again.
What is left looks better behaved than it is: its scatter and every error that
follows come out too small.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ladderfit.choices import Choices
from ladderfit.choices.outliers import CLIPPING
from ladderfit.classical.least_squares import clipped_least_squares
from ladderfit.errors import InputError, LadderfitError, Problem
from ladderfit.inputs.select_stars import CepheidSelection
from ladderfit.relations import design
from ladderfit.sample_arrays import taken
from ladderfit.samples import BoolArray, FloatArray, StarSample

_NAMED = 12  # stars named in the note
_INDEPENDENT = 1e-8  # of a column's size


def clipped(choices: Choices, selection: CepheidSelection) -> CepheidSelection:
    """The selection without the stars that clipping sets aside, where the choices ask for it.

    Raises
    ------
    InputError
        If the clip does not settle, or leaves a host without a star.
    """
    section = choices.cepheids
    if section is None or section.outliers.treatment != CLIPPING:
        return selection
    sample, threshold = selection.sample, section.outliers.threshold
    kept = _kept(choices, sample, selection.hosts, threshold)
    lost = set(np.unique(sample.host)) - set(np.unique(sample.host[kept]))
    if lost:
        names = ", ".join(selection.hosts[host] for host in sorted(lost))
        raise _refused(f"a clip that leaves {names} without a star")
    if kept.all():
        note = f"clipping at {threshold:g} residual sd, as in older papers, sets no star aside"
        return replace(selection, notes=(*selection.notes, note))
    count = int(np.sum(~kept))
    reason = f"clipped at {threshold:g} residual sd"
    reasons = {**selection.kept.reasons, reason: count}
    return replace(
        selection,
        sample=taken(sample, kept),
        kept=replace(selection.kept, kept=int(kept.sum()), reasons=reasons),
        notes=(*selection.notes, _note(sample, selection.hosts, kept, threshold)),
    )


def _kept(
    choices: Choices, sample: StarSample, hosts: tuple[str, ...], threshold: float
) -> BoolArray:
    columns = [(sample.host == host).astype(float) for host in range(len(hosts))]
    for column in design(choices, sample, hosts).values():
        if _adds(columns, column):
            columns.append(column)
    try:
        return clipped_least_squares(np.stack(columns, axis=1), sample.magnitude, threshold).kept
    except (LadderfitError, ValueError) as error:
        raise _refused(str(error)) from None


def _adds(columns: list[FloatArray], column: FloatArray) -> bool:
    """Whether a column is independent of those before it."""
    before = np.stack(columns, axis=1)
    left = column - before @ np.linalg.lstsq(before, column, rcond=None)[0]
    return float(left @ left) > _INDEPENDENT**2 * float(column @ column)


def _note(sample: StarSample, hosts: tuple[str, ...], kept: BoolArray, threshold: float) -> str:
    aside = np.flatnonzero(~kept)
    named = [f"{sample.star[i]} in {hosts[sample.host[i]]}" for i in aside[:_NAMED]]
    more = f" and {len(aside) - _NAMED} more" if len(aside) > _NAMED else ""
    stars = "star" if len(aside) == 1 else "stars"
    return (
        f"clipping at {threshold:g} residual sd, as in older papers and for comparing only, sets "
        f"{len(aside)} {stars} aside, and scatter and errors come out too small: "
        f"{', '.join(named)}{more}"
    )


def _refused(found: str) -> InputError:
    return InputError(
        Problem(
            found=found,
            expected="a clip that settles and leaves stars in every host",
            remedy='raise cepheids.outliers.threshold, or write treatment = "mixture"',
            key="cepheids.outliers.threshold",
        )
    )
