"""The logarithm of the kernels by NumPy, for reports, which need not wait for compiled code."""

import math

import numpy as np
from numpy.typing import NDArray

__all__ = ["LN2", "LN2_HIGH", "LN2_LOW", "SQRT_HALF", "logarithms"]

LN2 = 0.6931471805599453

LN2_HIGH = 0.693147180369123816490e00
"""The leading bits of ln 2: a multiple of it by an exponent is exact."""

LN2_LOW = 1.90821492927058770002e-10
SQRT_HALF = math.sqrt(0.5)


def logarithms(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return float64[...] natural logarithms; minus infinity at 0.

    They have the bits of :func:`~hmmseg.kernels.elementary.log`, whose steps these are.

    Parameters
    ----------
    values
        float64[...], none negative or infinite.
    """
    mantissa, exponent = np.frexp(values)
    small = mantissa < SQRT_HALF
    f = np.where(small, mantissa * 2.0, mantissa) - 1.0
    power = (exponent - small).astype(np.float64)
    s = f / (2.0 + f)
    z = s * s
    tail = np.full(f.shape, 1.0 / 23.0)
    for odd in (21.0, 19.0, 17.0, 15.0, 13.0, 11.0, 9.0, 7.0, 5.0, 3.0):
        tail = tail * z + 1.0 / odd
    logs = power * LN2_HIGH + (f - (s * (f - 2.0 * z * tail) - power * LN2_LOW))
    return np.where(values == 0, -np.inf, logs)
