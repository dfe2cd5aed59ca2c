"""Log-odds in sliding windows, in integers, so that sums are exact in any order.

A level is a number of bits times ``2**LEVEL_BITS``, rounded. Sums of levels are taken modulo
2**64, and a difference of two is right as long as it fits itself.
"""

import numpy as np

from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.elementary import LN2, exp

__all__ = ["LEVEL_BITS", "MOST_WINDOW", "add_levels", "best_of_windows", "running", "shares_of"]

LEVEL_BITS = 32

MOST_WINDOW = 1 << 20
"""Bases in a window at most: 1,000 bits for each of them still fit 64 bits."""

_NEVER = np.iinfo(np.int64).max


@kernel
def add_levels(codes, table, backwards, levels):
    """Add each code's level.

    Parameters
    ----------
    codes : uint16[position] or uint32[position]
        Codes of consecutive positions.
    table : int64[code]
        Level of each code.
    backwards : bool
        The last code belongs to the first position.
    levels : int64[position]
        Added to.
    """
    last = codes.size - 1
    if backwards:
        for at in range(codes.size):
            levels[at] += table[codes[last - at]]
    else:
        for at in range(codes.size):
            levels[at] += table[codes[at]]


@kernel
def running(levels, sums):
    """Fill ``sums`` (int64[position + 1]) with the sums of all levels before each position."""
    total = np.int64(0)
    sums[0] = total
    for at in range(levels.size):
        total += levels[at]
        sums[at + 1] = total


@kernel
def _window_from(position, window, step, length, closed):
    """Return the first window start at or behind a position.

    Windows begin at multiples of the step. On an open contig the last one ends at the end; on a
    circle they begin anew at the origin, and positions may be negative or beyond the length.
    """
    if closed:
        place = position % length
        start = (place + step - 1) // step * step
        return position + min(start, length) - place
    start = (max(position, 0) + step - 1) // step * step
    if start > length - window:
        start = length - window
        if start < position:
            return _NEVER
    return start


@kernel
def best_of_windows(sums, first, window, step, length, closed, begin, stop, best):
    """Fill ``best`` with the largest sum of a window that covers each position.

    Parameters
    ----------
    sums : int64[position + 1]
        Running sums from position ``first`` on, as far as the windows reach.
    first : int
        Position of the first of them.
    window, step : int
        Length of a window, and distance of their starts; the step is not the longer one.
    length : int
        Of the contig, not below the window.
    closed : bool
        Whether the contig is a circle.
    begin, stop : int
        Positions, half-open.
    best : int64[stop - begin]
        Filled.
    """
    # Windows that may still be the best of a position to come, in falling order of sums.
    starts = np.empty(stop - begin + window + 1, np.int64)
    values = np.empty(stop - begin + window + 1, np.int64)
    head = 0
    tail = 0
    following = _window_from(begin - window + 1, window, step, length, closed)
    for position in range(begin, stop):
        while following <= position:
            value = sums[following + window - first] - sums[following - first]
            while tail > head and values[tail - 1] <= value:
                tail -= 1
            starts[tail] = following
            values[tail] = value
            tail += 1
            following = _window_from(following + 1, window, step, length, closed)
        while starts[head] + window <= position:
            head += 1
        best[position - begin] = values[head]


@kernel
def shares_of(best, threshold, shares):
    """Fill shares with 1 / (1 + 2**(threshold - best)).

    Parameters
    ----------
    best : int64[position]
        In levels.
    threshold : int
        In levels.
    shares : float64[position]
        Filled.
    """
    last = best[0]
    share = 1.0 / (1.0 + exp(float(threshold - last) * (LN2 / 2.0**LEVEL_BITS)))
    for at in range(best.size):
        if best[at] != last:
            last = best[at]
            share = 1.0 / (1.0 + exp(float(threshold - last) * (LN2 / 2.0**LEVEL_BITS)))
        shares[at] = share
