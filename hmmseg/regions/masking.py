"""How much of each region is soft-masked."""

import numpy as np
from numpy.typing import NDArray

from hmmseg.sequence.reading import Record

__all__ = ["SOFT_MASKED", "soft_masked_fraction"]

SOFT_MASKED = "soft_masked_fraction"
"""Name of the column."""

_DECIMALS = 4


def soft_masked_fraction(
    record: Record, starts: NDArray[np.int64], ends: NDArray[np.int64]
) -> NDArray[np.float64]:
    """Return float64[region], the share of each region's bases that are lower case.

    Parameters
    ----------
    record
        The record.
    starts, ends
        int64[region]. An end may lie beyond the end of a circular record.
    """
    if len(record.soft_mask) == 0 or len(starts) == 0:
        return np.zeros(len(starts))
    length, edges = len(record), record.soft_mask
    sizes = np.concatenate(([0], np.cumsum(edges[:, 1] - edges[:, 0])))

    def masked_before(position: NDArray[np.int64]) -> NDArray[np.int64]:
        """Count masked bases before a position."""
        rounds, at = np.divmod(position, length)
        index = np.searchsorted(edges[:, 0], at, side="right") - 1
        inside = np.where(index >= 0, np.minimum(at, edges[index, 1]) - edges[index, 0], 0)
        return rounds * sizes[-1] + np.where(index >= 0, sizes[index] + inside, 0)

    share: NDArray[np.float64] = (masked_before(ends) - masked_before(starts)) / (ends - starts)
    return np.round(share, _DECIMALS)
