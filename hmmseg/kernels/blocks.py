"""Blocks of tokens: transfer matrices and expected counts.

A block's transfer matrix is the product of its tokens' matrices. Once the vectors at the two
ends of a block are known, the block is independent of all others (Tarnas & Hughey 1998,
Bioinformatics 14: 401-406; Särkkä & García-Fernández 2021, IEEE Trans. Autom. Control 66:
299-306).

Blocks go in pairs: while one waits for the result of a step, the processor takes a step of the
other. Those of a pair should be about equally long.

Vectors are scaled by exact powers of two every ``interval`` tokens, so when it happens never
shows in the result. A value that comes near the end of the range of a double is not dropped
in silence: the block is flagged, and its contig is done again with logarithms.
"""

from collections.abc import Callable
from functools import cache
from typing import Any, NamedTuple

import numpy as np

from hmmseg.kernels import plain
from hmmseg.kernels.compiling import helper, kernel
from hmmseg.kernels.limits import LOST
from hmmseg.kernels.vectors import (
    MOST_STATES,
    add_outer,
    identity,
    inner,
    item,
    load,
    plus,
    product,
    rescaled,
    rescaled_columns,
    scaled,
    step_columns,
    store,
    store_columns,
)

__all__ = ["BlockKernels", "block_kernels"]


class BlockKernels(NamedTuple):
    """The kernels of one number of states; :mod:`hmmseg.kernels.plain` explains their arguments."""

    transfer: Callable[..., Any]
    expect: Callable[..., Any]


@cache
def block_kernels(states: int) -> BlockKernels:
    """Return the kernels for a number of states, which is a constant in them."""
    if states > MOST_STATES:
        return BlockKernels(plain.transfer, plain.expect)
    return BlockKernels(_transfer_kernel(states), _expect_kernel(states))


@helper
def _step_on(tokens, at, stop, columns, times, matrices, interval):
    """Multiply columns by the tokens from ``at`` to ``stop``."""
    lost = False
    while at < stop:
        pause = min(at + interval, stop)
        for here in range(at, pause):
            columns = step_columns(columns, matrices, item(tokens, here))
        columns, more, vanishing = rescaled_columns(columns)
        times = plus(times, more)
        lost |= vanishing
        at = pause
    return columns, times, lost


@helper
def _step_pair_on(tokens, p_at, q_at, steps, p, q, times, matrices, interval):
    """Do as ``_step_on`` for two blocks and a common number of tokens."""
    p_times = q_times = times
    p_lost = q_lost = False
    done = 0
    while done < steps:
        pause = min(done + interval, steps)
        for here in range(done, pause):
            p = step_columns(p, matrices, item(tokens, p_at + here))
            q = step_columns(q, matrices, item(tokens, q_at + here))
        p, more, vanishing = rescaled_columns(p)
        p_times = plus(p_times, more)
        p_lost |= vanishing
        q, more, vanishing = rescaled_columns(q)
        q_times = plus(q_times, more)
        q_lost |= vanishing
        done = pause
    return p, p_times, p_lost, q, q_times, q_lost


def _transfer_kernel(states: int) -> Callable[..., Any]:
    @kernel
    def transfer(tokens, bounds, blocks, matrices, interval, products, exponents, flags):
        zeros = np.zeros((1, states))
        for one in range(0, blocks.size, 2):
            # An odd block is done beside itself.
            p, q = blocks[one], blocks[min(one + 1, blocks.size - 1)]
            p_at, p_stop, q_at, q_stop = bounds[p], bounds[p + 1], bounds[q], bounds[q + 1]
            common = min(p_stop - p_at, q_stop - q_at)
            unit = identity(states)
            p_columns, p_times, p_lost, q_columns, q_times, q_lost = _step_pair_on(
                tokens, p_at, q_at, common, unit, unit, load(zeros, 0, states), matrices, interval
            )
            p_columns, p_times, p_lost_late = _step_on(
                tokens, p_at + common, p_stop, p_columns, p_times, matrices, interval
            )
            q_columns, q_times, q_lost_late = _step_on(
                tokens, q_at + common, q_stop, q_columns, q_times, matrices, interval
            )
            store_columns(products, p, p_columns)
            store_columns(products, q, q_columns)
            store(exponents, p, p_times)
            store(exponents, q, q_times)
            flags[p] |= p_lost or p_lost_late
            flags[q] |= q_lost or q_lost_late

    return transfer


@helper
def _weigh(vector, rows, left, mirrored, token, share):
    """Scale a backward vector so that paths through the token before it weigh ``share``."""
    vector = rescaled(vector)
    total = inner(rows, left, product(vector, mirrored, token))
    if total < LOST:
        return vector, True
    return scaled(vector, share / total), False


