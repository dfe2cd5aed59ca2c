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


def kernel(function: Callable[..., Any]) -> Callable[..., Any]:
    """Compile a function on its first call, cache it on disk, release the lock while it runs."""
    compiled: Callable[..., Any] = numba.njit(
        cache=True, nogil=True, fastmath=False, error_model="numpy"
    )(function)
    return compiled


def helper(function: Callable[..., Any]) -> Callable[..., Any]:
    """Compile a function that only kernels call; it becomes part of them, and of their cache."""
    compiled: Callable[..., Any] = numba.njit(nogil=True, fastmath=False, error_model="numpy")(
        function
    )
    return compiled
