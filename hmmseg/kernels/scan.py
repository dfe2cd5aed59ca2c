"""From the transfer matrices of blocks to the vectors at their ends.

A scaled matrix is ``values[i, j] * 2**(-SCALE_BITS * times[i])``: each row has a count of its
own, because with a shared one the row that matters could vanish beside a larger one. Every
function tells whether a value was lost; its contig is then done again with logarithms.
"""

import numpy as np

from hmmseg.kernels.arrays import copy, copy_matrix, fill, largest
from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.elementary import log, power_of_two
from hmmseg.kernels.limits import LOST, SCALE_BITS
from hmmseg.kernels.plain import rescale

__all__ = ["log_scaled", "log_trace_of_power", "scan_closed", "scan_contigs", "scan_linear"]

_LN2 = 0.6931471805599453


@kernel
def log_scaled(value, times):
    """Return the natural logarithm of value * 2**(-SCALE_BITS * times)."""
    return log(value) - times * SCALE_BITS * _LN2


@kernel
def _lowest_count(vector, times):
    lowest = np.iinfo(np.int64).max
    for i in range(vector.size):
        if vector[i] > 0.0:
            lowest = min(lowest, times[i])
    return lowest


@kernel
def _row_times_matrix(row, values, times, out):
    """Fill out = row (a vector) times a scaled matrix; return its count and whether it lost."""
    lowest = _lowest_count(row, times)
    fill(out, 0.0)
    lost = False
    for k in range(row.size):
        if row[k] == 0.0:
            continue
        factor = row[k] * power_of_two(-SCALE_BITS * (times[k] - lowest))
        for j in range(out.size):
            term = factor * values[k, j]
            lost |= term == 0.0 and values[k, j] > 0.0
            out[j] += term
    count, vanishing = rescale(out)
    if largest(out) == 0.0:
        return 0, True
    return lowest + count, lost or vanishing


@kernel
def _matrix_times_column(values, times, column, out):
    """Fill out = a scaled matrix times column, up to a factor; return whether it lost."""
    lost = False
    for i in range(out.size):
        total = 0.0
        for j in range(column.size):
            term = values[i, j] * column[j]
            lost |= term == 0.0 and values[i, j] > 0.0 and column[j] > 0.0
            total += term
        out[i] = total
    return _align(out, times) or lost


@kernel
def _align(vector, times):
    """Bring entries with counts of their own to one scale; return whether one was lost."""
    lowest = _lowest_count(vector, times)
    lost = False
    for i in range(vector.size):
        if vector[i] > 0.0:
            vector[i] *= power_of_two(-SCALE_BITS * (times[i] - lowest))
            lost |= vector[i] == 0.0
    _, vanishing = rescale(vector)
    return lost or vanishing


@kernel
def scan_linear(products, times, first, last, start, starts, ends, head):
    """Fill the vectors at both ends of the blocks of one open contig.

    Parameters
    ----------
    products : float64[block, state, state]
        Transfer matrices.
    times : int64[block, state]
        Scaling counts of their rows.
    first, last : int
        The contig's blocks, half-open.
    start : float64[state]
        Forward vector at the contig's first base.
    starts, ends : float64[block, state]
        Filled: forward vector before, and backward vector behind each block, up to a factor.
    head : float64[state]
        Filled: backward vector behind the contig's first base, up to a factor.

    Returns
    -------
    tuple of float, int, bool
        P(contig) as a value and its scaling count; whether a value was lost on the way.
    """
    current = start.copy()
    following = np.empty_like(start)
    count, lost = rescale(current)
    for block in range(first, last):
        copy(current, starts[block])
        more, vanished = _row_times_matrix(current, products[block], times[block], following)
        count += more
        lost |= vanished
        copy(following, current)
    total = 0.0
    for value in current:
        total += value
    fill(head, 1.0)
    for block in range(last - 1, first - 1, -1):
        copy(head, ends[block])
        lost |= _matrix_times_column(products[block], times[block], head, following)
        copy(following, head)
    return total, count, lost or total == 0.0


@kernel
def _multiply_scaled(a, a_times, b, b_times, out, out_times):
    """Fill out = a b for scaled matrices; return whether a value was lost."""
    lost = False
    for i in range(a.shape[0]):
        if largest(a[i]) == 0.0:
            fill(out[i], 0.0)
            out_times[i] = 0
            continue
        count, vanished = _row_times_matrix(a[i], b, b_times, out[i])
        lost |= vanished and largest(out[i]) > 0.0
        out_times[i] = a_times[i] + count
    return lost


@kernel
def _scaled_trace(values, times):
    """Return the trace of a scaled matrix as a value and its count."""
    diagonal = np.empty(values.shape[0])
    for i in range(values.shape[0]):
        diagonal[i] = values[i, i]
    lowest = _lowest_count(diagonal, times)
    total = 0.0
    for i in range(values.shape[0]):
        if diagonal[i] > 0.0:
            total += diagonal[i] * power_of_two(-SCALE_BITS * (times[i] - lowest))
    return total, lowest


