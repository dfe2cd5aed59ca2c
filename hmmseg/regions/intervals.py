"""Intervals of states on one contig: merged where close, dropped where short."""

from collections.abc import Iterable
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

__all__ = ["NO_FILTERS", "Filters", "StateIntervals", "filtered", "over_threshold", "together"]


class StateIntervals(NamedTuple):
    """Intervals on one contig, sorted by start.

    Attributes
    ----------
    starts, ends : int64[interval]
        Contig positions, half-open. On a circle an end may lie beyond the last position.
    states : int64[interval]
        The state of each.
    """

    starts: NDArray[np.int64]
    ends: NDArray[np.int64]
    states: NDArray[np.int64]

    def taken(self, chosen: NDArray[np.bool_] | NDArray[np.intp] | slice) -> "StateIntervals":
        """Return some of the intervals."""
        return StateIntervals(self.starts[chosen], self.ends[chosen], self.states[chosen])


class Filters(NamedTuple):
    """What becomes of intervals before they are regions.

    Attributes
    ----------
    min_length : int
        Shorter regions are dropped, after merging; bases.
    merge_gap : int
        Neighbouring regions of one state at most this far apart become one; bases.
    end_window : int
        With the posterior decoder: an end comes to stand in the middle of so many bases that
        most probably hold it; 0: where the posterior crosses the threshold.
    """

    min_length: int = 1
    merge_gap: int = 0
    end_window: int = 0


NO_FILTERS = Filters()


def together(parts: Iterable[StateIntervals]) -> StateIntervals:
    """Return intervals of several states, sorted by start."""
    found = StateIntervals(*(np.concatenate(column) for column in zip(*parts, strict=True)))
    return found.taken(np.lexsort((found.states, found.starts)))


def over_threshold(
    posterior: NDArray[np.float64], threshold: float, offset: int
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return starts and ends of the runs in which one state's posterior exceeds a threshold.

    Parameters
    ----------
    posterior
        float64[position].
    threshold
        A probability.
    offset
        Added to every position.
    """
    inside = np.concatenate(([False], posterior > threshold, [False]))
    changes = np.flatnonzero(inside[1:] != inside[:-1]) + offset
    return changes[::2], changes[1::2]


def filtered(
    intervals: StateIntervals, filters: Filters, length: int, closed: bool
) -> StateIntervals:
    """Return intervals merged across small distances, without the short ones.

    Two regions are merged only if nothing that is reported lies between them.

    Parameters
    ----------
    intervals
        Sorted by start; those of one state do not overlap.
    filters
        Lengths in bases.
    length
        Of the contig.
    closed
        Whether the contig is a circle, on which the last interval may join the first.
    """
    merged = _merged(intervals, filters.merge_gap)
    if closed:
        merged = _merged_round(merged, filters.merge_gap, length)
    return merged.taken(merged.ends - merged.starts >= filters.min_length)


def _merged(intervals: StateIntervals, gap: int) -> StateIntervals:
    if len(intervals.starts) == 0:
        return intervals
    apart = intervals.starts[1:] - intervals.ends[:-1]
    joined = (intervals.states[1:] == intervals.states[:-1]) & (apart <= gap)
    first = np.flatnonzero(np.concatenate(([True], ~joined)))
    last = np.append(first[1:] - 1, len(intervals.starts) - 1)
    return StateIntervals(intervals.starts[first], intervals.ends[last], intervals.states[first])


def _merged_round(intervals: StateIntervals, gap: int, length: int) -> StateIntervals:
    """Join the last interval of a circle with the first."""
    starts, ends, states = intervals
    if len(starts) < 2 or states[0] != states[-1] or starts[0] + length - ends[-1] > gap:
        return intervals
    return StateIntervals(starts[1:], np.append(ends[1:-1], ends[0] + length), states[1:])
