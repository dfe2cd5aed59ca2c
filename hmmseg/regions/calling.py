"""Calling the regions of one contig."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.path import best_runs
from hmmseg.inference.posterior import WINDOW_BLOCKS, posterior_windows
from hmmseg.inference.streams import BLOCK
from hmmseg.model import Model
from hmmseg.regions.ends import EndSearch, limits_of_regions, odds_of_staying, settled
from hmmseg.regions.intervals import (
    NO_FILTERS,
    Filters,
    StateIntervals,
    filtered,
    over_threshold,
    together,
)
from hmmseg.regions.odds import LogOdds
from hmmseg.sequence.contigs import Contig

__all__ = ["PATH", "POSTERIOR", "Caller", "Calls", "RunningSums", "scored"]

PATH = "path"
POSTERIOR = "posterior"

_WINDOW = WINDOW_BLOCKS * BLOCK
"""Bases in a window of posteriors, so that sums are taken over the same pieces without any."""

_Watch = Callable[[int, NDArray[np.float64]], None]


@dataclass(frozen=True, eq=False)
class Calls:
    """The regions of one contig.

    Attributes
    ----------
    intervals : StateIntervals
        Contig positions.
    mean_posterior : float64[interval]
        Mean posterior of the region's state.
    log_odds_bits : float64[interval]
        Sum over the region of the state's log-odds against the background.
    wrong_bases : float64[interval] or None
        Expected number of bases in another state: the sum of 1 - posterior. None where the
        values are no posteriors.
    limits : int64[interval, 4] or None
        Between which contig positions it starts and ends, see :mod:`.ends`. None where the values
        are no posteriors.
    """

    intervals: StateIntervals
    mean_posterior: NDArray[np.float64]
    log_odds_bits: NDArray[np.float64]
    wrong_bases: NDArray[np.float64] | None = None
    limits: NDArray[np.int64] | None = None


@dataclass(frozen=True, eq=False)
class Caller:
    """How regions are called.

    Parameters
    ----------
    model
        Its reported states become regions.
    decoder
        ``"path"``: runs of the most probable path; ``"posterior"``: runs in which a state's
        posterior exceeds the threshold.
    threshold
        For the posterior decoder.
    filters
        Merging and shortest length.
    threads
        Threads to use; the result does not depend on it.
    """

    model: Model
    decoder: str = PATH
    threshold: float = 0.5
    filters: Filters = NO_FILTERS
    threads: int = 1

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the states."""
        return self.model.names

    @property
    def states(self) -> list[int]:
        """Indices of the reported states."""
        return [i for i, reported in enumerate(self.model.reported) if reported]

    @cached_property
    def _odds(self) -> LogOdds:
        return LogOdds(self.model, self.states)

    @cached_property
    def _staying(self) -> dict[int, float]:
        return {state: odds_of_staying(self.model, state) for state in self.states}

    def call(self, contig: Contig, watch: _Watch) -> Calls:
        """Call regions; hand every window of posteriors to ``watch`` as it comes.

        Parameters
        ----------
        contig
            The sequence.
        watch
            Called with a window's first position and float64[position, state] posteriors.

        Raises
        ------
        SequenceError
            The contig is impossible under the model.
        """
        found = None
        if self.decoder == PATH:
            found = self._path_intervals(contig)
        elif self.filters.end_window:
            found = self._settled_intervals(contig)
        sums = {state: RunningSums(found, state) for state in self.states}
        ends = {
            state: EndSearch(odds, len(contig), contig.closed)
            for state, odds in self._staying.items()
        }
        for begin, posterior in posterior_windows(self.model, contig, self.threads):
            bits = self._odds.window(contig, begin, begin + len(posterior))
            for (state, running), own in zip(sums.items(), bits, strict=True):
                if found is None:
                    running.grow(*over_threshold(posterior[:, state], self.threshold, begin))
                running.add(begin, posterior[:, state], own)
                ends[state].add(posterior[:, state], running.intervals(ends[state].pending))
            watch(begin, posterior)
        calls = scored(contig, sums, self.filters)
        spans = {state: running.intervals() for state, running in sums.items()}
        limits = {state: (own, ends[state].finish(own)) for state, own in spans.items()}
        return replace(calls, limits=limits_of_regions(calls.intervals, limits, len(contig)))

    def scores(self, contig: Contig) -> tuple[StateIntervals, NDArray[np.float64]]:
        """Return the intervals and log-odds of :meth:`call`, and nothing that costs more.

        A best path needs no posteriors.

        Parameters
        ----------
        contig
            The sequence.

        Raises
        ------
        SequenceError
            The contig is impossible under the model.
        """
        found = self._path_intervals(contig) if self.decoder == PATH else None
        sums = {state: RunningSums(found, state) for state in self.states}
        if found is not None:
            for begin in range(0, len(contig) if len(found.starts) else 0, _WINDOW):
                bits = self._odds.window(contig, begin, min(begin + _WINDOW, len(contig)))
                for running, own in zip(sums.values(), bits, strict=True):
                    running.add(begin, own, own)
        else:
            for begin, posterior in posterior_windows(self.model, contig, self.threads):
                bits = self._odds.window(contig, begin, begin + len(posterior))
                for (state, running), own in zip(sums.items(), bits, strict=True):
                    running.grow(*over_threshold(posterior[:, state], self.threshold, begin))
                    running.add(begin, own, own)
        calls = scored(contig, sums, self.filters)
        return calls.intervals, calls.log_odds_bits

    def _path_intervals(self, contig: Contig) -> StateIntervals:
        runs = best_runs(self.model, contig, self.threads)
        everything = StateIntervals(runs.edges[:-1], runs.edges[1:], runs.states.astype(np.int64))
        return everything.taken(np.isin(everything.states, self.states))

    def _settled_intervals(self, contig: Contig) -> StateIntervals:
        """Return what is over the threshold, its ends where they most probably are."""
        length, window = len(contig), self.filters.end_window
        spans = {state: RunningSums(None, state) for state in self.states}
        ends = {
            state: EndSearch(odds, length, contig.closed, window=window)
            for state, odds in self._staying.items()
        }
        for begin, posterior in posterior_windows(self.model, contig, self.threads):
            for state, running in spans.items():
                own = posterior[:, state]
                running.grow(*over_threshold(own, self.threshold, begin))
                ends[state].add(own, running.intervals(ends[state].pending))
        found = {state: running.intervals() for state, running in spans.items()}
        regions = filtered(together(found.values()), self.filters, length, contig.closed)
        places = {state: (own, ends[state].finish(own)) for state, own in found.items()}
        return settled(regions, limits_of_regions(regions, places, length), length, contig.closed)


