"""The limit on BLAS threads, where two threads draw at the same time."""

from __future__ import annotations

import threading

from threadpoolctl import threadpool_info

from ladderfit.kernels.compiling import one_blas_thread


def blas_threads() -> list[int]:
    return [pool["num_threads"] for pool in threadpool_info() if pool["user_api"] == "blas"]


def test_overlapping_blocks_leave_the_number_of_threads_as_it_was() -> None:
    """The one that came in first leaves first."""
    before = blas_threads()
    assert before
    inside, leave = threading.Event(), threading.Event()

    def first() -> None:
        with one_blas_thread():
            inside.set()
            assert leave.wait(20)

    thread = threading.Thread(target=first)
    thread.start()
    assert inside.wait(20)
    with one_blas_thread():
        assert set(blas_threads()) == {1}
        leave.set()
        thread.join(20)
        assert set(blas_threads()) == {1}
    assert blas_threads() == before
