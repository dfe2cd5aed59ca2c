"""Two ways of calling the same sequence: a hidden Markov model, and two chains in windows."""

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import HmmsegError
from hmmseg.evidence.calibration import Scale
from hmmseg.evidence.pieces import Piece
from hmmseg.evidence.tallies import BlockTally, Tally, log_odds_of
from hmmseg.evidence.tuning import Tuned, tune
from hmmseg.model import Model
from hmmseg.regions.calling import PATH, Caller
from hmmseg.regions.windows import LEVEL, ChainPair, WindowCaller
from hmmseg.sequence.contigs import Contig
from hmmseg.sequence.intervals import merge
from hmmseg.training.labelled import half_counts, labelled_chains, labelled_model

__all__ = ["CLASSIFIER", "HMM", "Called", "Rivals", "call_hmm", "call_windows", "trained_pair"]

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


class Rivals:
    """Both ways of calling, trained and tested in folds on labelled pieces.

    Parameters
    ----------
    pieces
        The sequence with its labels.
    folds
        int64[piece]: the fold in which each piece is held out.
    order
        Context length of both.
    symmetric
        Whether both strands are treated alike.
    threads
        Threads to use; only the times depend on it.
    decoder
        Of the HMM.
    """

    def __init__(
        self,
        pieces: Sequence[Piece],
        folds: NDArray[np.int64],
        order: int,
        symmetric: bool,
        threads: int = 1,
        decoder: str = PATH,
    ) -> None:
        self.pieces, self.folds = pieces, folds
        self.order, self.symmetric = order, symmetric
        self.threads, self.decoder = threads, decoder
        self.tuned: list[Tuned] = []
        """Window and threshold of the chains in each turn."""
        self.seconds: dict[str, float] = {}
        """Time that each way of calling took."""

    def run(self, told: Callable[[int], None] = lambda _: None) -> dict[str, Tally]:
        """Train on all folds but one and call that one, in turn.

        Parameters
        ----------
        told
            Called with the number of bases of each piece that is done.

        Raises
        ------
        LabelError
            A fold's training part is of one class only; the message says which.
        """
        blocks: dict[str, dict[int, BlockTally]] = {HMM: {}, CLASSIFIER: {}}
        for fold in range(int(self.folds.max()) + 1):
            model, caller = self._train(fold)
            for number in np.flatnonzero(self.folds == fold).tolist():
                contig, _, truth = self.pieces[number]
                ways: dict[str, Callable[[], Called]] = {
                    HMM: lambda c=contig, m=model: call_hmm(m, c, self.threads, self.decoder),  # type: ignore[misc]
                    CLASSIFIER: lambda c=contig, w=caller, s=self.tuned[-1].scale: call_windows(
                        w, c, s
                    ),  # type: ignore[misc]
                }
                for way, call in ways.items():
                    found = self._timed(way, call)
                    blocks[way][number] = found.against(truth, len(contig))
                told(len(contig))
        return {
            way: Tally([counts[number] for number in range(len(self.pieces))])
            for way, counts in blocks.items()
        }

    def _train(self, fold: int) -> tuple[Model, WindowCaller]:
        known = [self.pieces[i] for i in np.flatnonzero(self.folds != fold).tolist()]
        truth = [piece.truth for piece in known]
        try:
            caller, tuned = trained_pair(known, truth, self.order, self.symmetric, self.threads)
            model = labelled_model(
                [piece.contig for piece in known],
                truth,
                self.order,
                self.symmetric,
                half_counts(self.order),
            )
        except HmmsegError as error:
            raise type(error)(f"with fold {fold + 1} held out, {error}") from None
        self.tuned.append(tuned)
        return model, caller

    def _timed(self, way: str, call: Callable[[], Called]) -> Called:
        begun = time.perf_counter()
        found = call()
        self.seconds[way] = self.seconds.get(way, 0.0) + time.perf_counter() - begun
        return found
