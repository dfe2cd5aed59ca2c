"""How much of each region is soft-masked."""

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.sequence.reading import Record

__all__ = ["SOFT_MASKED", "soft_masked_fraction"]

SOFT_MASKED = "soft_masked_fraction"
"""Name of the column."""

_DECIMALS = 4


def soft_masked_fraction(table: pd.DataFrame, record: Record) -> NDArray[np.float64]:
    """Return float64[region], the share of each region's bases that are lower case.

    Parameters
    ----------
    table
        Regions of one record, with columns start and end; an end may lie beyond the end of a
        circular record.
    record
        The record.
    """
    starts = table["start"].to_numpy(np.int64)
    ends = table["end"].to_numpy(np.int64)
    length, edges = len(record), record.soft_mask
    sizes = np.concatenate(([0], np.cumsum(edges[:, 1] - edges[:, 0])))

    def masked_before(position: NDArray[np.int64]) -> NDArray[np.int64]:
        """Count masked bases before a position."""
        rounds, at = np.divmod(position, length)
        index = np.searchsorted(edges[:, 0], at, side="right") - 1
        inside = np.where(index >= 0, np.minimum(at, edges[index, 1]) - edges[index, 0], 0)
        return rounds * sizes[-1] + np.where(index >= 0, sizes[index] + inside, 0)

    if len(edges) == 0 or len(table) == 0:
        return np.zeros(len(table))
    return np.round((masked_before(ends) - masked_before(starts)) / (ends - starts), _DECIMALS)
