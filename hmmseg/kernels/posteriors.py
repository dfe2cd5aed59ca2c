"""Posterior probabilities of states, base by base, over one block."""

from collections.abc import Callable
from functools import cache
from typing import Any

import numpy as np

from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.limits import LOST
from hmmseg.kernels.plain import rescale
from hmmseg.kernels.tokens import base_codes

__all__ = ["posterior_kernel"]


@cache
def posterior_kernel(states: int) -> Callable[..., Any]:
    """Return the kernel for one number of states, a constant in it."""

    @kernel
    def add_posterior(
        bases,
        order,
        closed,
        begin,
        stop,
        start,
        end,
        share,
        matrices,
        mirrored,
        interval,
        codes,
        forward,
        posterior,
    ):
        length = stop - begin
        base_codes(bases, order, closed, begin, stop, codes)
        forward[0] = start
        for at in range(length):
            if at % interval == 0:
                rescale(forward[at])
            matrix = matrices[codes[at]]
            for j in range(states):
                total = forward[at, 0] * matrix[0, j]
                for k in range(1, states):
                    total += forward[at, k] * matrix[k, j]
                forward[at + 1, j] = total
        backward = end.copy()
        stepped = np.empty(states)
        for at in range(length - 1, -1, -1):
            total = 0.0
            for j in range(states):
                stepped[j] = forward[at + 1, j] * backward[j]
                total += stepped[j]
            if total < LOST:
                return False
            for j in range(states):
                posterior[at, j] += share * (stepped[j] / total)
            matrix = mirrored[codes[at]]
            for i in range(states):
                total = backward[0] * matrix[0, i]
                for k in range(1, states):
                    total += backward[k] * matrix[k, i]
                stepped[i] = total
            for i in range(states):
                backward[i] = stepped[i]
            if at % interval == 0:
                rescale(backward)
        return True

    return add_posterior