@helper
def _forward(tokens, stop, left, end, vector, rows, matrices, interval):
    """Store the vectors before the tokens of which ``left``, down to ``end + 1``, are left."""
    while left > end:
        if left % interval == 0:
            vector = rescaled(vector)
        pause = max((left - 1) // interval * interval, end)
        for here in range(left, pause, -1):
            store(rows, here, vector)
            vector = product(vector, matrices, item(tokens, stop - here))
        left = pause
    return vector


@helper
def _forward_pair(tokens, p_stop, q_stop, left, p, q, p_rows, q_rows, matrices, interval):
    """Do as ``_forward`` for the vectors of two blocks, to their ends."""
    while left > 0:
        if left % interval == 0:
            p, q = rescaled(p), rescaled(q)
        pause = (left - 1) // interval * interval
        for here in range(left, pause, -1):
            store(p_rows, here, p)
            store(q_rows, here, q)
            p = product(p, matrices, item(tokens, p_stop - here))
            q = product(q, matrices, item(tokens, q_stop - here))
        left = pause


@helper
def _backward(tokens, stop, left, length, vector, share, rows, mirrored, interval, weights):
    """Add the weights of the tokens of which ``left``, up to ``length``, are left."""
    while left <= length:
        if (left - 1) % interval == 0:
            vector, lost = _weigh(vector, rows, left, mirrored, item(tokens, stop - left), share)
            if lost:
                return True
        pause = min((left - 1) // interval * interval + interval, length)
        for here in range(left, pause + 1):
            token = item(tokens, stop - here)
            add_outer(weights, token, rows, here, vector)
            vector = product(vector, mirrored, token)
        left = pause + 1
    return False


@helper
def _backward_pair(
    tokens, p_stop, q_stop, length, p, q, p_share, q_share, p_rows, q_rows, mirrored, interval,
    weights,
):  # fmt: skip
    """Do as ``_backward`` for two blocks, from their ends; return the vectors, too."""
    p_lost = q_lost = False
    left = 1
    while left <= length:
        p, p_lost = _weigh(p, p_rows, left, mirrored, item(tokens, p_stop - left), p_share)
        q, q_lost = _weigh(q, q_rows, left, mirrored, item(tokens, q_stop - left), q_share)
        if p_lost or q_lost:
            break
        pause = min(left + interval, length + 1)
        for here in range(left, pause):
            p_token, q_token = item(tokens, p_stop - here), item(tokens, q_stop - here)
            add_outer(weights, p_token, p_rows, here, p)
            add_outer(weights, q_token, q_rows, here, q)
            p = product(p, mirrored, p_token)
            q = product(q, mirrored, q_token)
        left = pause
    return p, q, p_lost, q_lost


def _expect_kernel(states: int) -> Callable[..., Any]:
    # Tokens are counted from the ends of blocks, so that both blocks of a pair are scaled at
    # the same steps however long they are.
    @kernel
    def expect(
        tokens, bounds, blocks, starts, ends, shares, matrices, mirrored, interval, weights, flags
    ):
        longest = 0
        for block in blocks:
            longest = max(longest, bounds[block + 1] - bounds[block])
        p_rows, q_rows = np.empty((longest + 1, states)), np.empty((longest + 1, states))
        for one in range(0, blocks.size, 2):
            other = min(one + 1, blocks.size - 1)
            p_stop, q_stop = bounds[blocks[one] + 1], bounds[blocks[other] + 1]
            p_length = p_stop - bounds[blocks[one]]
            # An odd block has an empty one beside it.
            q_length = q_stop - bounds[blocks[other]] if other > one else 0
            common = min(p_length, q_length)
            p, q = load(starts, one, states), load(starts, other, states)
            p = _forward(tokens, p_stop, p_length, common, p, p_rows, matrices, interval)
            q = _forward(tokens, q_stop, q_length, common, q, q_rows, matrices, interval)
            _forward_pair(tokens, p_stop, q_stop, common, p, q, p_rows, q_rows, matrices, interval)
            p, q, p_lost, q_lost = _backward_pair(
                tokens, p_stop, q_stop, common, load(ends, one, states), load(ends, other, states),
                shares[one], shares[other], p_rows, q_rows, mirrored, interval, weights,
            )  # fmt: skip
            if not (p_lost or q_lost):
                p_lost = _backward(
                    tokens, p_stop, common + 1, p_length, p, shares[one], p_rows, mirrored,
                    interval, weights,
                )  # fmt: skip
                q_lost = _backward(
                    tokens, q_stop, common + 1, q_length, q, shares[other], q_rows, mirrored,
                    interval, weights,
                )  # fmt: skip
            flags[blocks[one]] |= p_lost
            flags[blocks[other]] |= q_lost

    return expect
