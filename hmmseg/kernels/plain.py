"""The kernels of blocks for any number of states, as loops."""

import numpy as np

from hmmseg.kernels.arrays import copy, fill
from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.limits import LOST, SCALE_BITS, VANISHING
from hmmseg.kernels.tokens import base_codes

__all__ = ["add_posteriors", "expect", "rescale", "transfer"]

_SCALE = 2.0**SCALE_BITS
_LOW = 2.0**-SCALE_BITS


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
        vanishing |= 0.0 < value < VANISHING
    return times, vanishing


@kernel
def _vector_times_matrix(vector, matrix, out):
    for j in range(out.size):
        total = vector[0] * matrix[0, j]
        for k in range(1, vector.size):
            total += vector[k] * matrix[k, j]
        out[j] = total


@kernel
def transfer(tokens, bounds, blocks, matrices, interval, products, exponents, flags):
    """Fill the transfer matrices of blocks.

    Parameters
    ----------
    tokens : uint16[token] or uint32[token]
    bounds : int64[block + 1]
        Token offsets of all blocks.
    blocks : int64[block]
        The blocks to do.
    matrices : float64[token, state, state]
        As filled by :func:`hmmseg.kernels.matrices.fill_token_matrices`.
    interval : int
        Tokens between two looks at the scale.
    products : float64[block, state, state]
        Filled for these blocks.
    exponents : float64[block, state]
        Filled: row i is to be multiplied by 2**(-64 exponents[i]).
    flags : bool[block]
        Set where a value nearly vanished.
    """
    row = np.empty(matrices.shape[1])
    for block in blocks:
        rows = products[block]
        fill(exponents[block], 0.0)
        for i in range(row.size):
            fill(rows[i], 0.0)
            rows[i, i] = 1.0
            for at in range(bounds[block], bounds[block + 1]):
                _vector_times_matrix(rows[i], matrices[tokens[at]], row)
                copy(row, rows[i])
                if (at - bounds[block]) % interval == interval - 1 or at == bounds[block + 1] - 1:
                    count, vanishing = rescale(rows[i])
                    exponents[block, i] += count
                    flags[block] |= vanishing


@kernel
def expect(
    tokens, bounds, blocks, starts, ends, shares, matrices, mirrored, interval, weights, flags
):
    """Add the pair weights of blocks between known vectors.

    Parameters
    ----------
    tokens, bounds
        As for :func:`transfer`.
    blocks : int64[job]
        The block of each job.
    starts, ends : float64[job, state]
        Forward vector before, backward vector behind the block, each up to a factor.
    shares : float64[job]
        Probability with which the job counts.
    matrices, mirrored : float64[token, state, state]
        Matrices and their transposes.
    interval : int
        Tokens between two looks at the scale.
    weights : float64[token, state, state]
        Added to: share * forward[i] backward[j] / P(block), which times the matrix is the
        expected number of passages through the token from state i to state j.
    flags : bool[block]
        Set where a value was lost.
    """
    states = matrices.shape[1]
    longest = 0
    for block in blocks:
        longest = max(longest, bounds[block + 1] - bounds[block])
    forward = np.empty((longest + 1, states))
    stepped = np.empty(states)
    for job in range(blocks.size):
        block = blocks[job]
        stop = bounds[block + 1]
        length = stop - bounds[block]
        # Row ``left`` is the vector before the token behind which ``left - 1`` follow.
        copy(starts[job], forward[length])
        for left in range(length, 0, -1):
            if left % interval == 0:
                rescale(forward[left])
            _vector_times_matrix(forward[left], matrices[tokens[stop - left]], forward[left - 1])
        backward = ends[job].copy()
        factor = 0.0
        for left in range(1, length + 1):
            token = tokens[stop - left]
            fresh = (left - 1) % interval == 0
            if fresh:
                rescale(backward)
            _vector_times_matrix(backward, mirrored[token], stepped)
            if fresh:
                total = 0.0
                for i in range(states):
                    total += forward[left, i] * stepped[i]
                if total < LOST:
                    flags[block] = True
                    break
                factor = shares[job] / total
            for i in range(states):
                share = forward[left, i] * factor
                for j in range(states):
                    weights[token, i, j] += share * backward[j]
            copy(stepped, backward)


@kernel
def add_posteriors(
    bases, order, closed, edges, blocks, starts, ends, shares, matrices, mirrored, interval,
    posterior, origin, step,
):  # fmt: skip
    """Add the posteriors of blocks between known vectors.

    Parameters
    ----------
    bases : uint8[position]
        A whole contig.
    order : int
        Context length.
    closed : bool
        Whether contexts reach round the end.
    edges : int64[block + 1]
        Base positions of all blocks.
    blocks, starts, ends, shares
        Jobs, as for :func:`expect`.
    matrices, mirrored : float64[code, state, state]
        Matrices of single bases and their transposes.
    interval : int
        Bases between two looks at the scale.
    posterior : float64[row, state]
        Added to: the base at ``position`` has row ``origin + step * position``.
    origin, step : int
        A step of -1 is for the reverse strand.

    Returns
    -------
    bool
        Whether no value was lost.
    """
    states = matrices.shape[1]
    longest = 0
    for block in blocks:
        longest = max(longest, edges[block + 1] - edges[block])
    codes = np.empty(longest, np.uint32)
    forward = np.empty((longest + 1, states))
    stepped = np.empty(states)
    for job in range(blocks.size):
        begin, stop = edges[blocks[job]], edges[blocks[job] + 1]
        length = stop - begin
        base_codes(bases, order, closed, begin, stop, codes)
        copy(starts[job], stepped)
        for left in range(length, 0, -1):
            if left % interval == 0:
                rescale(stepped)
            _vector_times_matrix(stepped, matrices[codes[length - left]], forward[left])
            copy(forward[left], stepped)
        backward = ends[job].copy()
        factor = 0.0
        for left in range(1, length + 1):
            if (left - 1) % interval == 0:
                rescale(backward)
                total = 0.0
                for j in range(states):
                    total += forward[left, j] * backward[j]
                if total < LOST:
                    return False
                factor = shares[job] / total
            for j in range(states):
                more = forward[left, j] * (backward[j] * factor)
                posterior[origin + step * (stop - left), j] += more
            _vector_times_matrix(backward, mirrored[codes[length - left]], stepped)
            copy(stepped, backward)
    return True
