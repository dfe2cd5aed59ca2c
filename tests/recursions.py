"""Plain, slow twins of what hmmseg computes: the recursions.

The definitions stand in ``reference``, and so does the sum over every path that checks them.

References
----------
.. [1] Rabiner, L. R. (1989). A tutorial on hidden Markov models and selected applications in
   speech recognition. Proceedings of the IEEE 77, 257-286.
.. [2] Durbin, R., Eddy, S., Krogh, A., Mitchison, G. (1998). Biological Sequence Analysis.
   Cambridge University Press, chapter 3.
"""

import itertools
import math
from collections.abc import Callable, Sequence
from typing import Any

import numpy as np

from tests.fifty_digits import EXACT, log_closed_paths
from tests.reference import (
    MISSING,
    Counts,
    Floats,
    Parameters,
    Path,
    Piece,
    add_counts,
    complement_strand,
    emission,
    emissions,
    fixed_point,
    known_contexts,
)

__all__ = [
    "baum_welch_step",
    "counts_over_strands",
    "decode",
    "exact_log_likelihood",
    "exact_posterior",
    "expected_log_likelihood",
    "log_counts",
    "log_likelihood",
    "log_posterior",
    "over_strands",
    "posterior_over_strands",
    "viterbi",
]


# Best paths


def viterbi(p: Parameters, piece: Piece) -> tuple[Any, Path]:
    """Return the score of the preferred best path, and the path."""
    states = range(p.states)
    steps = [[fixed_point(value) for value in row] for row in p.transitions]
    table = [[fixed_point(value) for value in row] for row in emissions(p, piece)]
    if not piece.closed:
        first = [fixed_point(p.start[state]) + table[0][state] for state in states]
        scores, pointers = _extend(first, steps, table)
        end = scores.index(max(scores))
        return scores[end], _trace(pointers, end)

    # On a circle the last state is also the one before the first: try each.
    best: tuple[Any, Path] = (-math.inf, ())
    for end in states:
        first = [steps[end][state] + table[0][state] for state in states]
        scores, pointers = _extend(first, steps, table)
        if not best[1] or scores[end] > best[0]:
            best = (scores[end], _trace(pointers, end))
    return best


def _extend(
    scores: list[Any], steps: list[list[Any]], table: list[list[Any]]
) -> tuple[list[Any], list[list[int]]]:
    states = range(len(scores))
    pointers = []
    for row in table[1:]:
        arrivals = [[scores[i] + steps[i][j] for i in states] for j in states]
        scores = [max(arrivals[j]) + row[j] for j in states]
        # index() finds the first of equals: the lowest state.
        pointers.append([arrivals[j].index(max(arrivals[j])) for j in states])
    return scores, pointers


def _trace(pointers: list[list[int]], end: int) -> Path:
    path = [end]
    for before in reversed(pointers):
        path.append(before[path[-1]])
    return tuple(reversed(path))


def decode(p: Parameters, piece: Piece) -> tuple[Any, Path]:
    """Return score and best path; of the two strands' paths the better, forward on a tie."""
    score, path = viterbi(p, piece)
    if p.two_stranded:
        other_score, other_path = viterbi(p, complement_strand(piece))
        if other_score > score:
            return other_score, other_path[::-1]
    return score, path


# Forward and backward in log space


def _log(values: Any) -> Floats:
    with np.errstate(divide="ignore"):
        return np.log(np.asarray(values, dtype=np.float64))


def _logsumexp(values: Floats, axis: int) -> Floats:
    top = values.max(axis=axis, keepdims=True)
    top = np.where(np.isfinite(top), top, 0.0)
    return _log(np.exp(values - top).sum(axis=axis)) + top.squeeze(axis)


def _log_forward_backward(p: Parameters, piece: Piece) -> tuple[Floats, Floats, Floats]:
    """Return log alpha, log beta and log emissions.

    alpha and beta are [origin, position, state]: on a circle, origin is the state at the last
    position, on which everything is conditioned in turn; otherwise there is one origin.
    """
    length, states = len(piece.bases), p.states
    log_e, log_t = _log(emissions(p, piece)), _log(p.transitions)
    origins = states if piece.closed else 1
    alpha = np.empty((origins, length, states))
    beta = np.empty((origins, length, states))
    if piece.closed:
        alpha[:, 0] = log_t + log_e[0]
        beta[:, -1] = _log(np.eye(states))
    else:
        alpha[:, 0] = _log(p.start) + log_e[0]
        beta[:, -1] = 0.0
    for t in range(1, length):
        alpha[:, t] = _logsumexp(alpha[:, t - 1, :, None] + log_t, axis=1) + log_e[t]
    for t in range(length - 2, -1, -1):
        beta[:, t] = _logsumexp(log_t + (log_e[t + 1] + beta[:, t + 1])[:, None, :], axis=2)
    return alpha, beta, log_e


def log_likelihood(p: Parameters, piece: Piece) -> float:
    """Return log P(sequence) by the forward recursion, in nats."""
    alpha, beta, _ = _log_forward_backward(p, piece)
    total = float(_logsumexp((alpha[:, -1] + beta[:, -1]).ravel(), axis=0))
    if piece.closed:
        total -= log_closed_paths(p.transitions, len(piece.bases))
    return total


def log_posterior(p: Parameters, piece: Piece) -> Floats:
    """Return P(state at position given the sequence)."""
    alpha, beta, _ = _log_forward_backward(p, piece)
    joint = _logsumexp(alpha + beta, axis=0)
    return np.exp(joint - _logsumexp(joint, axis=1)[:, None])


