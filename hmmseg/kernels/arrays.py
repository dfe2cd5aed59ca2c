"""Copying and comparing without slices.

A slice that is assigned to makes the compiler build a message for shapes that do not fit, text
and all, which takes it many seconds; these loops take none.
"""

from hmmseg.kernels.compiling import helper

__all__ = ["all_zero", "copy", "copy_matrix", "fill", "largest"]


@helper
def copy(values, out):
    """Fill a flat array with the values of another."""
    for i in range(out.size):
        out[i] = values[i]


@helper
def copy_matrix(values, out):
    """Fill a matrix with the values of another."""
    for i in range(out.shape[0]):
        for j in range(out.shape[1]):
            out[i, j] = values[i, j]


@helper
def fill(out, value):
    """Fill a flat array with one value."""
    for i in range(out.size):
        out[i] = value


@helper
def largest(values):
    """Return the largest value of a flat array."""
    best = values[0]
    for value in values:
        best = max(best, value)
    return best


@helper
def all_zero(matrix):
    """Tell whether a matrix holds nothing but zeros."""
    for i in range(matrix.shape[0]):
        for j in range(matrix.shape[1]):
            if matrix[i, j] != 0.0:
                return False
    return True
