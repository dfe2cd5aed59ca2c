"""Fifty-digit arithmetic on transition matrices, for the plain twins."""

from typing import Any

import mpmath  # type: ignore[import-untyped, unused-ignore]
import numpy as np
from numpy.typing import NDArray

__all__ = ["EXACT", "log_closed_paths", "stationary"]

EXACT = mpmath.mp.clone()
EXACT.dps = 50

Floats = NDArray[np.float64]


def stationary(transitions: Floats) -> Floats:
    """Return the stationary distribution: a row of a high power of (I + T) / 2.

    Half a step in place keeps periodic chains from oscillating and has the same limit.
    """
    states = len(transitions)
    matrix = [
        [(EXACT.mpf(float(transitions[i, j])) + (i == j)) / 2 for j in range(states)]
        for i in range(states)
    ]
    for _ in range(400):
        matrix = _product(matrix, matrix)
        # Rows of floats sum to one only to 1e-16, which 2**400 steps would amplify.
        matrix = [[value / sum(row) for value in row] for row in matrix]
        spread = max(max(column) - min(column) for column in zip(*matrix, strict=True))
        if spread < EXACT.mpf(10) ** -30:
            return np.array([float(value) for value in matrix[0]])
    message = "the chain has more than one stationary distribution"
    raise ValueError(message)


def _product(a: list[list[Any]], b: list[list[Any]]) -> list[list[Any]]:
    size = range(len(a))
    return [[sum(a[i][k] * b[k][j] for k in size) for j in size] for i in size]


def log_closed_paths(transitions: Floats, length: int) -> float:
    """Return log trace(T ** length)."""
    states = range(len(transitions))
    power = [[EXACT.mpf(int(i == j)) for j in states] for i in states]
    square = [[EXACT.mpf(float(transitions[i, j])) for j in states] for i in states]
    remaining = length
    while remaining:
        if remaining % 2:
            power = _product(power, square)
        square = _product(square, square)
        remaining //= 2
    return float(EXACT.log(sum(power[i][i] for i in states)))
