"""Work shared out to threads, as many as were asked for and no more."""

import os
from collections import deque
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import ThreadPoolExecutor
from functools import cache
from threading import local
from typing import TypeVar

__all__ = ["ahead", "aside", "in_threads"]

_Item = TypeVar("_Item")
_Result = TypeVar("_Result")


def in_threads(
    function: Callable[[_Item], _Result], items: Iterable[_Item], threads: int
) -> list[_Result]:
    """Apply a function that releases the interpreter's lock; results in the items' order.

    Threads are kept from call to call, as starting them costs a tenth of a short step. What runs
    in one of them and wants threads itself gets new ones: if it waited for its own kind, all of
    them could come to wait.
    """
    items = list(items)
    if threads <= 1 or len(items) <= 1:
        return [function(item) for item in items]
    if getattr(_OF_THIS_THREAD, "works", False):
        with ThreadPoolExecutor(min(threads, len(items)), initializer=_mark) as pool:
            return list(pool.map(function, items))
    return list(_kept_pool(threads).map(function, items))


def aside(function: Callable[[_Item], _Result], item: _Item, threads: int) -> Callable[[], _Result]:
    """Begin something in one of the threads of `in_threads`; return what waits for its result.

    Parameters
    ----------
    function
        Releases the interpreter's lock.
    item
        What it is called with.
    threads
        Threads to use; with one it is done at once.
    """
    if threads <= 1 or getattr(_OF_THIS_THREAD, "works", False):
        result = function(item)
        return lambda: result
    return _kept_pool(threads).submit(function, item).result


def ahead(
    function: Callable[[_Item], _Result], items: Iterable[_Item], threads: int
) -> Iterator[_Result]:
    """Yield what `in_threads` returns, of which no more than is soon wanted is made beforehand.

    Parameters
    ----------
    function
        Releases the interpreter's lock.
    items
        What it is called with, one after the other.
    threads
        Threads to use; with one a result is made when it is asked for.
    """
    waiting: deque[Callable[[], _Result]] = deque()
    most = _AHEAD * threads if threads > 1 else 0
    for item in items:
        waiting.append(aside(function, item, threads))
        if len(waiting) > most:
            yield waiting.popleft()()
    while waiting:
        yield waiting.popleft()()


_AHEAD = 2
"""Results that wait for each thread."""

_OF_THIS_THREAD = local()


def _mark() -> None:
    _OF_THIS_THREAD.works = True


@cache
def _kept_pool(threads: int) -> ThreadPoolExecutor:
    return ThreadPoolExecutor(threads, initializer=_mark)


# A forked process has no threads but the one that forked.
os.register_at_fork(after_in_child=_kept_pool.cache_clear)