@kernel
def scan_closed(products, times, first, last, ends, shares):
    """Fill the vectors at the far ends of the blocks of one closed contig, for each state.

    Nothing is known at the cut, so a block is entered in state i with the probability that all
    paths round the circle give to it, and left with what leads back to i.

    Parameters
    ----------
    products, times, first, last
        As for :func:`scan_linear`.
    ends : float64[block, state, state]
        Filled: ``ends[block, i]`` is the backward vector behind the block, given that the
        state before it is i, up to a factor.
    shares : float64[block, state]
        Filled: P(state before the block is i | contig).

    Returns
    -------
    tuple of float, int, bool
        Trace of the whole product as a value and its count; whether a value was lost.
    """
    states = products.shape[1]
    before = np.zeros((last - first + 1, states, states))
    before_times = np.zeros((last - first + 1, states), np.int64)
    for i in range(states):
        before[0, i, i] = 1.0
    lost = False
    for block in range(first, last):
        at = block - first
        lost |= _multiply_scaled(
            before[at], before_times[at], products[block], times[block],
            before[at + 1], before_times[at + 1],
        )  # fmt: skip
    trace, trace_count = _scaled_trace(before[last - first], before_times[last - first])
    behind = before[0].copy()
    behind_times = before_times[0].copy()
    around = np.empty((states, states))
    around_times = np.empty(states, np.int64)
    column = np.empty(states)
    whole = np.empty((states, states))
    whole_times = np.empty(states, np.int64)
    for block in range(last - 1, first - 1, -1):
        at = block - first
        lost |= _multiply_scaled(
            behind, behind_times, before[at], before_times[at], around, around_times
        )
        lost |= _multiply_scaled(
            products[block], times[block], around, around_times, whole, whole_times
        )
        total, count = _scaled_trace(whole, whole_times)
        for i in range(states):
            for j in range(states):
                column[j] = around[j, i]
            lost |= _align(column, around_times) and largest(column) > 0.0
            copy(column, ends[block, i])
            shares[block, i] = 0.0
            if whole[i, i] > 0.0:
                scale = power_of_two(-SCALE_BITS * (whole_times[i] - count))
                shares[block, i] = whole[i, i] * scale / total
        lost |= _multiply_scaled(
            products[block], times[block], behind, behind_times, whole, whole_times
        )
        copy_matrix(whole, behind)
        copy(whole_times, behind_times)
    return trace, trace_count, lost or trace == 0.0


@kernel
def log_trace_of_power(transitions, exponent):
    """Return log trace(T**exponent) for float64[state, state] T, by repeated squaring."""
    states = transitions.shape[0]
    result = np.zeros((states, states))
    for i in range(states):
        result[i, i] = 1.0
    result_times = np.zeros(states, np.int64)
    square = transitions.copy()
    square_times = np.zeros(states, np.int64)
    product = np.empty((states, states))
    product_times = np.empty(states, np.int64)
    while exponent > 0:
        if exponent & 1:
            _multiply_scaled(result, result_times, square, square_times, product, product_times)
            copy_matrix(product, result)
            copy(product_times, result_times)
        _multiply_scaled(square, square_times, square, square_times, product, product_times)
        copy_matrix(product, square)
        copy(product_times, square_times)
        exponent >>= 1
    total, count = _scaled_trace(result, result_times)
    return log_scaled(total, count)


@kernel
def scan_contigs(
    products, times, contig_blocks, closed, first_vectors, starts, ends, heads, logs, lost
):  # fmt: skip
    """Scan all open contigs of a stream.

    Parameters
    ----------
    products, times
        As for :func:`scan_linear`.
    contig_blocks : int64[contig + 1]
        Block offsets.
    closed : bool[contig]
        Contigs that are left out.
    first_vectors : float64[contig, state]
        Forward vectors at the contigs' first bases.
    starts, ends : float64[block, state]
        Filled as by :func:`scan_linear`.
    heads : float64[contig, state]
        Filled: posterior of the state at the first base.
    logs : float64[contig]
        Filled: log-likelihoods in nats.
    lost : bool[contig]
        Set where a value was lost.
    """
    head = np.empty(first_vectors.shape[1])
    for contig in range(closed.size):
        if closed[contig]:
            continue
        value, count, vanished = scan_linear(
            products, times, contig_blocks[contig], contig_blocks[contig + 1],
            first_vectors[contig], starts, ends, head,
        )  # fmt: skip
        logs[contig] = log_scaled(value, count)
        lost[contig] |= vanished
        total = 0.0
        for j in range(head.size):
            heads[contig, j] = first_vectors[contig, j] * head[j]
            total += heads[contig, j]
        if total < LOST:
            lost[contig] = True
        else:
            for j in range(head.size):
                heads[contig, j] /= total
