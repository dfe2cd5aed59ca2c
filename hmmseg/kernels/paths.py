"""Most probable state paths in fixed-point log-probabilities, token by token.

A log-probability is rounded to a multiple of 2**-FRACTION_BITS nats. Sums of integers do not
depend on their order, so a path is the same however the sequence is cut into words and blocks.
Among equally probable paths the one is taken that, read from its end, has the lower state
first.

For each token and each pair of states before and at its end, the best way through is tabulated
with its score. A way is kept as a *key*: the states of the token's bases as digits of
``KEY_BITS`` bits, the last base's the most significant, so that of two ways with equal scores
the one with the lower key is taken.

Between two looks, every ``REBASE`` tokens, scores are counted from the best one. ``IMPOSSIBLE``
stands for the logarithm of 0; a state more than 5e8 nats behind the best one counts as
impossible, too.
"""

from collections.abc import Callable
from functools import cache
from typing import Any, NamedTuple

import numpy as np

from hmmseg.kernels.arrays import copy, copy_matrix, largest
from hmmseg.kernels.compiling import helper, kernel
from hmmseg.kernels.elementary import log
from hmmseg.kernels.matrices import code_in_word
from hmmseg.kernels.tokens import code_total, words_of
from hmmseg.kernels.vectors import item

__all__ = [
    "FRACTION_BITS",
    "IMPOSSIBLE",
    "KEY_BITS",
    "PathKernels",
    "fill_token_ways",
    "fixed_point_logs",
    "follow_back",
    "path_kernels",
]

FRACTION_BITS = 32
IMPOSSIBLE = -(1 << 61)
KEY_BITS = 8
REBASE = 1024

_FLOOR = -(1 << 62)


class PathKernels(NamedTuple):
    """The kernels of one number of states."""

    score: Callable[..., Any]
    trace: Callable[..., Any]


@kernel
def fixed_point_logs(values):
    """Return int64[...] logarithms of a flat array of probabilities, in 2**-32 nats."""
    out = np.empty(values.size, np.int64)
    for i in range(values.size):
        if values[i] == 0.0:
            out[i] = IMPOSSIBLE
        else:
            out[i] = np.int64(np.floor(log(values[i]) * 2.0**FRACTION_BITS + 0.5))
    return out


@kernel
def fill_token_ways(log_t, log_e, order, word, ways, keys):
    """Fill the best way through every token, from any state to any other.

    Parameters
    ----------
    log_t : int64[state, state]
        Transitions.
    log_e : int64[code, state]
        Emissions.
    order, word : int
        Context length, and bases in a word (1: no word tokens).
    ways : int64[token, state, state]
        Filled: score of the best way from the state before to the state at the token's end.
    keys : uint32[token, state, state]
        Filled: the way's states.
    """
    states = log_t.shape[0]
    codes = code_total(order)
    for code in range(codes):
        for i in range(states):
            for j in range(states):
                ways[code, i, j] = max(log_t[i, j] + log_e[code, j], IMPOSSIBLE)
                keys[code, i, j] = j
    if word == 1:
        return
    full = codes - 1 - words_of(order + 1)
    for number in range(words_of(order + word)):
        token = codes + number
        first = full + code_in_word(number, order, word, 0)
        copy_matrix(ways[first], ways[token])
        copy_matrix(keys[first], keys[token])
        for at in range(1, word):
            code = full + code_in_word(number, order, word, at)
            for i in range(states):
                _extend(ways[token, i], keys[token, i], ways[code], at)


@kernel
def _extend(scores, keys, step, length):
    """Extend the best ways to each state by one base."""
    old, old_keys = scores.copy(), keys.copy()
    for j in range(scores.size):
        best, origin = old[0] + step[0, j], 0
        for k in range(1, scores.size):
            other = old[k] + step[k, j]
            # A key begins with its last state, so the lower key is the lower state.
            if other > best:
                best, origin = other, k
        scores[j] = max(best, IMPOSSIBLE)
        keys[j] = np.uint32(old_keys[origin] | (j << (KEY_BITS * length)))


@kernel
def _rebase(scores):
    """Count scores from the best one, which is returned; 0 if all are impossible."""
    best = largest(scores)
    if best <= IMPOSSIBLE:
        return 0
    for j in range(scores.size):
        scores[j] = scores[j] - best if scores[j] > IMPOSSIBLE else _FLOOR
    return best


@helper
def _best_of_two(one, two, one_key, two_key):
    """Tell whether the second of two ways is better; of equal ones the lower key is."""
    return two > one or (two == one and two_key < one_key)


