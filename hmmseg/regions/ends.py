"""Posterior intervals of where regions begin and end, while the posterior goes by.

An interval says: given that the core of the region is in its state, the stretch of that state
around it begins (or ends) between these positions with a probability of at least 95 %.
:mod:`hmmseg.kernels.ends` tells how that follows from the posterior of the state. It is exact for
a model with two states without stages whose posterior comes from one pass. Of more states all
others are taken as one, stages go with their state's mean, and both strands' mean counts as one
posterior: then it is an approximation.
"""

import math
from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from hmmseg.kernels.ends import search_ends, settle_ends
from hmmseg.model import Model
from hmmseg.regions.intervals import StateIntervals

__all__ = [
    "REACH",
    "TAIL",
    "EndSearch",
    "limits_of_regions",
    "odds_of_staying",
    "settled",
]

TAIL = 0.025
"""Probability beyond either limit of an interval."""

_Limits = NDArray[np.int64]

REACH = 1 << 16
"""So many bases on either side of a called end are looked at."""


def odds_of_staying(model: Model, state: int) -> float:
    """Return the odds ratio of staying to changing between a state and all others."""
    leaving = 1 / float(model.expected_lengths[state])
    share = float(model.shares[state])
    others = 1 - share
    # As often left as entered.
    entering = share * leaving / others if others > 0 else 0.0
    changing = leaving * entering
    return (1 - leaving) * (1 - entering) / changing if changing > 0 else math.inf


class EndSearch:
    """Looks for the ends of one state's intervals on one contig.

    Parameters
    ----------
    odds
        From `odds_of_staying`.
    length
        Of the contig.
    closed
        Whether the contig is a circle.
    reach
        Bases on either side of an end that are looked at.
    window
        0: look for the limits of an interval that holds the end. Otherwise look for one place,
        the middle of so many bases that most probably hold it.
    """

    def __init__(
        self, odds: float, length: int, closed: bool, reach: int = REACH, window: int = 0
    ) -> None:
        self._odds, self._length, self._closed, self._reach = odds, length, closed, reach
        self._window = window
        self._values = np.empty(0)
        self._first = 0
        self._head = np.empty(0)
        self._found: tuple[list[_Limits], list[_Limits]] = ([], [])
        self._counts = [0, 0]

    @property
    def pending(self) -> int:
        """Number of intervals that are done with."""
        return min(self._counts)

    def add(self, posterior: NDArray[np.float64], spans: StateIntervals) -> None:
        """Take the next window.

        Parameters
        ----------
        posterior
            float64[position], of the state.
        spans
            The state's intervals from number `pending` on, as far as they are known.
        """
        self._values = np.concatenate((self._values, posterior))
        stop = self._first + len(self._values)
        if self._closed:
            self._head = np.concatenate((self._head, posterior))[: 2 * self._reach]
        behind = self.pending
        for end, positions in enumerate((spans.starts, spans.ends)):
            known = behind + int(np.searchsorted(positions, stop - self._reach, "right"))
            fresh = slice(self._counts[end] - behind, known - behind)
            if fresh.start < fresh.stop:
                self._found[end].append(self._limits(spans.taken(fresh), end))
                self._counts[end] = known
        # What is still to be found lies within the reach of the stop, and its surroundings do.
        self._values = self._values[-2 * self._reach :].copy()
        self._first = stop - len(self._values)

    def finish(self, spans: StateIntervals) -> NDArray[np.int64]:
        """Return the limits of the ends of all intervals.

        Parameters
        ----------
        spans
            All of the state's intervals.

        Returns
        -------
        int64[interval, 4]
            Lowest and highest start, lowest and highest end, half-open. On a circle a limit may
            lie before the first position or beyond the last. With a window int64[interval, 2],
            start and end.
        """
        count, length = len(spans.starts), self._length
        each = 1 if self._window else 2
        if count == 0:
            return np.empty((0, 2 * each), np.int64)
        if self._closed and count == 1 and spans.ends[0] - spans.starts[0] == length:
            # Nowhere does it begin or end.
            return np.repeat(np.array([[0, length]]), each, axis=1)
        if self._closed:
            self._go_on()
        limits = []
        for end, own in enumerate(_joined(spans, length) if self._closed else (spans, spans)):
            rest = own.taken(slice(self._counts[end], count))
            found = np.concatenate([*self._found[end], self._limits(rest, end)])
            if self._closed:
                # Those by the origin had no surroundings on its other side yet.
                again = own.starts < self._reach if end == 0 else own.ends <= self._reach
                one, other, state = own.taken(again)
                beyond = StateIntervals(one + length, other + length, state)
                found[again] = self._limits(beyond, end) - length
            limits.append(found)
        return np.concatenate(limits, axis=1)

    def _go_on(self) -> None:
        """Let the first positions of a circle follow its last ones."""
        if self._length > 2 * self._reach:
            self._values = np.concatenate((self._values, self._head))
        else:  # gone round as often as an end may reach
            self._values, self._first = np.tile(self._head, 3), 0

    def _limits(self, spans: StateIntervals, end: int) -> _Limits:
        """Return the lower and the higher limit of starts or of ends; or their places."""
        last = self._first + len(self._values) - 1
        outwards = min(self._reach, self._length - 1)
        if end == 0:
            insides, step = spans.starts, -1
            inners = np.minimum(spans.ends, insides + self._reach) - 1
        else:
            insides, step = spans.ends - 1, 1
            inners = np.maximum(spans.starts, spans.ends - self._reach)
        outers = np.clip(insides + step * outwards, self._first, last)
        where = (
            self._values, insides - self._first, inners - self._first, outers - self._first, step,
            self._odds,
        )  # fmt: skip
        near, far = np.empty_like(insides), np.empty_like(insides)
        # An end is the position behind the last base.
        if self._window:
            settle_ends(*where, self._window, near)
            return near[:, None] + (self._first + end)
        search_ends(*where, TAIL, near, far)
        lower_first = (far, near) if end == 0 else (near, far)
        return np.stack(lower_first, axis=1) + (self._first + end)