def scored(contig: Contig, sums: Mapping[int, "RunningSums"], filters: Filters) -> Calls:
    """Return the filtered intervals of a contig with their means and totals.

    Parameters
    ----------
    contig
        The sequence.
    sums
        Of each reported state.
    filters
        Merging and shortest length.
    """
    found = together(running.intervals() for running in sums.values())
    found = filtered(found, filters, len(contig), contig.closed)
    totals = np.array(
        [
            sums[int(state)].between(int(start), int(end), len(contig))
            for start, end, state in zip(*found, strict=True)
        ]
    ).reshape(-1, 2)
    lengths = found.ends - found.starts
    return Calls(found, totals[:, 0] / lengths, totals[:, 1], lengths - totals[:, 0])


class RunningSums:
    """Running sums of one state's posterior and log-odds, kept at the edges of its intervals.

    Parameters
    ----------
    found
        Intervals of all states; None: they come window by window.
    state
        The state.
    """

    def __init__(self, found: StateIntervals | None, state: int) -> None:
        self._state = state
        self._own = own = None if found is None else found.taken(found.states == state)
        self._starts: list[int] = [] if own is None else own.starts.tolist()
        self._ends: list[int] = [] if own is None else own.ends.tolist()
        self._at: dict[int, tuple[float, float]] = {0: (0.0, 0.0)}
        self._edges = np.array(sorted({*self._starts, *self._ends}), dtype=np.int64)
        self._known = found is not None
        self._total = (0.0, 0.0)

    def grow(self, starts: NDArray[np.int64], ends: NDArray[np.int64]) -> None:
        """Take in the intervals of the next window; one may go on where the last one ended."""
        begin, stop = starts.tolist(), ends.tolist()
        if self._ends and begin and begin[0] == self._ends[-1]:
            begin.pop(0)
            self._ends.pop()
        self._starts += begin
        self._ends += stop
        self._edges = np.sort(np.concatenate((starts, ends)))

    def add(self, begin: int, posterior: NDArray[np.float64], bits: NDArray[Any]) -> None:
        """Add a window's values, and note the sums at the edges within it."""
        stop = begin + len(posterior)
        edges = self._edges
        if self._known:
            edges = edges[np.searchsorted(edges, begin) : np.searchsorted(edges, stop, "right")]
        edges = edges[(edges > begin) & (edges < stop)]
        # Sums from one edge to the next: the positions between need none of their own.
        pieces = np.concatenate(([0], edges - begin))
        sums = [
            total + np.concatenate(([0.0], np.cumsum(np.add.reduceat(values, pieces))))
            for total, values in zip(self._total, (posterior, bits), strict=True)
        ]
        for edge, *both in zip([begin, *edges.tolist(), stop], *sums, strict=True):
            self._at[edge] = (float(both[0]), float(both[1]))
        self._total = (float(sums[0][-1]), float(sums[1][-1]))

    def intervals(self, first: int = 0) -> StateIntervals:
        """Return the state's intervals, from one of them on."""
        if self._own is not None:
            return self._own.taken(slice(first, None))
        starts = np.array(self._starts[first:], np.int64)
        ends = np.array(self._ends[first:], np.int64)
        return StateIntervals(starts, ends, np.full(len(starts), self._state, np.int64))

    def between(self, start: int, end: int, length: int) -> tuple[float, float]:
        """Return the sums over an interval, which may go round the end of a circle."""
        if end > length:
            one, other = self.between(start, length, length), self.between(0, end - length, length)
            return one[0] + other[0], one[1] + other[1]
        return self._at[end][0] - self._at[start][0], self._at[end][1] - self._at[start][1]
