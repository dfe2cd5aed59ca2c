"""Vectors at the ends of blocks without transfer matrices: straight through open contigs.

A transfer matrix costs K**3 products a token and lets every block begin at once. For more than a
few states it is cheaper to carry one vector forward and one backward through the contig, K**2
products each, although then a contig occupies one thread.
"""

from collections.abc import Callable
from functools import cache
from typing import Any

import numpy as np

from hmmseg.kernels.arrays import fill
from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.limits import LOST
from hmmseg.kernels.scan import log_scaled
from hmmseg.kernels.vectors import (
    MOST_STATES,
    item,
    load,
    plus,
    product,
    rescaled_and_counted,
    store,
)

__all__ = ["FEWEST_STATES", "chain_kernel", "chains_pay"]

FEWEST_STATES = 5


def chains_pay(states: int) -> bool:
    """Tell whether vectors are carried through contigs with so many states."""
    return FEWEST_STATES <= states <= MOST_STATES


@cache
def chain_kernel(states: int) -> Callable[..., Any]:
    """Return the kernel for a number of states, which is a constant in it."""

    @kernel
    def through(
        tokens, bounds, contig_blocks, contigs, first_vectors, matrices, mirrored, interval,
        starts, ends, heads, logs, lost,
    ):  # fmt: skip
        """Do as :func:`hmmseg.kernels.scan.scan_contigs` for int64[...] numbers of contigs."""
        rows = np.zeros((3, states))
        fill(rows[2], 1.0)
        for contig in contigs:
            first, last = contig_blocks[contig], contig_blocks[contig + 1]
            # The two ways are independent: while one waits for a result, the other goes on.
            f, times, vanished = rescaled_and_counted(load(first_vectors, contig, states))
            b = load(rows, 2, states)
            f_block, b_block = first, last - 1
            f_at, b_at = bounds[first], bounds[last]
            if first < last:
                store(starts, f_block, f)
                store(ends, b_block, b)
            while f_block < last:
                steps = min(interval, bounds[f_block + 1] - f_at, b_at - bounds[b_block])
                for _ in range(steps):
                    b_at -= 1
                    f = product(f, matrices, item(tokens, f_at))
                    b = product(b, mirrored, item(tokens, b_at))
                    f_at += 1
                f, more, vanishing = rescaled_and_counted(f)
                times = plus(times, more)
                vanished |= vanishing
                b, more, vanishing = rescaled_and_counted(b)
                vanished |= vanishing
                if f_at == bounds[f_block + 1]:
                    f_block += 1
                    if f_block < last:
                        store(starts, f_block, f)
                if b_at == bounds[b_block]:
                    b_block -= 1
                    if b_block >= first:
                        store(ends, b_block, b)
            store(rows, 0, f)
            store(rows, 1, times)
            store(heads, contig, b)
            total = 0.0
            for j in range(states):
                total += rows[0, j]
            logs[contig] = log_scaled(total, np.int64(rows[1, 0]))
            whole = 0.0
            for j in range(states):
                heads[contig, j] *= first_vectors[contig, j]
                whole += heads[contig, j]
            if total == 0.0 or whole < LOST or vanished:
                lost[contig] = True
            else:
                for j in range(states):
                    heads[contig, j] /= whole

    return through