def _joined(spans: StateIntervals, length: int) -> tuple[StateIntervals, StateIntervals]:
    """Return a circle's intervals as seen from their starts and from their ends.

    If the first and the last meet at the origin, either goes on in the other.
    """
    starts, ends = spans.starts.copy(), spans.ends.copy()
    if len(starts) > 1 and starts[0] == 0 and ends[-1] == length:
        starts[0], ends[-1] = starts[-1] - length, length + ends[0]
    return spans._replace(ends=ends), spans._replace(starts=starts)


def limits_of_regions(
    regions: StateIntervals,
    found: Mapping[int, tuple[StateIntervals, NDArray[np.int64]]],
    length: int,
) -> NDArray[np.int64]:
    """Return the limits of regions that were made of intervals: of the first and of the last one.

    Parameters
    ----------
    regions
        Merged and filtered.
    found
        For each state its intervals and what `EndSearch.finish` said of them.
    length
        Of the contig.

    Returns
    -------
    int64[region, 4] or int64[region, 2]
        As from `EndSearch.finish`.
    """
    columns = {own.shape[1] for _, own in found.values()}.pop()
    limits, half = np.empty((len(regions.starts), columns), np.int64), columns // 2
    for state, (spans, own) in found.items():
        mine = regions.states == state
        starts, ends = regions.starts[mine], regions.ends[mine]
        round_the_end = np.where(ends > length, length, 0)
        first = np.searchsorted(spans.starts, starts)
        last = np.searchsorted(spans.ends, ends - round_the_end)
        limits[mine, :half] = own[first, :half]
        limits[mine, half:] = own[last, half:] + round_the_end[:, None]
    return limits


def settled(
    regions: StateIntervals, places: NDArray[np.int64], length: int, closed: bool
) -> StateIntervals:
    """Return regions with their ends moved, no two of them over one base.

    Parameters
    ----------
    regions
        Sorted by start, none over another.
    places
        int64[region, 2]: starts and ends.
    length
        Of the contig.
    closed
        Whether the contig is a circle; a region across its origin comes back in two.
    """
    count = len(regions.starts)
    starts, ends = places[:, 0].copy(), places[:, 1].copy()
    for one in range(count if closed and count > 1 else count - 1):
        other, round_the_end = (one + 1) % count, length if one + 1 == count else 0
        start = starts[other] + round_the_end
        if start < ends[one]:
            # Half way, but not into what was called of either.
            last = regions.starts[other] + round_the_end
            half = min(max((start + ends[one]) // 2, regions.ends[one]), last)
            ends[one], starts[other] = half, half - round_the_end
    moved = StateIntervals(starts, ends, regions.states)
    return _cut_at_origin(moved, length) if closed else moved


def _cut_at_origin(regions: StateIntervals, length: int) -> StateIntervals:
    """Return intervals of a circle between its first and its last position."""
    sizes = np.minimum(regions.ends - regions.starts, length)
    # A whole circle begins where the circle does.
    starts = np.where(sizes == length, 0, regions.starts % length)
    beyond = np.maximum(starts + sizes - length, 0)
    across = np.flatnonzero(beyond)
    pieces = StateIntervals(
        np.concatenate((np.zeros(len(across), np.int64), starts)),
        np.concatenate((beyond[across], starts + sizes - beyond)),
        np.concatenate((regions.states[across], regions.states)),
    )
    return pieces.taken(np.argsort(pieces.starts, kind="stable"))
