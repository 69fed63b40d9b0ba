"""How kernels are compiled, and how their work is shared between two cores.

Kernels are compiled by numba at their first call and kept on disk for later
processes.  Work is split over draws between plain threads, so that every draw
is computed by the same instructions in the same order on one core or on two.
"""

from __future__ import annotations

import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from typing import Any, TypeVar, cast

import numba

F = TypeVar("F", bound=Callable[..., Any])

_WORTH_SHARING = 20_000  # elements of work below which a second thread does not pay
_POOL = ThreadPoolExecutor(2, thread_name_prefix="ladderfit")


def compiled(function: F) -> F:
    """Compile with numba, cached between processes, without the interpreter's lock."""
    wrap = numba.njit(cache=True, nogil=True, error_model="numpy")
    return cast(F, wrap(function))


def threads() -> int:
    """How many threads kernels use: two where there are two cores, unless told otherwise.

    The environment variable ``LADDERFIT_THREADS`` sets 1 or 2.
    """
    asked = os.environ.get("LADDERFIT_THREADS", "")
    cores = os.cpu_count() or 1
    return max(1, min(int(asked) if asked.isdigit() else 2, cores, 2))


def in_halves(part: Callable[[int, int], None], size: int, *, work: int) -> None:
    """Call ``part(start, stop)`` over a range, in two threads where that pays."""
    if threads() == 1 or work < _WORTH_SHARING or size < 2:
        part(0, size)
        return
    middle = size // 2
    other = _POOL.submit(part, middle, size)
    part(0, middle)
    other.result()
