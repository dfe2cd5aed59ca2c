"""Plain, slow twins of what hmmseg computes: the definitions, and sums over every path.

This module and ``recursions`` are written from the definitions, with loops, and know nothing
of hmmseg. There are three engines, so that they also check one another:

- ``brute_*`` (here) add up over every path of a tiny sequence;
- ``log_*`` are the forward and backward recursions in log space (up to some 2,000 positions);
- ``exact_*`` are the same recursions in 50-digit arithmetic.

Bases are 0 1 2 3 for A C G T and 4 for a missing base. ``closed`` says that the sequence is a
circle: the position after the last is the first, for transitions and for contexts. A path on a
circle has no start probability; its weight is divided by the weight of all paths that close,
which is the trace of the n-th power of the transition matrix.

References
----------
.. [1] Rabiner, L. R. (1989). A tutorial on hidden Markov models and selected applications in
   speech recognition. Proceedings of the IEEE 77, 257-286.
.. [2] Durbin, R., Eddy, S., Krogh, A., Mitchison, G. (1998). Biological Sequence Analysis.
   Cambridge University Press, chapter 3.
"""

import functools
import itertools
import math
from collections.abc import Callable, Iterable, Sequence
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from tests.fifty_digits import EXACT, log_closed_paths

__all__ = [
    "FIXED_POINT_ONE",
    "MISSING",
    "Bases",
    "Counts",
    "Floats",
    "Parameters",
    "Path",
    "Piece",
    "add_counts",
    "all_paths",
    "brute_best_paths",
    "brute_counts",
    "brute_log_likelihood",
    "brute_posterior",
    "complement_strand",
    "emission",
    "emissions",
    "fixed_point",
    "fixed_point_score",
    "known_contexts",
    "log_path_probability",
]

MISSING = 4
FIXED_POINT_ONE = 2**32
"""One nat, in the integers in which best paths are compared."""

Floats = NDArray[np.float64]
Bases = Sequence[int] | NDArray[np.uint8]
Path = tuple[int, ...]


class Parameters(NamedTuple):
    """A hidden Markov model.

    Attributes
    ----------
    order : int
        Number of bases before a base on which its emission depends.
    symmetric : bool
        Whether the model is tied to be the same on both strands.
    start_kind : str
        ``stationary`` or ``free``.
    start : float64[state]
    transitions : float64[state, state]
    joint : float64[state, 4 ** (order + 1)]
        Probability of each word of ``order + 1`` bases, in alphabetical order.
    """

    order: int
    symmetric: bool
    start_kind: str
    start: Floats
    transitions: Floats
    joint: Floats

    @property
    def states(self) -> int:
        """Number of hidden states."""
        return len(self.transitions)

    @property
    def two_stranded(self) -> bool:
        """Whether results average both strands."""
        return self.symmetric and self.order > 0


class Piece(NamedTuple):
    """A gap-free sequence, linear or closed."""

    bases: Bases
    closed: bool = False


class Counts(NamedTuple):
    """Expected counts given sequences: all that learning needs to know of them.

    Attributes
    ----------
    start : float64[state]
    transitions : float64[state, state]
    emissions : dict of context to float64[state, symbol]
        A context is the tuple of the known bases before the symbol.
    circles : list of (length, weight)
        Every circle among the sequences.
    """

    start: Floats
    transitions: Floats
    emissions: dict[Path, Floats]
    circles: list[tuple[int, float]]


def add_counts(parts: Iterable[tuple[float, Counts]]) -> Counts:
    """Return the weighted sum of counts."""
    weighted = list(parts)
    tables: dict[Path, Floats] = {}
    for weight, counts in weighted:
        for context, table in counts.emissions.items():
            tables[context] = tables.get(context, np.zeros_like(table)) + weight * table
    return Counts(
        np.sum([weight * counts.start for weight, counts in weighted], axis=0),
        np.sum([weight * counts.transitions for weight, counts in weighted], axis=0),
        tables,
        [(n, weight * share) for weight, counts in weighted for n, share in counts.circles],
    )


# Emissions


def known_contexts(bases: Bases, order: int, closed: bool) -> list[Path]:
    """Return the longest known suffix of the context of every position."""
    length = len(bases)
    contexts = []
    for position in range(length):
        context: Path = ()
        for back in range(1, order + 1):
            if position - back < 0 and not closed:
                break
            before = int(bases[(position - back) % length])
            if before == MISSING:
                break
            context = (before, *context)
        contexts.append(context)
    return contexts


def emission(
    joint_row: Floats, context: Path, base: int, number: Callable[..., Any] = float
) -> Any:
    """Return P(base given context) from the joint table of one state.

    The mass of a word shorter than ``order + 1`` is the sum over all longer words that end in
    it. A context without mass gives way to the next shorter one.
    """
    if base == MISSING:
        return number(1)

    def mass(word: Path) -> Any:
        index = 0
        for letter in word:
            index = 4 * index + letter
        ending_in_word = joint_row[index :: 4 ** len(word)]
        return number(math.fsum(ending_in_word))  # exact but for one rounding

    while True:
        masses = [mass((*context, symbol)) for symbol in range(4)]
        total = sum(masses)
        if total > 0:
            return masses[base] / total
        context = context[1:]


