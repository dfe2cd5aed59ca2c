"""Most probable state paths in fixed-point log-probabilities.

Sums of integers do not depend on their order, so a path is the same however the sequence is
cut into blocks. Among equally probable paths the one is taken that, read from its end, has the
lower state first.

A log-probability is rounded to a multiple of 2**-FRACTION_BITS nats. Between two looks, every
``REBASE`` positions, scores are counted from the best one. ``IMPOSSIBLE`` stands for the
logarithm of 0; a state more than 5e8 nats behind the best one counts as impossible, too.
"""

from collections.abc import Callable
from functools import cache
from typing import Any, NamedTuple

import numpy as np

from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.elementary import log

__all__ = [
    "FRACTION_BITS",
    "IMPOSSIBLE",
    "PathKernels",
    "fixed_point_logs",
    "follow_back",
    "path_kernels",
]

FRACTION_BITS = 32
IMPOSSIBLE = -(1 << 61)
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
def _rebase(scores):
    """Count scores from the best one, which is returned; 0 if all are impossible."""
    best = scores.max()
    if best <= IMPOSSIBLE:
        return 0
    for j in range(scores.size):
        scores[j] = scores[j] - best if scores[j] > IMPOSSIBLE else _FLOOR
    return best


@cache
def path_kernels(states: int) -> PathKernels:
    """Return kernels in which the number of states is a constant."""

    @kernel
    def score(codes, log_t, log_e, scores):
        """Advance int64[state] scores over the codes; return what was counted off."""
        following = np.empty(states, np.int64)
        taken = 0
        for at in range(codes.size):
            code = codes[at]
            for j in range(states):
                best = scores[0] + log_t[0, j]
                for i in range(1, states):
                    best = max(best, scores[i] + log_t[i, j])
                following[j] = max(best + log_e[code, j], _FLOOR)
            for j in range(states):
                scores[j] = following[j]
            if at % REBASE == REBASE - 1:
                taken += _rebase(scores)
        return taken + _rebase(scores)

    @kernel
    def trace(codes, log_t, log_e, scores, back):
        """Fill uint8[position, state] best predecessors, from the scores before the codes."""
        following = np.empty(states, np.int64)
        for at in range(codes.size):
            code = codes[at]
            for j in range(states):
                best = scores[0] + log_t[0, j]
                origin = 0
                for i in range(1, states):
                    other = scores[i] + log_t[i, j]
                    if other > best:
                        best = other
                        origin = i
                following[j] = max(best + log_e[code, j], _FLOOR)
                back[at, j] = origin
            for j in range(states):
                scores[j] = following[j]
            if at % REBASE == REBASE - 1:
                _rebase(scores)

    return PathKernels(score, trace)


@kernel
def follow_back(back, state, path):
    """Fill a path from its last state, and return the state before its first.

    Parameters
    ----------
    back : uint8[position, state]
        Best predecessors.
    state : int
        State at the last position.
    path : uint8[position]
        Filled.
    """
    for at in range(path.size - 1, -1, -1):
        path[at] = state
        state = np.int64(back[at, state])
    return state
