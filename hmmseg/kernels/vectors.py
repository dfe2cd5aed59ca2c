"""Small vectors that stay in registers: the one place where loops over states are unrolled.

Left to itself, the compiler neither keeps a loop over two or eight states in registers nor
packs it, because it cannot know that the arrays that are read and written never overlap. Each
function therefore exists twice: here in NumPy, which says what it means and runs where the JIT
is switched off, and in :mod:`hmmseg.kernels.instructions` on a vector of as many doubles as
there are states. Both take the same sums and products of every element in the same order. The
compiler cuts a vector into registers as wide as the processor has, which leaves the values
as they are.

A *vector* holds one value a state. *Columns* are the columns of a square matrix, a vector each.
"""

import numpy as np
from numba import config

from hmmseg.kernels.limits import SCALE_BITS, VANISHING

__all__ = [
    "MOST_STATES",
    "add_outer",
    "add_to",
    "identity",
    "inner",
    "item",
    "load",
    "plus",
    "product",
    "rescaled",
    "rescaled_and_counted",
    "rescaled_columns",
    "scaled",
    "step_columns",
    "store",
    "store_columns",
    "times_row",
]

MOST_STATES = 8
"""The most values for which unrolling pays: beyond, code grows faster than it gains."""


def item(values, at):
    """Return element ``at`` of a flat array; the compiler need not look for a negative index."""
    return values[at]


def load(rows, at, size):
    """Return row ``at`` of float64[row, state] as a vector; ``size`` is a constant.

    Parameters
    ----------
    rows : float64[row, state]
    at : int
        The row.
    size : int
        Number of states, a constant.
    """
    return rows[at, :size].copy()


def store(rows, at, vector):
    """Fill row ``at`` of float64[row, state].

    Parameters
    ----------
    rows : float64[row, state]
        Filled there.
    at : int
        The row.
    vector : float64[state]
    """
    rows[at] = vector


def scaled(vector, factor):
    """Return a vector times a number."""
    return vector * factor


def times_row(vector, rows, at):
    """Return the products of a vector's elements with those of row ``at``.

    Parameters
    ----------
    vector : float64[state]
    rows : float64[row, state]
    at : int
        The row.
    """
    return rows[at] * vector


def plus(vector, other):
    """Return the sum of two vectors."""
    return vector + other


def inner(rows, at, vector):
    """Return the sum over states of row ``at`` times a vector, from the first state on.

    Parameters
    ----------
    rows : float64[row, state]
    at : int
        The row.
    vector : float64[state]
    """
    total = 0.0
    for term in rows[at] * vector:
        total += term
    return total


def product(vector, matrices, token):
    """Return the vector times the token's matrix.

    Parameters
    ----------
    vector : float64[state]
    matrices : float64[token, state, state]
    token : int
    """
    matrix = matrices[token]
    out = vector[0] * matrix[0]
    for k in range(1, vector.size):
        out = out + vector[k] * matrix[k]
    return out


def add_outer(weights, token, rows, at, vector):
    """Add a column times a row to a matrix.

    Parameters
    ----------
    weights : float64[token, state, state]
        Added to.
    token : int
        Which of the matrices.
    rows : float64[row, state]
        One of them is the column.
    at : int
        Which.
    vector
        The row.

    Parameters
    ----------
    weights : float64[token, state, state]
        Added to.
    token : int
    rows : float64[row, state]
    at : int
        The row.
    vector : float64[state]
    """
    weights[token] += rows[at][:, None] * vector


def add_to(rows, at, vector):
    """Add a vector to row ``at`` of float64[row, state].

    Parameters
    ----------
    rows : float64[row, state]
        Added to.
    at : int
        The row.
    vector : float64[state]
    """
    rows[at] += vector


def identity(size):
    """Return the columns of the identity; ``size`` is a constant."""
    return tuple(np.eye(size))


def step_columns(columns, matrices, token):
    """Return the columns of a matrix times the token's matrix.

    Parameters
    ----------
    columns : tuple of float64[state]
    matrices : float64[token, state, state]
    token : int
    """
    matrix = matrices[token]
    out = []
    for j in range(len(columns)):
        column = columns[0] * matrix[0, j]
        for k in range(1, len(columns)):
            column = column + columns[k] * matrix[k, j]
        out.append(column)
    return tuple(out)


def store_columns(matrices, at, columns):
    """Fill matrix ``at`` of float64[matrix, state, state].

    Parameters
    ----------
    matrices : float64[matrix, state, state]
        Filled there.
    at : int
        The matrix.
    columns : tuple of float64[state]
    """
    matrices[at] = np.stack(columns, axis=1)


def _scaling(largest):
    """Return the powers of 2**64 that bring values near 1, and their exponents."""
    _, exponents = np.frexp(largest)
    counts = np.where(largest > 0, (1 - exponents) // SCALE_BITS, 0)
    return np.ldexp(1.0, SCALE_BITS * counts), counts.astype(np.float64)


def rescaled(vector):
    """Return a vector times the power of 2**64 that brings its largest value near 1."""
    factor, _ = _scaling(vector.max())
    return vector * factor


def rescaled_and_counted(vector):
    """Return a rescaled vector, the power's exponent, and whether a value nearly vanished."""
    factor, count = _scaling(np.full(vector.size, vector.max()))
    vector = vector * factor
    return vector, count, bool(((vector > 0) & (vector < VANISHING)).any())


def rescaled_columns(columns):
    """Bring every row of a matrix near 1 by a power of 2**64 of its own.

    Returns
    -------
    tuple of columns, vector, bool
        The scaled columns; the exponents of the rows' powers; whether a value nearly vanished.
    """
    matrix = np.stack(columns)
    factors, counts = _scaling(matrix.max(axis=0))
    matrix = matrix * factors
    vanishing = bool(((matrix > 0) & (matrix < VANISHING)).any())
    return tuple(matrix), counts, vanishing


if not config.DISABLE_JIT:
    from hmmseg.kernels.instructions import (
        add_outer,
        add_to,
        identity,
        inner,
        item,
        load,
        plus,
        product,
        rescaled,
        rescaled_and_counted,
        rescaled_columns,
        scaled,
        step_columns,
        store,
        store_columns,
        times_row,
    )