def emissions(p: Parameters, piece: Piece, number: Callable[..., Any] = float) -> list[list[Any]]:
    """Return the emission probability at every position in every state."""
    seen: dict[tuple[Path, int], list[Any]] = {}
    table = []
    contexts = known_contexts(piece.bases, p.order, piece.closed)
    for context, base in zip(contexts, piece.bases, strict=True):
        key = (context, int(base))
        if key not in seen:
            seen[key] = [emission(row, context, int(base), number) for row in p.joint]
        table.append(seen[key])
    return table


def complement_strand(piece: Piece) -> Piece:
    """Return the other strand of a sequence."""
    flipped = [MISSING if base == MISSING else 3 - int(base) for base in reversed(piece.bases)]
    return Piece(flipped, piece.closed)


# Every path of a tiny sequence


def _along(p: Parameters, piece: Piece, table: list[list[float]], path: Path) -> list[float]:
    """Return the probabilities whose product is the weight of a path."""
    factors = [] if piece.closed else [float(p.start[path[0]])]
    for position, state in enumerate(path):
        if position > 0 or piece.closed:
            factors.append(float(p.transitions[path[position - 1], state]))
        factors.append(table[position][state])
    return factors


def all_paths(p: Parameters, piece: Piece) -> Iterable[tuple[Path, list[float]]]:
    """Return every path with the factors of its weight."""
    table = emissions(p, piece)
    for path in itertools.product(range(p.states), repeat=len(piece.bases)):
        yield path, _along(p, piece, table, path)


def _total(p: Parameters, piece: Piece) -> float:
    return math.fsum(math.prod(factors) for _, factors in all_paths(p, piece))


def brute_log_likelihood(p: Parameters, piece: Piece) -> float:
    """Return log P(sequence), the sum over all paths."""
    total = math.log(_total(p, piece))
    if piece.closed:
        silent = Piece([MISSING] * len(piece.bases), closed=True)
        total -= math.log(_total(p, silent))
    return total


def brute_posterior(p: Parameters, piece: Piece) -> Floats:
    """Return P(state at position given the sequence)."""
    result = np.zeros((len(piece.bases), p.states))
    for path, factors in all_paths(p, piece):
        for position, state in enumerate(path):
            result[position, state] += math.prod(factors)
    return np.asarray(result / result.sum(axis=1, keepdims=True))


def brute_counts(p: Parameters, piece: Piece) -> Counts:
    """Return the expected counts given one sequence."""
    start = np.zeros(p.states)
    transitions = np.zeros((p.states, p.states))
    contexts = known_contexts(piece.bases, p.order, piece.closed)
    tables = {context: np.zeros((p.states, 4)) for context in contexts}
    total = _total(p, piece)
    for path, factors in all_paths(p, piece):
        share = math.prod(factors) / total
        if not piece.closed:
            start[path[0]] += share
        for position, state in enumerate(path):
            if position > 0 or piece.closed:
                transitions[path[position - 1], state] += share
            base = int(piece.bases[position])
            if base != MISSING:
                tables[contexts[position]][state, base] += share
    circles = [(len(piece.bases), 1.0)] if piece.closed else []
    return Counts(start, transitions, tables, circles)


def log_path_probability(p: Parameters, piece: Piece, path: Sequence[int]) -> float:
    """Return log P(sequence, path), in nats."""
    factors = _along(p, piece, emissions(p, piece), tuple(int(state) for state in path))
    if min(factors) == 0:
        return -math.inf
    total = math.fsum(math.log(factor) for factor in factors)
    if piece.closed:
        total -= log_closed_paths(p.transitions, len(piece.bases))
    return total


# Best paths, compared as integers


@functools.cache
def fixed_point(probability: float) -> Any:
    """Return a log-probability rounded to the nearest multiple of 2**-32 nats, as an integer."""
    if probability == 0:
        return -math.inf
    return int(EXACT.nint(EXACT.log(EXACT.mpf(float(probability))) * FIXED_POINT_ONE))


def fixed_point_score(p: Parameters, piece: Piece, path: Sequence[int]) -> Any:
    """Return the sum of the rounded log-probabilities along a path."""
    factors = _along(p, piece, emissions(p, piece), tuple(int(state) for state in path))
    return sum(fixed_point(factor) for factor in factors)


def brute_best_paths(p: Parameters, piece: Piece) -> tuple[Any, list[Path]]:
    """Return the highest score and every path that has it, the preferred one first.

    Of equally probable paths that one is preferred whose states, read from the end, come
    first in order.
    """
    scored = [(sum(map(fixed_point, factors)), path) for path, factors in all_paths(p, piece)]
    best = max(score for score, _ in scored)
    winners = [path for score, path in scored if score == best]
    return best, sorted(winners, key=lambda path: path[::-1])
