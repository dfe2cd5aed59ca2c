"""Most probable paths as runs of states."""

from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import ModelError
from hmmseg.inference.exact import impossible
from hmmseg.inference.streams import BLOCK, build_stream
from hmmseg.inference.tables import preferred_word
from hmmseg.inference.threads import in_threads
from hmmseg.kernels.elementary import log_array
from hmmseg.kernels.paths import (
    IMPOSSIBLE,
    fill_token_ways,
    fixed_point_logs,
    follow_back,
    path_kernels,
)
from hmmseg.kernels.scan import log_trace_of_power
from hmmseg.kernels.tokens import base_codes, code_total
from hmmseg.model import Model
from hmmseg.model.contexts import code_dtype
from hmmseg.model.machine import Machine
from hmmseg.sequence.contigs import Contig

__all__ = ["Runs", "best_path", "best_runs", "path_log_probability", "runs_of"]

_GROUP = 64
"""Blocks whose best earlier states are held at once."""

_PIECE = 8
"""Blocks that a thread takes at once."""


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
    strands = (False, True) if model.both_strands else (False,)
    found = in_threads(
        lambda reverse: _Decoder(model.machine, contig, reverse, threads, block).best(),
        strands,
        threads,
    )
    score, runs = found[0]
    if model.both_strands:
        other, backward = found[1]
        if other is not None and (score is None or other > score):
            score, runs = other, Runs(len(contig) - backward.edges[::-1], backward.states[::-1])
    if score is None:
        codes = np.empty(len(contig), code_dtype(model.order))
        base_codes(contig.bases, model.order, contig.closed, 0, len(contig), codes)
        raise impossible(model.machine, contig, codes)
    return _of_states(runs, model.machine) if max(model.stages) > 1 else runs


def _of_states(runs: Runs, machine: Machine) -> Runs:
    """Return runs of states from those of their stages."""
    states = machine.owners[runs.states].astype(np.uint8)
    kept = np.concatenate(([True], states[1:] != states[:-1]))
    return Runs(np.append(runs.edges[:-1][kept], runs.edges[-1]), states[kept])


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

    Raises
    ------
    ModelError
        A state has several stages, between which a path of states does not tell.

    Notes
    -----
    A circle has no start; its paths' probabilities are divided by trace(T**n), so that they sum
    to 1 over all sequences and paths.
    """
    if max(model.stages) > 1:
        raise ModelError("the probability of one path is not defined for states with stages")
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


# Kept for the contigs of one model that are decoded one after the other.
@lru_cache(maxsize=4)
def _ways(
    machine: Machine, word: int
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.uint32]]:
    """Return int64[code, state] scores of first bases, and the best ways through tokens."""
    states, order = machine.states, machine.order
    log_t = fixed_point_logs(machine.transitions.ravel()).reshape(states, states)
    log_e = fixed_point_logs(np.ascontiguousarray(machine.emissions.T).ravel()).reshape(-1, states)
    first = np.maximum(fixed_point_logs(machine.start_probabilities) + log_e, 2 * IMPOSSIBLE)
    tokens = int(code_total(order)) + (4 ** (order + word) if word > 1 else 0)
    ways = np.empty((tokens, states, states), np.int64)
    keys = np.empty(ways.shape, np.uint32)
    fill_token_ways(log_t, log_e, order, word, ways, keys)
    return first, ways, keys


class _Decoder:
    """Best path of one strand.

    One pass keeps the scores before each block. A second goes back over groups of blocks, so
    that the best states before tokens are held for one group at a time.
    """

    def __init__(
        self, machine: Machine, contig: Contig, reverse: bool, threads: int, block: int
    ) -> None:
        self.machine, self.closed, self.threads = machine, contig.closed, threads
        states, order = machine.states, machine.order
        word = preferred_word(order, states, len(contig))
        self.stream = build_stream([contig], order, word, reverse, threads, block)
        self.first, self.ways, self.keys = _ways(machine, word)
        self.first = self.first[self.stream.heads[0]]
        self.codes = int(code_total(order))

    def best(self) -> tuple[int | None, Runs]:
        """Return the best path's score in 2**-32 nats, None if there is no path, and its runs."""
        states = self.machine.states
        if not self.closed:
            score, runs, _ = self._decode(self.first, None)
            return score, runs
        score, runs, before = self._decode(np.zeros(states, np.int64), None)
        if score is None or before == runs.states[-1]:
            return score, runs
        best: tuple[int | None, Runs] = (None, runs)
        for state in range(states):
            entered = np.full(states, 2 * IMPOSSIBLE)
            entered[state] = 0
            score, runs, _ = self._decode(entered, state)
            if score is not None and (best[0] is None or score > best[0]):
                best = (score, runs)
        return best

    def _decode(self, entered: NDArray[np.int64], last: int | None) -> tuple[int | None, Runs, int]:
        """Return score, runs, and state before the first block, given the state at the end."""
        stream = self.stream
        scores = entered.copy()
        marks = np.empty((len(stream.bounds) - 1, self.machine.states), np.int64)
        advance = path_kernels(self.machine.states).score
        taken = int(advance(stream.tokens, stream.bounds, self.ways, scores, marks))
        state = int(np.argmax(scores)) if last is None else last
        score = taken + int(scores[state]) if scores[state] > IMPOSSIBLE else None
        return score, *self._trace(marks, state)

    def _trace(self, marks: NDArray[np.int64], state: int) -> tuple[Runs, int]:
        """Return the path's runs, and the state before the first block."""
        bounds, positions = self.stream.bounds, self.stream.edges[0]
        edges, states = [positions[-1:]], [np.empty(0, np.uint8)]
        run = state
        for last in range(len(marks), 0, -_GROUP):
            first = max(last - _GROUP, 0)
            pieces = [range(at, min(at + _PIECE, last)) for at in range(first, last, _PIECE)]
            found = in_threads(
                lambda piece: [self._states_before(block, marks[block]) for block in piece],
                pieces,
                self.threads,
            )
            backs = [back for some in found for back in some]
            for block, back in zip(range(last - 1, first - 1, -1), reversed(backs), strict=True):
                begin, stop = bounds[block : block + 2]
                begins = np.empty(positions[block + 1] - positions[block], np.int64)
                whose = np.empty(len(begins), np.uint8)
                count, run_before, before = follow_back(
                    self.stream.tokens, begin, stop, self.codes, self.stream.word, back,
                    self.keys, run, state, positions[block + 1], begins, whose,
                )  # fmt: skip
                edges.append(begins[:count].copy())
                states.append(whose[:count].copy())
                run, state = run_before, before
        if not self.closed and state != run:
            edges.append(np.array([1]))
            states.append(np.array([run], np.uint8))
            run = state
        edges.append(np.zeros(1, np.int64))
        states.append(np.array([run], np.uint8))
        return Runs(np.concatenate(edges)[::-1], np.concatenate(states)[::-1]), state

    def _states_before(self, block: int, mark: NDArray[np.int64]) -> NDArray[np.uint8]:
        begin, stop = self.stream.bounds[block : block + 2]
        back = np.empty((stop - begin, self.machine.states), np.uint8)
        path_kernels(self.machine.states).trace(
            self.stream.tokens, begin, stop, self.ways, self.keys, mark, back
        )
        return back