@cache
def path_kernels(states: int) -> PathKernels:
    """Return the kernels for a number of states, a constant in them."""
    if states == 2:
        return PathKernels(_score_two, _trace_two)

    @kernel
    def score(tokens, bounds, ways, scores, marks):
        """Advance int64[state] scores; see :func:`_score_two`."""
        following = np.empty(states, np.int64)
        taken = 0
        for block in range(bounds.size - 1):
            copy(scores, marks[block])
            for at in range(bounds[block], bounds[block + 1]):
                token = np.int64(item(tokens, at))
                for j in range(states):
                    best = scores[0] + ways[token, 0, j]
                    for i in range(1, states):
                        best = max(best, scores[i] + ways[token, i, j])
                    following[j] = max(best, _FLOOR)
                for j in range(states):
                    scores[j] = following[j]
                if at % REBASE == 0:
                    taken += _rebase(scores)
            taken += _rebase(scores)
        return taken

    @kernel
    def trace(tokens, begin, stop, ways, keys, mark, back):
        """Fill uint8[token, state] best states before tokens; see :func:`_trace_two`."""
        scores, following = mark.copy(), np.empty(states, np.int64)
        for at in range(begin, stop):
            token = np.int64(item(tokens, at))
            for j in range(states):
                best, origin = scores[0] + ways[token, 0, j], 0
                for i in range(1, states):
                    other = scores[i] + ways[token, i, j]
                    if _best_of_two(best, other, keys[token, origin, j], keys[token, i, j]):
                        best, origin = other, i
                following[j] = max(best, _FLOOR)
                back[at - begin, j] = origin
            for j in range(states):
                scores[j] = following[j]
            if at % REBASE == 0:
                _rebase(scores)

    return PathKernels(score, trace)


@kernel
def _score_two(tokens, bounds, ways, scores, marks):
    """Advance scores over all blocks of a contig, for two states.

    Parameters
    ----------
    tokens : uint16[token] or uint32[token]
    bounds : int64[block + 1]
        Token offsets of the blocks.
    ways : int64[token, state, state]
        As filled by :func:`fill_token_ways`.
    scores : int64[state]
        Before the first block; afterwards behind the last.
    marks : int64[block, state]
        Filled: scores before each block.

    Returns
    -------
    int
        What was counted off the scores.
    """
    taken = 0
    flat = ways.reshape(ways.size)
    for block in range(bounds.size - 1):
        copy(scores, marks[block])
        p, q = scores[0], scores[1]
        at = bounds[block]
        while at < bounds[block + 1]:
            pause = min(at + REBASE, bounds[block + 1])
            for here in range(at, pause):
                first = np.int64(item(tokens, here)) * 4
                a, b = p + item(flat, first), q + item(flat, first + 2)
                c, d = p + item(flat, first + 1), q + item(flat, first + 3)
                p, q = max(a, b, _FLOOR), max(c, d, _FLOOR)
            scores[0], scores[1] = p, q
            taken += _rebase(scores)
            p, q = scores[0], scores[1]
            at = pause
    return taken


@kernel
def _trace_two(tokens, begin, stop, ways, keys, mark, back):
    """Find the best state before each token of a block, for two states.

    Parameters
    ----------
    tokens, ways
        As for :func:`_score_two`.
    begin, stop : int
        The block's tokens, half-open.
    keys : uint32[token, state, state]
        As filled by :func:`fill_token_ways`.
    mark : int64[state]
        Scores before the block.
    back : uint8[stop - begin, state]
        Filled: the best state before each token, by the state at its end.
    """
    scores = mark.copy()
    p, q = scores[0], scores[1]
    flat = ways.reshape(ways.size)
    at = begin
    while at < stop:
        pause = min(at + REBASE, stop)
        for here in range(at, pause):
            token = np.int64(item(tokens, here))
            a, b = p + item(flat, 4 * token), q + item(flat, 4 * token + 2)
            c, d = p + item(flat, 4 * token + 1), q + item(flat, 4 * token + 3)
            back[here - begin, 0] = b > a
            back[here - begin, 1] = d > c
            if a == b and keys[token, 1, 0] < keys[token, 0, 0]:
                back[here - begin, 0] = 1
            if c == d and keys[token, 1, 1] < keys[token, 0, 1]:
                back[here - begin, 1] = 1
            p, q = max(a, b, _FLOOR), max(c, d, _FLOOR)
        scores[0], scores[1] = p, q
        _rebase(scores)
        p, q = scores[0], scores[1]
        at = pause


@kernel
def follow_back(
    tokens, begin, stop, codes, word, back, keys, run, state, position, edges, run_states
):
    """Walk back through a block's tokens and note where runs begin.

    Parameters
    ----------
    tokens : uint16[token] or uint32[token]
    begin, stop : int
        The block's tokens, half-open.
    codes, word : int
        Number of tokens that are single bases, and bases in the others.
    back : uint8[stop - begin, state]
        The best state before each token.
    keys : uint32[token, state, state]
        As filled by :func:`fill_token_ways`.
    run : int
        State of the run that is open behind the block.
    state : int
        State at the block's last base.
    position : int
        Position behind the block's last base.
    edges : int64[run]
        Filled: where runs begin, from the last to the first, but for the one that is open.
    run_states : uint8[run]
        Filled: their states.

    Returns
    -------
    tuple of int, int, int
        Number of runs noted; the state of the open run; the state before the block.
    """
    count = 0
    for at in range(stop - 1, begin - 1, -1):
        token = np.int64(item(tokens, at))
        before = np.int64(back[at - begin, state])
        key = np.int64(keys[token, before, state])
        length = 1 if token < codes else word
        # A base's own state ends the run when it differs from the one behind it.
        for base in range(length - 1, -1, -1):
            here = (key >> (KEY_BITS * base)) & ((1 << KEY_BITS) - 1)
            if here != run:
                edges[count] = position
                run_states[count] = run
                count += 1
                run = here
            position -= 1
        state = before
    return count, run, state
