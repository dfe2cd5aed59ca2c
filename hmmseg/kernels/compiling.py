"""How kernels are compiled: one place that decides what the machine may do to the arithmetic.

Results must not depend on the machine, so the compiler may neither reassociate nor contract
floating-point operations (``fastmath`` off), and kernels that bear results use only sums,
products, quotients and comparisons. Kernels hold no Python object, so they release the
interpreter's lock and are cached on disk.
"""

from collections.abc import Callable
from typing import Any

import numba

__all__ = ["helper", "kernel"]


_OPTIONS = {"nogil": True, "fastmath": False, "error_model": "numpy"}


def kernel(function: Callable[..., Any]) -> Callable[..., Any]:
    """Compile a function on its first call, cache it on disk, release the lock while it runs.

    The cache is beside the package, or else where the user's caches are. Where neither can be
    written, the function is compiled in every process anew.
    """
    compiled: Callable[..., Any]
    try:
        compiled = numba.njit(cache=True, **_OPTIONS)(function)
    except RuntimeError:  # no place for a cache
        compiled = numba.njit(**_OPTIONS)(function)
    return compiled


def helper(function: Callable[..., Any]) -> Callable[..., Any]:
    """Compile a function that only kernels call; it becomes part of them, and of their cache."""
    compiled: Callable[..., Any] = numba.njit(**_OPTIONS)(function)
    return compiled
