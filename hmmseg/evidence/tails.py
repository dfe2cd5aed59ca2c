"""Chances of values far out, from sums and products and a logarithm of our own.

The C library's functions differ in the last bit from processor to processor.
"""

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from hmmseg.kernels.elementary import exp, log

__all__ = ["beyond", "chi_square_tail", "holm", "normal_tail"]

_TERMS = 10_000
_ENOUGH = 1e-16
_SHARE = 0.1


def chi_square_tail(value: float, freedom: int) -> float:
    """Return P(chi-square >= value): a finite sum for whole degrees of freedom.

    Parameters
    ----------
    value
        From 0 up.
    freedom
        Degrees of freedom, from 1 up.

    References
    ----------
    Abramowitz & Stegun 1964, Handbook of Mathematical Functions, 26.4.4 and 26.4.5.
    """
    if value <= 0:
        return 1.0
    half = value / 2
    # Steps of two degrees add exp(-half) half**s / Gamma(s + 1), s = 0, 1 ... or 1/2, 3/2 ...
    total, power = (0.0, 0.0) if freedom % 2 == 0 else (normal_tail(math.sqrt(value)), 0.5)
    step = -half + power * log(half) - (log(math.sqrt(math.pi) / 2) if power else 0.0)
    while power < freedom / 2:
        total += exp(step)
        power += 1.0
        step += log(half / power)
    return min(total, 1.0)


def normal_tail(z: float) -> float:
    """Return P(abs(normal) >= z), z from 0 up.

    References
    ----------
    Abramowitz & Stegun 1964, 26.2.11 (series) and 26.2.14 (continued fraction).
    """
    density = exp(-z * z / 2) * math.sqrt(2 / math.pi)
    if z < 3:
        term = total = z
        for odd in range(3, _TERMS, 2):
            term *= z * z / odd
            total += term
            if term < total * _ENOUGH:
                break
        return max(1.0 - density * total, 0.0)
    fraction = z
    for count in range(200, 0, -1):
        fraction = z + count / fraction
    return density / fraction


def beyond(values: NDArray[np.float64], value: float) -> float:
    """Return the chance of a value at least so large, given a sample.

    Within the sample it is the share of larger ones, one added to both; in the largest tenth,
    where that would be coarse, the tail is taken for exponential.

    Parameters
    ----------
    values
        float64[draw]: the sample.
    value
        What was observed.

    References
    ----------
    Knijnenburg, Wessels, Reinders & Shmulevich 2009, Bioinformatics 25: i161-i168 (tails of
    few permutations); Pickands 1975, Annals of Statistics 3: 119-131.
    """
    ordered = np.sort(values)
    cut = float(ordered[-max(int(_SHARE * len(ordered)), 1)])
    above = ordered[ordered >= cut]
    if value <= cut or above[-1] == cut:
        return (int(np.count_nonzero(ordered >= value)) + 1) / (len(ordered) + 1)
    mean = float((above - cut).sum()) / len(above)
    return len(above) / len(ordered) * exp(-(value - cut) / mean)


def holm(chances: Sequence[float]) -> list[float]:
    """Return p-values adjusted for their number, by Holm's step-down procedure.

    References
    ----------
    Holm 1979, Scandinavian Journal of Statistics 6: 65-70.
    """
    order = np.argsort(np.array(chances), kind="stable").tolist()
    adjusted, largest = [1.0] * len(chances), 0.0
    for rank, at in enumerate(order):
        largest = max(largest, min(1.0, chances[at] * (len(chances) - rank)))
        adjusted[at] = largest
    return adjusted
