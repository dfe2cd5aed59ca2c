"""Regions by two Markov chains: log-odds summed over sliding windows.

A window's score is the sum of its bases' log-odds, region chain against background chain, in
bits. A base's score is that of the best window that covers it, so the bases that score above a
threshold are those of all windows above it. As a probability it reads

    share = 1 / (1 + 2**(threshold - score)),

the posterior of the best window if the threshold is the log-odds against regions beforehand.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple, TypeVar

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import ModelError, UsageError
from hmmseg.inference.threads import in_threads
from hmmseg.kernels.elementary import LN2, log_array
from hmmseg.kernels.tokens import base_codes
from hmmseg.kernels.windows import (
    LEVEL_BITS,
    MOST_WINDOW,
    add_levels,
    best_of_windows,
    running,
    shares_of,
)
from hmmseg.model import Model
from hmmseg.model.contexts import code_dtype
from hmmseg.regions.calling import Calls, RunningSums, scored
from hmmseg.regions.intervals import NO_FILTERS, Filters, over_threshold
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.sequence.contigs import Contig

__all__ = ["ChainPair", "Stretch", "WindowCaller", "Windows"]

LEVEL = 2.0**LEVEL_BITS
_MOST_BITS = 1000.0
"""Stands for infinity, so that sums stay numbers."""

_CHUNK = 1 << 18
_HALF = 0.5

_Result = TypeVar("_Result")
_Watch = Callable[[int, NDArray[np.float64]], None]


class Windows(NamedTuple):
    """Where windows stand.

    Attributes
    ----------
    window : int
        Length in bases.
    step : int
        Distance from one start to the next.
    """

    window: int = 200
    step: int = 10

    def check(self) -> None:
        """Raise UsageError if they leave bases out, or are longer than sums can hold."""
        if not 1 <= self.window <= MOST_WINDOW:
            raise UsageError(f"a window of {self.window} bases; give 1 to {MOST_WINDOW}")
        if not 1 <= self.step <= self.window:
            raise UsageError(
                f"a step of {self.step} bases would leave bases between windows of {self.window}; "
                "give a step from 1 to the window's length"
            )


@dataclass(frozen=True, eq=False)
class ChainPair:
    """Two chains, and the log-odds of every base between them.

    Parameters
    ----------
    region, background
        Models with one state, of one order and both symmetric or both stranded.

    Raises
    ------
    ModelError
        They do not fit together.
    """

    region: Model
    background: Model

    def __post_init__(self) -> None:
        """Check that the two fit together."""
        for role, model in (("region", self.region), ("background", self.background)):
            if model.states != 1:
                raise ModelError(
                    f"the {role} chain has {model.states} states; a chain has one, see "
                    "train --states 1"
                )
        if self.region.order != self.background.order:
            raise ModelError(
                f"the region chain has order {self.region.order}, the background chain order "
                f"{self.background.order}; train both with one --order"
            )
        if self.region.symmetric != self.background.symmetric:
            kinds = [
                "symmetric" if m.symmetric else "stranded" for m in (self.region, self.background)
            ]
            raise ModelError(
                f"the region chain is {kinds[0]}, the background chain {kinds[1]}; train both alike"
            )

    @cached_property
    def bits(self) -> NDArray[np.float64]:
        """float64[code]: log2 P(base | context, region) / P(base | context, background)."""
        with np.errstate(invalid="ignore"):
            bits = (
                log_array(self.region.emissions[0]) - log_array(self.background.emissions[0])
            ) / LN2
        return np.clip(np.where(np.isnan(bits), 0.0, bits), -_MOST_BITS, _MOST_BITS)

    @cached_property
    def _levels(self) -> NDArray[np.int64]:
        strands = 2 if self.region.both_strands else 1
        return np.rint(self.bits * (LEVEL / strands)).astype(np.int64)

    def levels(self, contig: Contig, begin: int, stop: int) -> NDArray[np.int64]:
        """Return the log-odds of a stretch of a contig in levels of 2**-32 bits.

        Parameters
        ----------
        contig
            The sequence.
        begin, stop
            Positions, half-open; on a circle they may lie beyond its ends.

        Returns
        -------
        int64[position]
            The mean of both strands for symmetric chains of order 1 or more.
        """
        levels = np.zeros(stop - begin, np.int64)
        at = begin
        while at < stop:
            place = at % len(contig)
            end = min(place + stop - at, len(contig))
            self._add(contig, place, end, levels[at - begin : at - begin + end - place])
            at += end - place
        return levels

    def _add(self, contig: Contig, begin: int, stop: int, levels: NDArray[np.int64]) -> None:
        order = self.region.order
        codes = np.empty(stop - begin, code_dtype(order))
        base_codes(contig.bases, order, contig.closed, begin, stop, codes)
        add_levels(codes, self._levels, False, levels)
        if not self.region.both_strands:
            return
        # The reverse strand reads this stretch after the bases that follow it.
        piece = contig.bases[begin : stop + order]
        if contig.closed and stop + order > len(contig):
            beyond = np.arange(len(contig), stop + order) % len(contig)
            piece = np.concatenate((piece, contig.bases[beyond]))
        mirrored = reverse_complement(piece)
        base_codes(mirrored, order, False, len(piece) - len(levels), len(piece), codes)
        add_levels(codes, self._levels, True, levels)


class Stretch(NamedTuple):
    """Scores of consecutive positions.

    Attributes
    ----------
    begin : int
        The first position.
    levels : int64[position]
        Log-odds of each base.
    best : int64[position]
        Score of the best window that covers it.
    """

    begin: int
    levels: NDArray[np.int64]
    best: NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class WindowCaller:
    """How regions are called with two chains.

    Parameters
    ----------
    pair
        The chains.
    windows
        Length and step.
    threshold
        Bits of a window above which it is a region.
    filters
        Merging and shortest length.
    threads
        Threads to use; the result does not depend on it.
    """

    pair: ChainPair
    windows: Windows
    threshold: float = 0.0
    filters: Filters = NO_FILTERS
    threads: int = 1

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the states; there is one, the region chain's or ``region``."""
        own = self.pair.region.names[0]
        return ("region",) if own in ("chain", self.pair.background.names[0]) else (own,)

    @property
    def states(self) -> list[int]:
        """Indices of the reported states."""
        return [0]

    def call(self, contig: Contig, watch: _Watch) -> Calls | None:
        """Call regions; hand every stretch of shares to ``watch`` as it comes.

        Parameters
        ----------
        contig
            The sequence.
        watch
            Called with a stretch's first position and float64[position, 1] shares.

        Returns
        -------
        Calls or None
            None for a contig shorter than the window.
        """
        if len(contig) < self.windows.window:
            return None
        sums = RunningSums(None, 0)
        threshold = int(np.rint(self.threshold * LEVEL))

        def called(begin: int) -> tuple[Stretch, NDArray[np.float64]]:
            stretch = self._stretch(contig, begin)
            shares = np.empty(len(stretch.best))
            shares_of(stretch.best, threshold, shares)
            return stretch, shares

        for stretch, shares in self._in_turn(called, contig):
            sums.grow(*over_threshold(shares, _HALF, stretch.begin))
            sums.add(stretch.begin, shares, stretch.levels)
            watch(stretch.begin, shares[:, None])
        calls = scored(contig, {0: sums}, self.filters)
        return Calls(calls.intervals, calls.mean_posterior, calls.log_odds_bits / LEVEL)

    def stretches(self, contig: Contig) -> Iterator[Stretch]:
        """Yield the scores of a contig that is not shorter than the window, in pieces."""
        yield from self._in_turn(lambda begin: self._stretch(contig, begin), contig)

    @property
    def _size(self) -> int:
        return max(_CHUNK, 2 * self.windows.window)

    def _in_turn(self, work: Callable[[int], _Result], contig: Contig) -> Iterator[_Result]:
        """Yield what comes of each stretch, a few of them at a time."""
        begins = range(0, len(contig), self._size)
        at_once = 4 * self.threads
        for first in range(0, len(begins), at_once):
            yield from in_threads(work, begins[first : first + at_once], self.threads)

    def _stretch(self, contig: Contig, begin: int) -> Stretch:
        stop = min(begin + self._size, len(contig))
        window, step = self.windows
        first, last = begin - window + 1, stop - 1 + window
        if not contig.closed:
            # The last window may begin before the step would have it.
            first, last = max(first, 0), min(last, len(contig))
        levels = self.pair.levels(contig, first, last)
        sums = np.empty(len(levels) + 1, np.int64)
        running(levels, sums)
        best = np.empty(stop - begin, np.int64)
        best_of_windows(sums, first, window, step, len(contig), contig.closed, begin, stop, best)
        return Stretch(begin, levels[begin - first : stop - first], best)
