"""Growing a chain: warm-up, commits, and when it is enough.

Every decision depends on the draws alone, never on the clock or on how often the
chain was interrupted: stopped and resumed, killed and resumed, or in one go, a
chain is the same bit for bit.  Only how many rows share a commit follows the clock.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator

import numpy as np
import numpy.typing as npt

from ladderfit.sampling.chain_file import ChainFile
from ladderfit.sampling.chain_layout import Commit
from ladderfit.sampling.convergence import ensemble_rhat
from ladderfit.sampling.ensemble import advance
from ladderfit.sampling.mode import LogDensity

FloatArray = npt.NDArray[np.float64]

COMMIT_EVERY = 0.5  # s
_WARM_UP_EVERY = 10  # rows between two looks at the warm-up
_WARM_UP_LEAST, _WARM_UP_MOST = 30, 500  # rows
_SETTLED_RHAT = 1.05
_LEFT_BEHIND = 30.0  # below the highest log density, and 3 more for each dimension
_FIRST_LOOK, _LOOKS_APART = 25, 1.1


def grow(
    file: ChainFile,
    log_density: LogDensity,
    enough: Callable[[FloatArray], bool],
    most: Callable[[], int | None],
    every: float = COMMIT_EVERY,
) -> Iterator[Commit]:
    """Draw until it is enough; yields after every commit, where the caller may break.

    Parameters
    ----------
    file : ChainFile
        Goes on from its last commit.
    log_density : callable
        Maps shape (b, d) to (b,).
    enough : callable
        Whether to end, given the draws after the warm-up, shape (rows, ensembles,
        walkers, d); asked at row counts that grow by a tenth.
    most : callable
        Rows after the warm-up at which to end in any case, or None.
    every : float
        Seconds between commits.
    """
    if _looks_at_warm_up(file.rows) and file.commit.warm_up is None and settled(file):
        # whoever drew this row died before the end of the warm-up was put down
        file.write_commit(file.commit.seconds, warm_up=file.commit.rows)
    if _at_the_end(file, enough, most()):
        return
    began, before = time.monotonic(), file.commit.seconds
    last = began
    for states in advance(log_density, file.header.plan, file.states):
        file.append(states)
        warming = file.commit.warm_up is None
        kept = 0 if file.commit.warm_up is None else file.rows - file.commit.warm_up
        look = _looks_at_warm_up(file.rows) if warming else is_look(kept)
        full = not warming and _reached(kept, most())
        now = time.monotonic()
        if not (look or full or now - last >= every):
            continue
        last = now
        commit = file.write_commit(before + now - began)
        if warming and look and settled(file):
            commit = file.write_commit(commit.seconds, warm_up=commit.rows)
        yield commit
        if not warming and _at_the_end(file, enough, most()):
            return


def _looks_at_warm_up(rows: int) -> bool:
    return rows % _WARM_UP_EVERY == 0


def is_look(kept: int) -> bool:
    """Whether the draws are looked at after this many rows: 25, 28, 31, 35, 39, ..."""
    look = _FIRST_LOOK
    while look < kept:
        look = int(np.ceil(_LOOKS_APART * look))
    return look == kept


def settled(file: ChainFile) -> bool:
    """Whether the warm-up is over: in its second half the ensembles agree, or it is very long.

    Over-dispersed starts that still drift or shrink show in the split R-hat of a
    coordinate (location or scale) or of the log density; single walkers left behind,
    which ranks do not mind, show in a log density far below the highest.
    """
    rows = file.commit.rows
    if rows < _WARM_UP_LEAST:
        return False
    if rows >= _WARM_UP_MOST:
        return True
    z, density = file.read(rows // 2)
    behind = float(density.max() - density[-1].min())
    if not behind < _LEFT_BEHIND + 3.0 * file.header.plan.dimension:
        return False
    z = np.where(np.array(file.header.folded), np.abs(z), z)
    series = [density, *np.moveaxis(z, -1, 0)]
    return all(ensemble_rhat(values.swapaxes(0, 1)) < _SETTLED_RHAT for values in series)


def _at_the_end(file: ChainFile, enough: Callable[[FloatArray], bool], most: int | None) -> bool:
    commit = file.commit
    if commit.warm_up is None:
        return False
    if _reached(commit.kept, most):
        return True
    return is_look(commit.kept) and enough(file.read(commit.warm_up)[0])


def _reached(kept: int, most: int | None) -> bool:
    return most is not None and kept >= most
