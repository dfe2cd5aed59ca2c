"""Logarithm and exponential from sums and products alone.

The C library picks its own version by the processor, and the versions differ in the last bit.
These give the same bits everywhere, to within 2 units in the last place.
"""

import math

import numpy as np

from hmmseg.kernels.compiling import kernel
from hmmseg.model.logarithm import LN2, LN2_HIGH, LN2_LOW, SQRT_HALF

__all__ = ["LN2", "exp", "log", "log_array", "power_of_two"]

_LARGEST_EXPONENT = 1023
_SMALLEST_EXPONENT = -1074
_EXP_OVERFLOW = 709.78
_EXP_UNDERFLOW = -745.2


@kernel
def power_of_two(exponent):
    """Return 2**exponent exactly; 0 below the range of a double, infinity above it."""
    if exponent < _SMALLEST_EXPONENT:
        return 0.0
    if exponent > _LARGEST_EXPONENT:
        return np.inf
    return math.ldexp(1.0, int(exponent))


@kernel
def log(x):
    """Return the natural logarithm; minus infinity at 0.

    With x = m 2**e and m near 1: ln m = 2 artanh(s), s = (m - 1) / (m + 1), by its series.
    """
    if x == 0.0:
        return -np.inf
    mantissa, exponent = math.frexp(x)
    if mantissa < SQRT_HALF:
        mantissa *= 2.0
        exponent -= 1
    f = mantissa - 1.0
    s = f / (2.0 + f)
    z = s * s
    # |s| <= 0.1716, so the first term left out is below 2e-18 of the sum.
    tail = 1.0 / 23.0
    for odd in (21.0, 19.0, 17.0, 15.0, 13.0, 11.0, 9.0, 7.0, 5.0, 3.0):
        tail = tail * z + 1.0 / odd
    # ln(1 + f) = f - s (f - 2 z tail): the leading term stays exact.
    return exponent * LN2_HIGH + (f - (s * (f - 2.0 * z * tail) - exponent * LN2_LOW))


@kernel
def exp(x):
    """Return the exponential; 0 and infinity beyond the range of a double."""
    if x < _EXP_UNDERFLOW:
        return 0.0
    if x > _EXP_OVERFLOW:
        return np.inf
    n = math.floor(x / LN2 + 0.5)
    r = (x - n * LN2_HIGH) - n * LN2_LOW
    # |r| <= 0.347: fourteen terms of the Taylor series reach the last place.
    total = 1.0
    for term in (14.0, 13.0, 12.0, 11.0, 10.0, 9.0, 8.0, 7.0, 6.0, 5.0, 4.0, 3.0, 2.0, 1.0):
        total = 1.0 + total * r / term
    half = int(n) // 2
    return total * power_of_two(half) * power_of_two(int(n) - half)


@kernel
def log_array(values):
    """Return float64[...] natural logarithms of a flat array."""
    out = np.empty(values.size)
    for i in range(values.size):
        out[i] = log(values[i])
    return out
