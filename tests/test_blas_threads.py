"""Two threads that draw at the same time: the limit on BLAS threads, work in the background."""

from __future__ import annotations

import threading

import pytest
from threadpoolctl import threadpool_info

from ladderfit.kernels.compiling import in_background, in_halves, one_blas_thread


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


def test_the_limit_holds_in_any_thread() -> None:
    """Whoever set it before: a limit may belong to the thread that set it first."""
    before, inside = blas_threads(), list[list[int]]()

    def other() -> None:
        with one_blas_thread():
            inside.append(blas_threads())

    for _ in range(3):
        other()
        thread = threading.Thread(target=other)
        thread.start()
        thread.join(20)
        assert blas_threads() == before
    assert len(inside) == 6
    assert {count for counts in inside for count in counts} == {1}


def test_work_in_the_background_keeps_to_its_thread_and_can_be_ended() -> None:
    seen: list[int] = []
    calls = 0

    def part(start: int, stop: int) -> None:
        del start, stop
        seen.append(threading.get_ident())

    def check() -> None:
        nonlocal calls
        calls += 1
        if calls > 2:
            raise StopIteration

    def work() -> None:
        for _ in range(5):
            in_halves(part, 10, work=10**9)

    with pytest.raises(StopIteration), in_background(check):
        work()
    assert seen == [threading.get_ident()] * 2
    work()  # the check ends with its block
    assert len(seen) > 6
