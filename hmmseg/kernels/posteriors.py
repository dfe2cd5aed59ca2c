"""Posterior probabilities of states, base by base, over blocks whose ends are known.

Blocks go in pairs, see :mod:`hmmseg.kernels.blocks`.
"""

from collections.abc import Callable
from functools import cache
from typing import Any

import numpy as np

from hmmseg.kernels import plain
from hmmseg.kernels.compiling import helper, kernel
from hmmseg.kernels.limits import LOST
from hmmseg.kernels.tokens import base_codes
from hmmseg.kernels.vectors import (
    MOST_STATES,
    add_to,
    inner,
    item,
    load,
    product,
    rescaled,
    scaled,
    store,
    times_row,
)

__all__ = ["posterior_kernel"]


@helper
def _weigh(vector, rows, left, share):
    """Scale a backward vector so that the posterior of the base before it sums to ``share``."""
    vector = rescaled(vector)
    total = inner(rows, left, vector)
    if total < LOST:
        return vector, True
    return scaled(vector, share / total), False


@helper
def _forward(codes, length, left, end, vector, rows, matrices, interval):
    """Store the vectors behind the bases of which ``left``, down to ``end + 1``, are left."""
    while left > end:
        if left % interval == 0:
            vector = rescaled(vector)
        pause = max((left - 1) // interval * interval, end)
        for here in range(left, pause, -1):
            vector = product(vector, matrices, item(codes, length - here))
            store(rows, here, vector)
        left = pause
    return vector


@helper
def _forward_pair(
    p_codes, q_codes, p_length, q_length, left, p, q, p_rows, q_rows, matrices, interval
):
    """Do as ``_forward`` for the vectors of two blocks, to their ends."""
    while left > 0:
        if left % interval == 0:
            p, q = rescaled(p), rescaled(q)
        pause = (left - 1) // interval * interval
        for here in range(left, pause, -1):
            p = product(p, matrices, item(p_codes, p_length - here))
            q = product(q, matrices, item(q_codes, q_length - here))
            store(p_rows, here, p)
            store(q_rows, here, q)
        left = pause


@helper
def _backward(codes, length, left, vector, share, rows, mirrored, interval, posterior, row, step):
    """Add the posteriors of the bases of which ``left`` and more are left."""
    while left <= length:
        if (left - 1) % interval == 0:
            vector, lost = _weigh(vector, rows, left, share)
            if lost:
                return True
        pause = min((left - 1) // interval * interval + interval, length)
        for here in range(left, pause + 1):
            add_to(posterior, row - step * here, times_row(vector, rows, here))
            vector = product(vector, mirrored, item(codes, length - here))
        left = pause + 1
    return False


@helper
def _backward_pair(
    p_codes, q_codes, p_length, q_length, length, p, q, p_share, q_share, p_rows, q_rows,
    mirrored, interval, posterior, p_row, q_row, step,
):  # fmt: skip
    """Do as ``_backward`` for two blocks, from their ends; return the vectors, too."""
    p_lost = q_lost = False
    left = 1
    while left <= length:
        p, p_lost = _weigh(p, p_rows, left, p_share)
        q, q_lost = _weigh(q, q_rows, left, q_share)
        if p_lost or q_lost:
            break
        pause = min(left + interval, length + 1)
        for here in range(left, pause):
            add_to(posterior, p_row - step * here, times_row(p, p_rows, here))
            add_to(posterior, q_row - step * here, times_row(q, q_rows, here))
            p = product(p, mirrored, item(p_codes, p_length - here))
            q = product(q, mirrored, item(q_codes, q_length - here))
        left = pause
    return p, q, p_lost, q_lost


@cache
def posterior_kernel(states: int) -> Callable[..., Any]:
    """Return the kernel for a number of states; :mod:`.plain` explains its arguments."""
    if states > MOST_STATES:
        return plain.add_posteriors

    @kernel
    def add_posteriors(
        bases, order, closed, edges, blocks, starts, ends, shares, matrices, mirrored, interval,
        posterior, origin, step,
    ):  # fmt: skip
        longest = 0
        for block in blocks:
            longest = max(longest, edges[block + 1] - edges[block])
        p_codes, q_codes = np.empty(longest, np.uint32), np.empty(longest, np.uint32)
        p_rows, q_rows = np.empty((longest + 1, states)), np.empty((longest + 1, states))
        for one in range(0, blocks.size, 2):
            other = min(one + 1, blocks.size - 1)
            p_stop, q_stop = edges[blocks[one] + 1], edges[blocks[other] + 1]
            p_length = p_stop - edges[blocks[one]]
            # An odd block has an empty one beside it.
            q_length = q_stop - edges[blocks[other]] if other > one else 0
            base_codes(bases, order, closed, p_stop - p_length, p_stop, p_codes)
            base_codes(bases, order, closed, q_stop - q_length, q_stop, q_codes)
            common = min(p_length, q_length)
            p, q = load(starts, one, states), load(starts, other, states)
            p = _forward(p_codes, p_length, p_length, common, p, p_rows, matrices, interval)
            q = _forward(q_codes, q_length, q_length, common, q, q_rows, matrices, interval)
            _forward_pair(
                p_codes, q_codes, p_length, q_length, common, p, q, p_rows, q_rows, matrices,
                interval,
            )  # fmt: skip
            p_row, q_row = origin + step * p_stop, origin + step * q_stop
            p, q, p_lost, q_lost = _backward_pair(
                p_codes, q_codes, p_length, q_length, common, load(ends, one, states),
                load(ends, other, states), shares[one], shares[other], p_rows, q_rows, mirrored,
                interval, posterior, p_row, q_row, step,
            )  # fmt: skip
            if p_lost or q_lost:
                return False
            if _backward(
                p_codes, p_length, common + 1, p, shares[one], p_rows, mirrored, interval,
                posterior, p_row, step,
            ) or _backward(
                q_codes, q_length, common + 1, q, shares[other], q_rows, mirrored, interval,
                posterior, q_row, step,
            ):  # fmt: skip
                return False
        return True

    return add_posteriors
