"""Going part of a way: what the maximisation steps of tables and transitions share."""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from hmmseg.kernels.elementary import log_array

__all__ = ["NEGLIGIBLE", "going_back", "weighted_logs", "without_traces"]

NEGLIGIBLE = 1e-60
"""An expected count below this changes the likelihood by less than rounding does. Transitions and
emissions drop it, so that parameters that vanish do not slow down everything else; a start
keeps as much, because what seems impossible at first may be the best start in the end."""

_HALVINGS = 40


def weighted_logs(weights: NDArray[np.float64], values: NDArray[np.float64]) -> float:
    """Return the sum of weights times log values, where a weight of 0 makes any term 0."""
    used = weights > 0
    return float((weights[used] * log_array(values[used])).sum())


def without_traces(counts: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return counts without the negligible ones."""
    return np.where(counts < NEGLIGIBLE, 0.0, counts)


def going_back(
    objective: Callable[[NDArray[np.float64]], float],
    floor: float,
    old: NDArray[np.float64],
    point: Callable[[float], NDArray[np.float64]],
) -> NDArray[np.float64]:
    """Return the point nearest the aim that is no worse than the old parameters.

    Parameters
    ----------
    objective
        What must not fall.
    floor
        Its value at the old parameters.
    old
        What is returned if no point will do.
    point
        The parameters at a share of the way, 1 at the aim.
    """
    share = 1.0
    for _ in range(_HALVINGS):
        found = point(share)
        if objective(found) >= floor:
            return found
        share /= 2
    return old
