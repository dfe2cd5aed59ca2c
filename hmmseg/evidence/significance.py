"""How many regions chance alone would give, from regions called in sequence without any.

With ``n`` null regions at or above a score in ``null`` bases, an assembly of ``real`` bases is
expected to have

    E = (1 + n) real / null

such regions by chance. The 1 counts the real assembly as one more null, so that nothing is ever
impossible and the estimate errs on the safe side. The chance of at least one is
``p = 1 - exp(-E)``, and the share of false ones among the ``r`` real regions at or above the
score is estimated by ``E / r``, of which the smallest at any lower threshold is the region's q.

References
----------
Barber & Candès 2015, Annals of Statistics 43: 2055-2085, for the 1.
Karlin & Altschul 1990, PNAS 87: 2264-2268, for p from E.
Storey & Tibshirani 2003, PNAS 100: 9440-9445, for q.
"""

from math import sqrt
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.kernels.elementary import exp, log_array

__all__ = [
    "Significance",
    "at_or_above",
    "significance",
    "smallest_q",
    "thresholds",
    "upper_counts",
]

_LEVEL = 0.95
_PRECISION = 1e-10
_RATIO = 1.15
_BITS_DECIMALS = 3


class Significance(NamedTuple):
    """What chance has to say of each region.

    Attributes
    ----------
    expected : float64[region]
        Regions expected by chance with this score or a higher one.
    p_value : float64[region]
        Chance of at least one of them.
    q_value : float64[region]
        Estimated share of false regions among those kept when this one is.
    """

    expected: NDArray[np.float64]
    p_value: NDArray[np.float64]
    q_value: NDArray[np.float64]


def at_or_above(
    sorted_scores: NDArray[np.float64], levels: NDArray[np.float64]
) -> NDArray[np.int64]:
    """Return how many of some ascending scores reach each level."""
    return len(sorted_scores) - np.searchsorted(sorted_scores, levels, side="left")


def significance(
    real: NDArray[np.float64], null: NDArray[np.float64], ratio: float
) -> Significance:
    """Judge real regions by null ones.

    Parameters
    ----------
    real
        float64[region]: scores.
    null
        float64[null region]: scores.
    ratio
        Real over null bases.
    """
    expected = np.float64(ratio) * (1 + at_or_above(np.sort(null), real)).astype(np.float64)
    kept = at_or_above(np.sort(real), real)
    p_value = 1 - np.array([exp(-value) for value in expected.tolist()])
    # From the lowest score up, the smallest share so far; equal scores have equal shares.
    order = np.argsort(real, kind="stable")
    share = np.minimum(expected / kept, 1.0)
    q_value = np.empty(len(real))
    q_value[order] = np.minimum.accumulate(share[order])
    return Significance(expected, p_value.reshape(len(real)), q_value)


def smallest_q(regions: int, ratio: float) -> float:
    """Return the least q that so many regions can have, when no null region reaches them."""
    return min(ratio / regions, 1.0) if regions else 1.0


def thresholds(real: NDArray[np.float64], null: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return scores at which to tell how many regions there are, ascending.

    Of either kind the highest scores are all there, lower ones at ranks that grow by a constant
    ratio, so that a table of them stays short.
    """
    chosen = []
    for scores in (np.sort(real)[::-1], np.sort(null)[::-1]):
        rank = 1
        while rank <= len(scores):
            chosen.append(scores[rank - 1])
            rank = max(rank + 1, int(rank * _RATIO))
        chosen.extend(scores[-1:])
    return np.unique(np.round(np.array(chosen, dtype=np.float64), _BITS_DECIMALS))


def upper_counts(counts: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return the upper 95 % confidence bound of the Poisson mean behind each of some counts.

    It is the mean under which so small a count has a chance of 5 %.

    References
    ----------
    Garwood 1936, Biometrika 28: 437-442.
    """
    distinct, where = np.unique(counts, return_inverse=True)
    logs = log_array(np.arange(1.0, int(counts.max(initial=0)) + 1))
    log_factorials = np.concatenate(([0.0], np.cumsum(logs)))
    bounds = [_upper(count, float(log_factorials[count])) for count in distinct.tolist()]
    return np.array(bounds, np.float64)[where]


def _upper(count: int, log_factorial: float) -> float:
    low, high = float(count), count + 4 * sqrt(count) + 10
    while high - low > _PRECISION * high:
        middle = (low + high) / 2
        if _chance_of_at_most(count, middle, log_factorial) > 1 - _LEVEL:
            low = middle
        else:
            high = middle
    return high


def _chance_of_at_most(count: int, mean: float, log_factorial: float) -> float:
    """Return the Poisson probability of a count or less, by its terms from the largest down."""
    largest = exp(count * float(log_array(np.array([mean]))[0]) - mean - log_factorial)
    terms = min(count, int(12 * sqrt(count)) + 60)
    ratios = np.cumprod(np.arange(count, count - terms, -1.0) / mean)
    return float(largest * (1 + ratios.sum()))
