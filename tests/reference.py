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
    "brute_best_paths",
    "brute_counts",
    "brute_log_likelihood",
    "brute_posterior",
    "brute_reach",
    "complement_strand",
    "emission",
    "emissions",
    "fixed_point",
    "fixed_point_score",
    "known_contexts",
    "log_path_probability",
    "plain_chain_bases",
    "plain_limits",
    "plain_pairs",
    "plain_significance",
    "plain_staying",
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


def _all_paths(p: Parameters, piece: Piece) -> Iterable[tuple[Path, list[float]]]:
    """Return every path with the factors of its weight."""
    table = emissions(p, piece)
    for path in itertools.product(range(p.states), repeat=len(piece.bases)):
        yield path, _along(p, piece, table, path)


def _total(p: Parameters, piece: Piece) -> float:
    return math.fsum(math.prod(factors) for _, factors in _all_paths(p, piece))


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
    for path, factors in _all_paths(p, piece):
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
    for path, factors in _all_paths(p, piece):
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
    scored = [(sum(map(fixed_point, factors)), path) for path, factors in _all_paths(p, piece)]
    best = max(score for score, _ in scored)
    winners = [path for score, path in scored if score == best]
    return best, sorted(winners, key=lambda path: path[::-1])


# What is said of regions


def plain_pairs(bases: Bases, start: int, end: int) -> list[list[int]]:
    """Count neighbours x, y in [start, end), round the end if need be; the last has none."""
    counts = [[0] * 5 for _ in range(5)]
    inside = [int(bases[at % len(bases)]) for at in range(start, end)]
    for x, y in itertools.pairwise([*inside, MISSING]):
        counts[x][y] += 1
    return counts


def brute_reach(p: Parameters, piece: Piece, state: int, anchor: int, step: int) -> list[float]:
    """Return P(the run of a state around an anchor reaches k bases on | anchor in the state).

    Item k counts the paths that are in the state from the anchor to the base k steps away.
    """
    reached = [0.0] * len(piece.bases)
    for path, factors in _all_paths(p, piece):
        at, far = anchor, 0
        while 0 <= at < len(path) and path[at] == state:
            reached[far] += math.prod(factors)
            at, far = at + step, far + 1
    return [value / reached[0] for value in reached]


def plain_staying(there: float, here: float, odds: float) -> float:
    """Return P(in the state there | in it here): margins and odds ratio, solved by halving."""
    if math.isinf(odds):
        return min(there, here) / here
    low, high = max(0.0, there + here - 1), min(there, here)
    for _ in range(200):
        both = (low + high) / 2
        # The odds ratio of the table grows with the probability of both.
        if both * (1 - there - here + both) < odds * (there - both) * (here - both):
            low = both
        else:
            high = both
    return (low + high) / 2 / here


def plain_limits(
    posterior: Sequence[float],
    closed: bool,
    core: tuple[int, int],
    step: int,
    odds: float,
    tail: float,
    reach: int,
) -> tuple[int, int]:
    """Return the lower and higher limit of a region's start (step -1) or end (step 1).

    The region is [core[0], core[1]), on a circle perhaps beyond its ends.
    """
    n = len(posterior)
    inside = core[0] if step < 0 else core[1] - 1
    within = [at for at in range(inside, inside - step * reach, -step) if core[0] <= at < core[1]]
    best = max(posterior[at % n] for at in within)
    near = far = at = next(at for at in within if posterior[at % n] >= 0.99 * best)
    reached = 1.0
    while abs(at + step - inside) <= min(reach, n - 1) or at + step in within:
        if not closed and not 0 <= at + step < n:
            break
        reached *= plain_staying(posterior[(at + step) % n], posterior[at % n], odds)
        if reached <= tail:
            break
        at += step
        far = at
        if reached >= 1 - tail:
            near = at
    return (far, near) if step < 0 else (near + 1, far + 1)


def plain_chain_bases(
    table: list[list[float]], factors: list[float], window: int, order: int, place: int,
    uniforms: Iterable[float],
) -> list[int]:  # fmt: skip
    """Draw bases one by one: a base is the first whose cumulative probability exceeds its number.

    Behind its context, as far back as there are bases, C and G weigh ``factor`` times as much,
    and the weights of all four are divided by their sum.
    """
    bases: list[int] = []
    for at, uniform in enumerate(uniforms):
        context = bases[-order:] if order else []
        row = (4 ** len(context) - 1) // 3
        for position, base in enumerate(reversed(context)):
            row += base * 4**position
        factor = factors[(place + at) // window]
        a, c, g, t = table[row]
        weights = [a, factor * c, factor * g, t]
        reached = uniform * (weights[0] + weights[1] + weights[2] + weights[3])
        total, drawn = 0.0, 0
        for base in range(3):
            total += weights[base]
            if reached >= total:
                drawn = base + 1
        bases.append(drawn)
    return bases


def plain_significance(
    real: Sequence[float], null: Sequence[float], ratio: float
) -> list[tuple[float, float, float]]:
    """Return E, p and q of each real score, as they are defined."""

    def by_chance(threshold: float) -> float:
        return (1 + sum(score >= threshold for score in null)) * ratio

    found = []
    for own in real:
        shares = [
            by_chance(threshold) / sum(score >= threshold for score in real)
            for threshold in real
            if threshold <= own
        ]
        chance = by_chance(own)
        found.append((chance, 1 - math.exp(-chance), min(1.0, *shares)))
    return found


def plain_settled(
    posterior: Sequence[float],
    core: tuple[int, int],
    step: int,
    odds: float,
    window: int,
) -> int:
    """Return the start (step -1) or end (step 1) of a region of an open contig.

    That is the middle of the bases that most probably hold the outermost base of the run, but
    the contig's last one if half of it lies there.
    """
    inside, inner = (core[0], core[1] - 1) if step < 0 else (core[1] - 1, core[0])
    within = list(range(inside, inner - step, -step))
    best = max(posterior[at] for at in within)
    anchor = next(at for at in within if posterior[at] >= 0.99 * best)
    path = list(range(anchor, -1 if step < 0 else len(posterior), step))
    reached = [1.0]
    for one, other in itertools.pairwise(path):
        reached.append(reached[-1] * plain_staying(posterior[other], posterior[one], odds))
    outermost = [x - y for x, y in itertools.pairwise([*reached, 0.0])]
    held = [math.fsum(outermost[k : k + window]) for k in range(len(path))]
    first = next(k for k, value in enumerate(held) if value > max(held) - 1e-9)
    middle = path[min(first + (window - 1) // 2, len(path) - 1)]
    if outermost[-1] >= held[first] / 2 and first + window >= len(path):
        middle = path[-1]
    return middle if step < 0 else middle + 1