def log_counts(p: Parameters, piece: Piece) -> Counts:
    """Return the expected counts given one sequence."""
    alpha, beta, log_e = _log_forward_backward(p, piece)
    log_t = _log(p.transitions)
    total = _logsumexp((alpha[:, -1] + beta[:, -1]).ravel(), axis=0)
    gamma = np.exp(_logsumexp(alpha + beta, axis=0) - total)
    transitions = np.zeros((p.states, p.states))
    for t in range(1, len(piece.bases)):
        arrive = (log_e[t] + beta[:, t])[:, None, :]
        transitions += np.exp(alpha[:, t - 1, :, None] + log_t + arrive - total).sum(axis=0)
    if piece.closed:
        transitions += np.exp(log_t + log_e[0] + beta[:, 0] - total)
    tables: dict[Path, Floats] = {}
    contexts = known_contexts(piece.bases, p.order, piece.closed)
    for context, base, share in zip(contexts, piece.bases, gamma, strict=True):
        table = tables.setdefault(context, np.zeros((p.states, 4)))
        if base != MISSING:
            table[:, int(base)] += share
    start = np.zeros(p.states) if piece.closed else gamma[0]
    circles = [(len(piece.bases), 1.0)] if piece.closed else []
    return Counts(start, transitions, tables, circles)


# Both strands, and learning


def over_strands(
    p: Parameters, piece: Piece, engine: Callable[[Parameters, Piece], float]
) -> float:
    """Return the log-likelihood; of a symmetric model with context, the mean of both strands'."""
    forward = engine(p, piece)
    if not p.two_stranded:
        return forward
    return (forward + engine(p, complement_strand(piece))) / 2


def posterior_over_strands(
    p: Parameters, piece: Piece, engine: Callable[[Parameters, Piece], Floats]
) -> Floats:
    """Return posteriors; of a symmetric model with context, the mean of both strands'."""
    forward = engine(p, piece)
    if not p.two_stranded:
        return forward
    return (forward + engine(p, complement_strand(piece))[::-1]) / 2


def counts_over_strands(
    p: Parameters, pieces: Sequence[Piece], engine: Callable[[Parameters, Piece], Counts]
) -> Counts:
    """Return summed counts; of a symmetric model with context, the mean of both strands'."""
    parts = []
    for piece in pieces:
        strands = [piece, complement_strand(piece)] if p.two_stranded else [piece]
        parts += [(1 / len(strands), engine(p, strand)) for strand in strands]
    return add_counts(parts)


def baum_welch_step(p: Parameters, pieces: Sequence[Piece]) -> tuple[Floats, Floats, Floats]:
    """Return start, transitions and emissions after one step at order 0 with a free start."""
    counts = add_counts((1.0, log_counts(p, piece)) for piece in pieces)
    table = counts.emissions[()]
    return (
        counts.start / counts.start.sum(),
        counts.transitions / counts.transitions.sum(axis=1, keepdims=True),
        table / table.sum(axis=1, keepdims=True),
    )


def expected_log_likelihood(p: Parameters, counts: Counts) -> float:
    """Return the expected complete log-likelihood of a model, given counts, in nats."""

    def weighted(count: float, probability: float) -> float:
        return 0.0 if count == 0 else count * float(_log(probability))

    states = range(p.states)
    total = sum(weighted(counts.start[i], p.start[i]) for i in states)
    total += sum(
        weighted(counts.transitions[i, j], p.transitions[i, j]) for i in states for j in states
    )
    for context, table in counts.emissions.items():
        for i, base in itertools.product(states, range(4)):
            total += weighted(table[i, base], emission(p.joint[i], context, base))
    for length, weight in counts.circles:
        total -= weight * log_closed_paths(p.transitions, length)
    return float(total)


# Fifty digits


def _exact_passes(p: Parameters, piece: Piece) -> tuple[list[Any], list[Any]]:
    """Return alpha and beta as in log space, in 50-digit numbers, [origin][position][state]."""
    states = range(p.states)
    table = emissions(p, piece, EXACT.mpf)
    steps = [[EXACT.mpf(float(p.transitions[i, j])) for j in states] for i in states]
    columns = list(zip(*steps, strict=True))
    start = [EXACT.mpf(float(value)) for value in p.start]
    alphas, betas = [], []
    for origin in states if piece.closed else range(1):
        before = steps[origin] if piece.closed else start
        alpha = [[before[j] * table[0][j] for j in states]]
        for row in table[1:]:
            last = alpha[-1]
            alpha.append([EXACT.fdot(last, columns[j]) * row[j] for j in states])
        after = [EXACT.mpf(int(i == origin or not piece.closed)) for i in states]
        beta = [after]
        for row in reversed(table[1:]):
            arrive = [row[j] * beta[-1][j] for j in states]
            beta.append([EXACT.fdot(steps[i], arrive) for i in states])
        alphas.append(alpha)
        betas.append(beta[::-1])
    return alphas, betas


def exact_log_likelihood(p: Parameters, piece: Piece) -> float:
    """Return log P(sequence), in nats."""
    alphas, betas = _exact_passes(p, piece)
    total = sum(EXACT.fdot(a[-1], b[-1]) for a, b in zip(alphas, betas, strict=True))
    closing = log_closed_paths(p.transitions, len(piece.bases)) if piece.closed else 0.0
    return float(EXACT.log(total)) - closing


def exact_posterior(p: Parameters, piece: Piece) -> Floats:
    """Return P(state at position given the sequence)."""
    alphas, betas = _exact_passes(p, piece)
    result = np.empty((len(piece.bases), p.states))
    for t in range(len(piece.bases)):
        joint = [
            sum(a[t][i] * b[t][i] for a, b in zip(alphas, betas, strict=True))
            for i in range(p.states)
        ]
        result[t] = [float(value / sum(joint)) for value in joint]
    return result
