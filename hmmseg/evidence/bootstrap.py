"""Confidence intervals by drawing blocks of sequence again, with replacement.

Bases of one stretch depend on one another, so blocks are drawn, not bases (Künsch 1989, Annals
of Statistics 17: 1217-1241).
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

__all__ = ["Interval", "interval_of", "resampled"]

_LEVEL = 0.95


class Interval(NamedTuple):
    """A value and its 95 % confidence interval.

    Attributes
    ----------
    value, low, high : float
        NaN where not defined.
    """

    value: float
    low: float
    high: float


def resampled(blocks: int, replicates: int, seed: int) -> NDArray[np.int64]:
    """Return how often each block is drawn in each replicate.

    Parameters
    ----------
    blocks
        How many there are, and how many are drawn.
    replicates
        How often all are drawn.
    seed
        Of the draws, which use uniform numbers only.

    Returns
    -------
    int64[replicate, block]
        Rows sum to the number of blocks.
    """
    random = np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed])))
    counts = np.empty((replicates, blocks), np.int64)
    for row in counts:
        drawn = np.minimum((random.random(blocks) * blocks).astype(np.int64), blocks - 1)
        row[:] = np.bincount(drawn, minlength=blocks)
    return counts


def interval_of(value: float, replicates: NDArray[np.float64]) -> Interval:
    """Return a value with the percentile interval of its replicates.

    Replicates in which the measure is not defined are left out.

    Parameters
    ----------
    value
        Of all blocks.
    replicates
        float64[replicate].

    References
    ----------
    Efron & Tibshirani 1993, An Introduction to the Bootstrap, chapter 13.
    """
    defined = np.sort(replicates[~np.isnan(replicates)])
    if not len(defined):
        return Interval(float(value), np.nan, np.nan)
    tail = (1 - _LEVEL) / 2
    low, high = np.quantile(defined, [tail, 1 - tail])
    return Interval(float(value), float(low), float(high))
