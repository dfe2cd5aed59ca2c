"""Scores of windows as probabilities, by logistic regression on labelled sequence.

Bases of one window, and windows that overlap, are not independent, so the log-odds of a window
say too much. Scaled and shifted on training sequence they say as much as they know.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.kernels.elementary import LN2, exp

__all__ = ["Scale", "fitted_scale"]

_STEPS = 60
_ENOUGH = 1e-9


class Scale(NamedTuple):
    """Calibrated log-odds: slope x score + offset, all in bits.

    Attributes
    ----------
    slope, offset : float
    """

    slope: float
    offset: float


def fitted_scale(
    scores: NDArray[np.float64], positives: NDArray[np.int64], negatives: NDArray[np.int64]
) -> Scale:
    """Return the scale under which labels are most probable, by Newton's method.

    Parameters
    ----------
    scores
        float64[bin]: score of each bin in bits.
    positives, negatives
        int64[bin]: true and other bases with it; neither is all zero.

    References
    ----------
    Platt 1999, in Advances in Large Margin Classifiers: 61-74, with the targets that keep the
    slope finite where scores separate the classes.
    """
    used = (positives + negatives) > 0
    pos, neg = positives[used].astype(np.float64), negatives[used].astype(np.float64)
    total, ones = pos + neg, pos.sum()
    zeros = neg.sum()
    aims = pos * ((ones + 1) / (ones + 2)) + neg / (zeros + 2)
    width = float(np.abs(scores[used]).max()) or 1.0
    x = scores[used] / width
    a, b = 0.0, _log_odds(ones, zeros)
    for _ in range(_STEPS):
        p = np.array([1 / (1 + exp(-value)) for value in (a * x + b).tolist()])
        slack = total * p - aims
        weight = total * p * (1 - p) + 1e-12
        gradient = (float((slack * x).sum()), float(slack.sum()))
        aa, ab, bb = (float((weight * x**power).sum()) for power in (2, 1, 0))
        determinant = aa * bb - ab * ab + 1e-12
        steps = (
            (bb * gradient[0] - ab * gradient[1]) / determinant,
            (aa * gradient[1] - ab * gradient[0]) / determinant,
        )
        # Far from the maximum a whole step may overshoot.
        limit = max(1.0, abs(steps[0]) / 8, abs(steps[1]) / 8)
        a, b = a - steps[0] / limit, b - steps[1] / limit
        if max(abs(steps[0]), abs(steps[1])) < _ENOUGH:
            break
    return Scale(a / width / LN2, b / LN2)


def _log_odds(ones: float, zeros: float) -> float:
    """Return ln(ones / zeros), for a start close enough without a logarithm's last bits."""
    value, ratio = 0.0, (ones + 1) / (zeros + 1)
    while ratio > 2:
        ratio, value = ratio / 2, value + LN2
    while ratio < 0.5:
        ratio, value = ratio * 2, value - LN2
    return value
