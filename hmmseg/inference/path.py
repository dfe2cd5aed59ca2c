"""Most probable paths as runs of states."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.exact import impossible
from hmmseg.inference.streams import BLOCK, in_threads
from hmmseg.kernels.elementary import log_array
from hmmseg.kernels.paths import (
    IMPOSSIBLE,
    fixed_point_logs,
    follow_back,
    path_kernels,
)
from hmmseg.kernels.scan import log_trace_of_power
from hmmseg.kernels.tokens import base_codes
from hmmseg.model import Model
from hmmseg.model.contexts import code_dtype
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.sequence.contigs import Contig

__all__ = ["Runs", "best_path", "best_runs", "path_log_probability", "runs_of"]

_GROUP = 64
"""Blocks whose back-pointers are held at once."""


class Runs(NamedTuple):
    """Runs of one state that cover a contig without a break.

    Attributes
    ----------
    edges : int64[run + 1]
        Positions at which runs begin, and the contig's length.
    states : uint8[run]
        The state of each run.
    """

    edges: NDArray[np.int64]
    states: NDArray[np.uint8]


def runs_of(path: NDArray[np.integer]) -> Runs:
    """Return the runs of a path, at least one position long."""
    inner = np.flatnonzero(path[1:] != path[:-1]) + 1
    edges = np.concatenate(([0], inner, [len(path)])).astype(np.int64)
    return Runs(edges, path[edges[:-1]].astype(np.uint8))


def best_path(model: Model, contig: Contig, threads: int = 1) -> NDArray[np.int8]:
    """Return the most probable path of a contig, see :func:`best_runs`.

    Returns
    -------
    int8[position]
        States.
    """
    runs = best_runs(model, contig, threads)
    return np.repeat(runs.states, np.diff(runs.edges)).astype(np.int8)


def best_runs(model: Model, contig: Contig, threads: int = 1, block: int = BLOCK) -> Runs:
    """Return the runs of the most probable path of a contig.

    Log-probabilities are rounded to 2**-32 nats. Of equally probable paths the one is taken
    that, read from the end, has the lower state first; of equally probable circular paths the
    one with the lower state at the cut. Under a symmetric model of order 1 or more both
    strands are decoded and the more probable path is kept, the forward one if they are equal.

    Parameters
    ----------
    model
        The model.
    contig
        The sequence.
    threads
        Threads to use; the result does not depend on it.
    block
        Bases in a block; another than the default only in tests.

    Raises
    ------
    SequenceError
        The contig is impossible under the model.

    References
    ----------
    Viterbi 1967, IEEE Transactions on Information Theory 13: 260-269.
    """
    score, runs = _Decoder(model, contig.bases, contig.closed, threads, block).best()
    if model.both_strands:
        mirrored = reverse_complement(contig.bases)
        other, backward = _Decoder(model, mirrored, contig.closed, threads, block).best()
        if other is not None and (score is None or other > score):
            score, runs = other, Runs(len(contig) - backward.edges[::-1], backward.states[::-1])
    if score is None:
        codes = np.empty(len(contig), code_dtype(model.order))
        base_codes(contig.bases, model.order, contig.closed, 0, len(contig), codes)
        raise impossible(model, contig, codes)
    return runs


def path_log_probability(model: Model, contig: Contig, path: NDArray[np.integer]) -> float:
    """Return log P(contig, path) in nats, on the forward strand.

    Parameters
    ----------
    model
        The model.
    contig
        The sequence; for a circle the last state leads to the first.
    path
        int8[position]: states.

    Notes
    -----
    A circle has no start; its paths' probabilities are divided by trace(T**n), so that they sum
    to 1 over all sequences and paths.
    """
    codes = np.empty(len(contig), code_dtype(model.order))
    base_codes(contig.bases, model.order, contig.closed, 0, len(contig), codes)
    emitted = log_array(model.emissions[path, codes])
    previous = np.roll(path, 1) if contig.closed else path[:-1]
    following = path if contig.closed else path[1:]
    steps = log_array(np.ascontiguousarray(model.transitions[previous, following]))
    if contig.closed:
        first = -float(log_trace_of_power(model.transitions, len(contig)))
    else:
        first = float(log_array(model.start_probabilities[path[:1]])[0])
    return first + float(steps.sum()) + float(emitted.sum())


class _Decoder:
    """Best path of one strand.

    One pass keeps the scores at block edges. A second goes back over groups of blocks, so
    back-pointers are held for one group at a time.
    """

    def __init__(
        self, model: Model, bases: NDArray[np.uint8], closed: bool, threads: int, block: int
    ) -> None:
        self.model, self.bases, self.closed, self.threads = model, bases, closed, threads
        self.edges = np.concatenate((np.arange(0, bases.size, block), [bases.size]))
        states = model.states
        self.log_t = fixed_point_logs(model.transitions.ravel()).reshape(states, states)
        self.log_e = np.ascontiguousarray(
            fixed_point_logs(model.emissions.ravel()).reshape(states, -1).T
        )

    def best(self) -> tuple[int | None, Runs]:
        """Return the best path's score in 2**-32 nats, None if there is no path, and its runs."""
        everywhere = np.zeros(self.model.states, np.int64)
        if not self.closed:
            return self._decode(everywhere, None, opened=True)
        score, runs, before = self._free_pass(everywhere)
        if score is None or before == runs.states[-1]:
            return score, runs
        best: tuple[int | None, Runs] = (None, runs)
        for state in range(self.model.states):
            entered = np.full(self.model.states, 2 * IMPOSSIBLE)
            entered[state] = 0
            score, runs = self._decode(entered, state, opened=False)
            if score is not None and (best[0] is None or score > best[0]):
                best = (score, runs)
        return best

    def _free_pass(self, everywhere: NDArray[np.int64]) -> tuple[int | None, Runs, int]:
        marks, score, last = self._scores(everywhere, None, opened=False)
        runs, before = self._trace(marks, last, opened=False)
        return score, runs, before

    def _decode(
        self, entered: NDArray[np.int64], last: int | None, opened: bool
    ) -> tuple[int | None, Runs]:
        marks, score, end = self._scores(entered, last, opened)
        runs, _ = self._trace(marks, end, opened)
        return score, runs

    def _codes(self, block: int) -> NDArray[np.unsignedinteger]:
        begin, stop = self.edges[block : block + 2]
        codes = np.empty(stop - begin, code_dtype(self.model.order))
        base_codes(self.bases, self.model.order, self.closed, begin, stop, codes)
        return codes

    def _first(self, codes: NDArray[np.unsignedinteger]) -> NDArray[np.int64]:
        """Return the scores of an open contig at its first base."""
        start = fixed_point_logs(self.model.start_probabilities)
        return np.maximum(start + self.log_e[codes[0]], 2 * IMPOSSIBLE)

    def _scores(
        self, entered: NDArray[np.int64], last: int | None, opened: bool
    ) -> tuple[list[NDArray[np.int64]], int | None, int]:
        """Return the scores before each block, the best final score, and its state."""
        advance = path_kernels(self.model.states).score
        scores, taken, marks = entered.copy(), 0, []
        for block in range(len(self.edges) - 1):
            marks.append(scores.copy())
            codes = self._codes(block)
            if opened and block == 0:
                scores = self._first(codes)
                codes = codes[1:]
            taken += int(advance(codes, self.log_t, self.log_e, scores))
        state = int(np.argmax(scores)) if last is None else last
        possible = scores[state] > IMPOSSIBLE
        return marks, taken + int(scores[state]) if possible else None, state

    def _trace(self, marks: list[NDArray[np.int64]], state: int, opened: bool) -> tuple[Runs, int]:
        """Return the path's runs, and the state before its first position."""
        pieces: list[Runs] = []
        for last in range(len(marks), 0, -_GROUP):
            first = max(last - _GROUP, 0)
            backs = in_threads(
                lambda block: self._back_pointers(block, marks[block], opened),
                range(first, last),
                self.threads,
            )
            for block, back in zip(range(last - 1, first - 1, -1), reversed(backs), strict=True):
                path = np.empty(len(back), np.uint8)
                state = follow_back(back, state, path)
                piece = runs_of(path)
                pieces.append(Runs(piece.edges + self.edges[block], piece.states))
        return _join(pieces[::-1]), state

    def _back_pointers(
        self, block: int, mark: NDArray[np.int64], opened: bool
    ) -> NDArray[np.uint8]:
        codes = self._codes(block)
        scores = mark.copy()
        back = np.zeros((len(codes), self.model.states), np.uint8)
        skipped = int(opened and block == 0)
        if skipped:
            scores = self._first(codes)
        path_kernels(self.model.states).trace(
            codes[skipped:], self.log_t, self.log_e, scores, back[skipped:]
        )
        return back


def _join(pieces: list[Runs]) -> Runs:
    """Return the runs of neighbouring stretches as one, equal states joined at the seams."""
    begins = np.concatenate([piece.edges[:-1] for piece in pieces])
    states = np.concatenate([piece.states for piece in pieces])
    kept = np.concatenate(([True], states[1:] != states[:-1]))
    return Runs(np.append(begins[kept], pieces[-1].edges[-1]), states[kept])
