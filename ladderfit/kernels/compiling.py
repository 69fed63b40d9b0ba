"""How kernels are compiled, and how their work is shared between two cores.

Kernels are compiled by numba at their first call and kept on disk for later
processes.  Work is split over draws between plain threads, so that every draw
is computed by the same instructions in the same order on one core or on two.
"""

from __future__ import annotations

import os
import threading
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from functools import cache
from pathlib import Path
from typing import Any, TypeVar, cast

import numba
from threadpoolctl import ThreadpoolController

F = TypeVar("F", bound=Callable[..., Any])
T = TypeVar("T")
R = TypeVar("R")

WORDS_WHEN_COLD = "compiling the kernels (once after installing; takes 5 to 15 s)"

_WORTH_SHARING = 100_000  # elements of work below which a second thread does not pay
_KERNELS: list[Any] = []
_ALWAYS_USED = "elimination.eliminate"


def compiled(function: F) -> F:
    """Compile with numba, cached between processes, without the interpreter's lock."""
    return _kernel(function)


def compiled_fused(function: F) -> F:
    """The same where a product and a sum may be rounded once instead of twice."""
    return _kernel(function, fastmath={"contract"})


def _kernel(function: F, **options: Any) -> F:
    kernel = numba.njit(cache=True, nogil=True, error_model="numpy", **options)(function)
    _KERNELS.append(kernel)
    return cast(F, kernel)


def is_cold() -> bool:
    """Whether the kernel that every job needs is neither compiled nor kept by an earlier process.

    Kernels that only some jobs need follow at their own first use, without a word.
    """
    return all(
        not kernel.signatures and not _kept(kernel)
        for kernel in _KERNELS
        if _name(kernel) == _ALWAYS_USED
    )


def _kept(kernel: Any) -> bool:
    place = kernel.stats.cache_path
    return place is not None and any(Path(place).glob(f"{_name(kernel)}-*.nbi"))


def _name(kernel: Any) -> str:
    return f"{kernel.py_func.__module__.rpartition('.')[2]}.{kernel.py_func.__qualname__}"


@cache
def _pool(process: int) -> ThreadPoolExecutor:
    """One pool of threads per process: a forked child inherits no threads."""
    del process
    return ThreadPoolExecutor(2, thread_name_prefix="ladderfit")


def threads() -> int:
    """How many threads kernels use: two where there are two cores, unless told otherwise.

    The environment variable ``LADDERFIT_THREADS`` sets 1 or 2.
    """
    asked = os.environ.get("LADDERFIT_THREADS", "")
    return max(1, min(int(asked) if asked.isdigit() else 2, _cores(), 2))


@cache
def _cores() -> int:
    """Looked up once: that takes longer than a small kernel."""
    return os.cpu_count() or 1


@cache
def _controller() -> ThreadpoolController:
    return ThreadpoolController()


_OVERLAP = threading.Lock()
_HERE = threading.local()  # `busy` where a thread already has its share of the work
_WITHIN: list[Any] = [0, None]  # threads within the block, and what lifts the limit


@contextmanager
def one_blas_thread() -> Iterator[None]:
    """Keep BLAS to one thread for a while: its idle threads spin on the core a kernel needs.

    Threads may overlap in it: the first has the limit set and the last has it lifted.
    A pool that all threads share obeys one thread alone, so that one does both.
    """
    if not _shares_its_pool():
        with _controller().limit(limits=1, user_api="blas"):
            yield
        return
    keeper = _keeper(os.getpid())
    with _OVERLAP:
        if _WITHIN[0] == 0:
            _WITHIN[1] = keeper.submit(_limited).result()
        _WITHIN[0] += 1
    try:
        yield
    finally:
        with _OVERLAP:
            _WITHIN[0] -= 1
            if _WITHIN[0] == 0:
                keeper.submit(_WITHIN[1].__exit__, None, None, None).result()


@cache
def _shares_its_pool() -> bool:
    """Whether BLAS has one pool for all threads, not one for each."""
    layers = [
        one.get("threading_layer") for one in _controller().info() if one["user_api"] == "blas"
    ]
    return all(layer == "pthreads" for layer in layers)


@cache
def _keeper(process: int) -> ThreadPoolExecutor:
    """The thread that sets and lifts limits; one per process, as in `_pool`."""
    del process
    return ThreadPoolExecutor(1, thread_name_prefix="ladderfit-blas")


def _limited() -> Any:
    return _controller().limit(limits=1, user_api="blas").__enter__()


@contextmanager
def in_background(check: Callable[[], None]) -> Iterator[None]:
    """Keep kernels to this thread, so that others find the pool free.

    Parameters
    ----------
    check : callable
        Called before every piece of work; what it raises ends the work.
    """
    _HERE.busy, _HERE.check = True, check
    try:
        yield
    finally:
        _HERE.busy, _HERE.check = False, None


def side_by_side(function: Callable[[T], R], pieces: Sequence[T]) -> list[R]:
    """The function of every piece, in order; computed in two threads where there are cores.

    Within a piece kernels do not share their own work out again.
    """
    if not _may_share() or len(pieces) < 2:
        return [function(piece) for piece in pieces]

    def within(piece: T) -> R:
        _HERE.busy = True
        try:
            return function(piece)
        finally:
            _HERE.busy = False

    return list(_pool(os.getpid()).map(within, pieces))


def in_halves(part: Callable[[int, int], None], size: int, *, work: int) -> None:
    """Call ``part(start, stop)`` over a range, in two threads where that pays."""
    if not _may_share() or work < _WORTH_SHARING or size < 2:
        part(0, size)
        return
    middle = size // 2
    pool = _pool(os.getpid())
    halves = [pool.submit(part, 0, middle), pool.submit(part, middle, size)]
    for half in halves:
        half.result()


def _may_share() -> bool:
    check = getattr(_HERE, "check", None)
    if check is not None:
        check()
    return threads() > 1 and not getattr(_HERE, "busy", False)
