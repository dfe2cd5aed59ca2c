"""Blocks of tokens, for any number of states: transfer matrices and expected counts.

A block's transfer matrix is the product of its tokens' matrices. Once the vectors at the two
ends of a block are known, the block is independent of all others (Tarnas & Hughey 1998,
Bioinformatics 14: 401-406; Särkkä & García-Fernández 2021, IEEE Trans. Autom. Control 66:
299-306).

Vectors are scaled by exact powers of two every ``interval`` tokens, so when it happens never
shows in the result. A value that comes near the end of the range of a double is not dropped
in silence: the block is flagged, and its contig is done again with logarithms.
"""

from collections.abc import Callable
from functools import cache
from typing import Any, NamedTuple

import numpy as np

from hmmseg.kernels.compiling import kernel

__all__ = ["DECAY_BITS", "LOST", "SCALE_BITS", "BlockKernels", "block_kernels", "rescale"]

SCALE_BITS = 64
"""A vector whose largest entry is below 2**-SCALE_BITS is multiplied by 2**SCALE_BITS."""

DECAY_BITS = 500
"""By how much a value may fall between two looks at it."""

_SCALE = 2.0**SCALE_BITS
_LOW = 2.0**-SCALE_BITS
_VANISHING = 2.0**-400
LOST = 2.0**-960


class BlockKernels(NamedTuple):
    """The kernels of one number of states."""

    transfer: Callable[..., Any]
    expect: Callable[..., Any]


@kernel
def rescale(vector):
    """Scale a vector; return how many times, and whether an entry nearly vanished."""
    largest = 0.0
    for value in vector:
        largest = max(largest, value)
    times = 0
    while 0.0 < largest < _LOW:
        for j in range(vector.size):
            vector[j] *= _SCALE
        largest *= _SCALE
        times += 1
    vanishing = False
    for value in vector:
        vanishing |= 0.0 < value < _VANISHING
    return times, vanishing


@cache
def block_kernels(states: int) -> BlockKernels:
    """Return kernels in which the number of states is a constant, so that loops unroll."""

    @kernel
    def transfer(tokens, bounds, first, last, matrices, interval, products, exponents, flags):
        rows = np.empty((states, states))
        row = np.empty(states)
        for block in range(first, last):
            times = np.zeros(states, np.int64)
            for i in range(states):
                for j in range(states):
                    rows[i, j] = 1.0 if i == j else 0.0
            position, stop = bounds[block], bounds[block + 1]
            while position < stop:
                end = min(position + interval, stop)
                for at in range(position, end):
                    matrix = matrices[tokens[at]]
                    for i in range(states):
                        for j in range(states):
                            row[j] = rows[i, 0] * matrix[0, j]
                        for k in range(1, states):
                            for j in range(states):
                                row[j] += rows[i, k] * matrix[k, j]
                        for j in range(states):
                            rows[i, j] = row[j]
                position = end
                for i in range(states):
                    count, vanishing = rescale(rows[i])
                    times[i] += count
                    flags[block] |= vanishing
            products[block] = rows
            exponents[block] = times

    @kernel
    def expect(
        tokens,
        bounds,
        jobs,
        first,
        last,
        starts,
        ends,
        shares,
        matrices,
        mirrored,
        interval,
        weights,
        flags,
    ):
        longest = 0
        for job in range(first, last):
            block = jobs[job]
            longest = max(longest, bounds[block + 1] - bounds[block])
        forward = np.empty((longest + 1, states))
        backward = np.empty(states)
        stepped = np.empty(states)
        for job in range(first, last):
            block = jobs[job]
            begin, stop = bounds[block], bounds[block + 1]
            length = stop - begin
            forward[0] = starts[job]
            for at in range(length):
                if at % interval == 0:
                    rescale(forward[at])
                matrix = matrices[tokens[begin + at]]
                for j in range(states):
                    forward[at + 1, j] = forward[at, 0] * matrix[0, j]
                for k in range(1, states):
                    for j in range(states):
                        forward[at + 1, j] += forward[at, k] * matrix[k, j]
            backward[:] = ends[job]
            factor = 0.0
            fresh = True
            for at in range(length - 1, -1, -1):
                token = tokens[begin + at]
                matrix = mirrored[token]
                for j in range(states):
                    stepped[j] = backward[0] * matrix[0, j]
                for k in range(1, states):
                    for j in range(states):
                        stepped[j] += backward[k] * matrix[k, j]
                if fresh:
                    total = 0.0
                    for j in range(states):
                        total += forward[at, j] * stepped[j]
                    if total < LOST:
                        flags[block] = True
                        break
                    factor = shares[job] / total
                    fresh = False
                for i in range(states):
                    share = forward[at, i] * factor
                    for j in range(states):
                        weights[token, i, j] += share * backward[j]
                for j in range(states):
                    backward[j] = stepped[j]
                if at % interval == 0:
                    rescale(backward)
                    fresh = True

    return BlockKernels(transfer, expect)
