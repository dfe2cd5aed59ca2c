"""Work shared out to threads: in order, within one another, after a failure and after a fork."""

import os
import threading
import time

import pytest

from hmmseg.inference.threads import ahead, aside, in_threads


@pytest.mark.parametrize("threads", [1, 2, 3])
def test_results_stand_in_the_items_order(threads: int) -> None:
    def slow_first(item: int) -> int:
        time.sleep(0.01 if item == 0 else 0)
        return item * item

    assert in_threads(slow_first, range(20), threads) == [n * n for n in range(20)]


def test_threads_are_kept() -> None:
    def name(_: int) -> str:
        time.sleep(0.01)
        return threading.current_thread().name

    assert set(in_threads(name, range(8), 2)) == set(in_threads(name, range(8), 2))


def test_what_runs_in_a_thread_may_want_threads() -> None:
    """Three deep, as selections fit restarts whose steps run in threads."""

    def inner(item: int) -> int:
        return sum(in_threads(lambda n: n + item, range(3), 2))

    def outer(item: int) -> int:
        return sum(in_threads(inner, range(3), 2)) + item

    found: list[int] = []
    worker = threading.Thread(
        target=lambda: found.extend(in_threads(outer, range(4), 2)), daemon=True
    )
    worker.start()
    worker.join(30)
    assert found == [18 + item for item in range(4)]


@pytest.mark.parametrize(("threads", "most"), [(1, 1), (2, 5), (3, 7)])
def test_no_more_is_done_ahead_than_is_soon_wanted(threads: int, most: int) -> None:
    begun: list[int] = []
    results = ahead(lambda item: begun.append(item) or item * item, range(20), threads)
    for item in range(20):
        assert next(results) == item * item
        assert len(begun) <= item + most
    assert next(results, None) is None


def test_a_failure_is_told_and_the_threads_go_on() -> None:
    def fail(item: int) -> int:
        if item == 3:
            raise ValueError("three")
        return item

    with pytest.raises(ValueError, match="three"):
        in_threads(fail, range(10), 2)
    assert in_threads(abs, [-1, -2], 2) == [1, 2]


@pytest.mark.filterwarnings("ignore:This process:DeprecationWarning")
def test_a_forked_process_has_threads_of_its_own() -> None:
    in_threads(abs, range(4), 2)
    child = os.fork()
    if child == 0:  # pragma: no cover (its own process)
        os._exit(0 if in_threads(abs, [-1, -2], 2) == [1, 2] else 1)
    for _ in range(300):
        done, status = os.waitpid(child, os.WNOHANG)
        if done:
            assert os.waitstatus_to_exitcode(status) == 0
            return
        time.sleep(0.1)
    os.kill(child, 9)
    os.waitpid(child, 0)
    pytest.fail("the forked process waits for threads that it does not have")


@pytest.mark.parametrize("threads", [1, 2])
def test_something_done_aside(threads: int) -> None:
    assert aside(abs, -3, threads)() == 3
    failed = None
    try:
        failed = aside(lambda n: 1 // n, 0, threads)
    except ZeroDivisionError:
        assert threads == 1
    if failed is not None:
        with pytest.raises(ZeroDivisionError):
            failed()
