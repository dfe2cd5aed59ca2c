"""Work shared out to threads, as many as were asked for and no more."""

import os
from collections.abc import Callable, Iterable
from concurrent.futures import ThreadPoolExecutor
from functools import cache
from threading import local
from typing import TypeVar

__all__ = ["aside", "in_threads"]

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


_OF_THIS_THREAD = local()


def _mark() -> None:
    _OF_THIS_THREAD.works = True


@cache
def _kept_pool(threads: int) -> ThreadPoolExecutor:
    return ThreadPoolExecutor(threads, initializer=_mark)


# A forked process has no threads but the one that forked.
os.register_at_fork(after_in_child=_kept_pool.cache_clear)
