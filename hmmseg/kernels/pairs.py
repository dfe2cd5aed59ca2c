"""Neighbouring bases, counted in many intervals of one record."""

import numpy as np

from hmmseg.kernels.compiling import kernel

__all__ = ["count_pairs"]


@kernel
def count_pairs(bases, starts, ends, counts):
    """Count the ordered pairs of neighbours inside each interval.

    Parameters
    ----------
    bases : uint8[position]
        Of the record, 0 to 4.
    starts, ends : int64[interval]
        Not empty. An end beyond the record's length goes on at its first base.
    counts : int64[interval, 25]
        Filled: pair (x, y) in column 5 x + y. An interval's last base is followed by a missing
        one, so that the five columns of x add up to the bases x.
    """
    for row in range(starts.size):
        before = np.int64(bases[starts[row]])
        cut = min(ends[row], bases.size)
        counts[row] = 0
        for at in range(starts[row] + 1, cut):
            here = np.int64(bases[at])
            counts[row, 5 * before + here] += 1
            before = here
        for at in range(ends[row] - cut):
            here = np.int64(bases[at])
            counts[row, 5 * before + here] += 1
            before = here
        counts[row, 5 * before + 4] += 1
