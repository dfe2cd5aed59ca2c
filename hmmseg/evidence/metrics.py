"""Measures of how well calls fit a known truth, base by base.

Every function takes counts and works along their last axis, or element by element, so that one
call serves all replicates of a bootstrap. A measure that is not defined is NaN.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = [
    "Reliability",
    "average_precision",
    "brier_score",
    "f1_score",
    "level_counts",
    "matthews_correlation",
    "precision",
    "reliability",
    "roc_area",
    "sensitivity",
]

Floats = NDArray[np.float64]


def _ratio(numerator: ArrayLike, denominator: ArrayLike) -> Floats:
    top, bottom = np.asarray(numerator, np.float64), np.asarray(denominator, np.float64)
    return np.divide(top, bottom, out=np.full(np.broadcast(top, bottom).shape, np.nan),
                     where=bottom != 0)  # fmt: skip


def sensitivity(hits: ArrayLike, misses: ArrayLike) -> Floats:
    """Return the share of true bases that are called."""
    return _ratio(hits, np.add(hits, misses))


def precision(hits: ArrayLike, false: ArrayLike) -> Floats:
    """Return the share of called bases that are true."""
    return _ratio(hits, np.add(hits, false))


def f1_score(hits: ArrayLike, false: ArrayLike, misses: ArrayLike) -> Floats:
    """Return the harmonic mean of sensitivity and precision.

    Parameters
    ----------
    hits, false, misses
        True bases that are called, other bases that are called, true bases that are not.
    """
    return _ratio(np.multiply(2, hits), np.multiply(2, hits) + np.add(false, misses))


def matthews_correlation(
    hits: ArrayLike, false: ArrayLike, misses: ArrayLike, rest: ArrayLike
) -> Floats:
    """Return the correlation of calls with truth; 0 where either is constant.

    Parameters
    ----------
    hits, false, misses, rest
        True bases that are called, other bases that are called, true bases that are not,
        other bases that are not.

    References
    ----------
    Matthews 1975, Biochimica et Biophysica Acta 405: 442-451.
    """
    tp, fp, fn, tn = (np.asarray(x, np.float64) for x in (hits, false, misses, rest))
    # Two roots, because a product of four counts of bases may exceed a double's precision.
    scale = np.sqrt((tp + fp) * (tp + fn)) * np.sqrt((tn + fp) * (tn + fn))
    value = _ratio(tp * tn - fp * fn, scale)
    return np.where(scale == 0, 0.0, value)


def level_counts(
    truth: NDArray[np.bool_], scores: Floats
) -> tuple[NDArray[np.int64], NDArray[np.int64], Floats]:
    """Return how many true and other bases have each score.

    Parameters
    ----------
    truth
        bool[position].
    scores
        float64[position]; higher means rather true.

    Returns
    -------
    positives, negatives : int64[level]
    values : float64[level]
        The scores, ascending.
    """
    values, level = np.unique(scores, return_inverse=True)
    positives = np.bincount(level[truth], minlength=len(values))
    negatives = np.bincount(level[~truth], minlength=len(values))
    return positives.astype(np.int64), negatives.astype(np.int64), values


def roc_area(positives: NDArray[np.int64], negatives: NDArray[np.int64]) -> Floats:
    """Return the area under the receiver operating characteristic.

    It is the probability that a true base scores higher than another, ties counting half.

    Parameters
    ----------
    positives, negatives
        int64[..., level]: true and other bases at each level, by ascending score.

    References
    ----------
    Hanley & McNeil 1982, Radiology 143: 29-36.
    """
    pos, neg = positives.astype(np.float64), negatives.astype(np.float64)
    below = np.cumsum(neg, axis=-1) - neg
    won = (pos * (below + neg / 2)).sum(axis=-1)
    return _ratio(won, pos.sum(axis=-1) * neg.sum(axis=-1))


def average_precision(positives: NDArray[np.int64], negatives: NDArray[np.int64]) -> Floats:
    """Return the area under the precision-recall curve, as the sum of its steps.

    Parameters
    ----------
    positives, negatives
        int64[..., level]: true and other bases at each level, by ascending score.
    """
    pos = positives[..., ::-1].astype(np.float64)
    called = np.cumsum(pos + negatives[..., ::-1], axis=-1)
    right = np.cumsum(pos, axis=-1)
    share = np.divide(right, called, out=np.zeros_like(right), where=called > 0)
    return _ratio((pos * share).sum(axis=-1), pos.sum(axis=-1))


def brier_score(
    positives: NDArray[np.int64], negatives: NDArray[np.int64], probabilities: Floats
) -> Floats:
    """Return the mean squared difference between probability and truth.

    Parameters
    ----------
    positives, negatives
        int64[..., level]: true and other bases at each level.
    probabilities
        float64[level]: what each level says.

    References
    ----------
    Brier 1950, Monthly Weather Review 78: 1-3.
    """
    wrong = positives * (1 - probabilities) ** 2 + negatives * probabilities**2
    return _ratio(wrong.sum(axis=-1), (positives + negatives).sum(axis=-1))


class Reliability(NamedTuple):
    """A reliability curve: said and seen frequencies in bins of the said probability.

    Attributes
    ----------
    said, seen : float64[bin]
        Mean probability of the bin's bases, and the share of them that is true.
    bases : int64[bin]
        Bases in the bin; bins without any are left out.
    bins : int64[bin]
        Number of the bin, 0 the lowest.
    """

    said: Floats
    seen: Floats
    bases: NDArray[np.int64]
    bins: NDArray[np.int64]


def reliability(
    positives: NDArray[np.int64],
    negatives: NDArray[np.int64],
    probabilities: Floats,
    bins: int = 10,
) -> Reliability:
    """Return the reliability curve.

    Parameters
    ----------
    positives, negatives
        int64[level]: true and other bases at each level.
    probabilities
        float64[level]: what each level says.
    bins
        Number of bins of equal width; a probability on an edge belongs to the lower one.
    """
    edges = np.linspace(0, 1, bins + 1)[1:-1]
    chosen = np.searchsorted(edges, probabilities)
    bases = positives + negatives
    count = np.bincount(chosen, weights=bases, minlength=bins)
    said = np.bincount(chosen, weights=bases * probabilities, minlength=bins)
    true = np.bincount(chosen, weights=positives, minlength=bins)
    used = count > 0
    return Reliability(
        said[used] / count[used],
        true[used] / count[used],
        count[used].astype(np.int64),
        np.flatnonzero(used),
    )
