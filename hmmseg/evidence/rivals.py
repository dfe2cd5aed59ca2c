"""Two ways of calling the same sequence: a hidden Markov model, and two chains in windows."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hmmseg.evidence.calibration import Scale
from hmmseg.evidence.pieces import Piece
from hmmseg.evidence.tallies import BlockTally, log_odds_of
from hmmseg.evidence.tuning import Tuned, tune
from hmmseg.model import Model
from hmmseg.regions.calling import PATH, Caller
from hmmseg.regions.windows import LEVEL, ChainPair, WindowCaller
from hmmseg.sequence.contigs import Contig
from hmmseg.sequence.intervals import merge
from hmmseg.training.labelled import half_counts, labelled_chains

__all__ = ["CLASSIFIER", "HMM", "Called", "call_hmm", "call_windows", "trained_pair"]

HMM = "hmm"
CLASSIFIER = "classifier"

Intervals = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Called:
    """What one way of calling says of one piece.

    Attributes
    ----------
    intervals : int64[interval, 2]
        Called regions, sorted and apart.
    scores : list of float64[position]
        Log-odds of a region in bits, of consecutive stretches.
    """

    intervals: Intervals
    scores: list[NDArray[np.float64]]

    def against(self, truth: Intervals, length: int) -> BlockTally:
        """Count a piece.

        Parameters
        ----------
        truth
            int64[interval, 2]: what is true.
        length
            Of the piece in bases.
        """
        begins = np.cumsum([0] + [len(part) for part in self.scores])
        return BlockTally.of(
            truth, self.intervals, length, zip(begins.tolist(), self.scores, strict=False)
        )


def call_hmm(model: Model, contig: Contig, threads: int = 1, decoder: str = PATH) -> Called:
    """Call the regions of all reported states.

    Parameters
    ----------
    model
        The model.
    contig
        The sequence.
    threads
        Threads to use; the result does not depend on it.
    decoder
        As of :class:`~hmmseg.regions.calling.Caller`.
    """
    caller = Caller(model, decoder, threads=threads)
    scores: list[NDArray[np.float64]] = []

    def watch(_: int, posterior: NDArray[np.float64]) -> None:
        total = np.zeros(len(posterior))
        for state in caller.states:
            total += posterior[:, state]
        scores.append(log_odds_of(np.clip(total, 0.0, 1.0)))

    found = caller.call(contig, watch).intervals
    return Called(merge(np.column_stack((found.starts, found.ends))), scores)


def call_windows(caller: WindowCaller, contig: Contig, scale: Scale) -> Called:
    """Call the regions of two chains; a contig shorter than the window has none.

    Parameters
    ----------
    caller
        Chains, window and threshold.
    contig
        The sequence.
    scale
        From a window's bits to the log-odds that are told.
    """
    calls = caller.call(contig, lambda *_: None)
    if calls is None:
        lowest = np.full(len(contig), -np.inf)
        return Called(np.empty((0, 2), np.int64), [lowest])
    found = calls.intervals
    slope, offset = scale
    scores = [slope * (part.best / LEVEL) + offset for part in caller.stretches(contig)]
    return Called(np.column_stack((found.starts, found.ends)), scores)


def trained_pair(
    pieces: Sequence[Piece],
    truth: Sequence[Intervals],
    order: int,
    symmetric: bool,
    threads: int,
) -> tuple[WindowCaller, Tuned]:
    """Return chains from labelled pieces, their window and threshold tuned on the same.

    Parameters
    ----------
    pieces
        The sequence.
    truth
        int64[interval, 2] of each piece.
    order, symmetric
        Of the chains.
    threads
        Threads to use; the result does not depend on it.
    """
    contigs = [piece.contig for piece in pieces]
    pair = ChainPair(*labelled_chains(contigs, truth, order, symmetric, half_counts(order)))
    tuned = tune(pair, list(zip(contigs, truth, strict=True)), threads=threads)
    return WindowCaller(pair, tuned.windows, tuned.threshold, threads=threads), tuned
