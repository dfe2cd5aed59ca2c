"""Whether two fits of one plan found the same thing, not only the same likelihood."""

from itertools import permutations

import numpy as np

from hmmseg.evidence.findings import expected_lengths, in_bases, shares
from hmmseg.model import Model

__all__ = ["difference"]

_GC = 0.03
_TIMES = 2.0
_MOST_PERMUTED = 6


def difference(one: Model, other: Model) -> str | None:
    """Say how two models of the same size differ in what they found.

    States are paired so that their word tables are as near as can be. A pair differs if its GC
    differs by more than 0.03, or its expected length or its share by more than a factor of 2.

    Parameters
    ----------
    one, other
        Models with equally many states and the same order.

    Returns
    -------
    str or None
        The pair that differs most, described; None if none differs.
    """
    pairing = _pairing(one, other)
    worst, text = 1.0, None
    lengths = expected_lengths(one), expected_lengths(other)
    parts = shares(one), shares(other)
    for state, match in enumerate(pairing):
        gc = abs(float(one.gc[state] - other.gc[match])) / _GC
        length = _times(float(lengths[0][state]), float(lengths[1][match])) / _TIMES
        share = _times(float(parts[0][state]), float(parts[1][match])) / _TIMES
        if max(gc, length, share) > worst:
            worst = max(gc, length, share)
            text = f"{one.names[state]} ({_brief(one, state)}) against ({_brief(other, match)})"
    return text


def _times(a: float, b: float) -> float:
    low, high = min(a, b), max(a, b)
    if low == high:
        return 1.0
    return high / low if low > 0 else float("inf")


def _brief(model: Model, state: int) -> str:
    length = in_bases(float(expected_lengths(model)[state]))
    share = 100 * float(shares(model)[state])
    return f"GC {model.gc[state]:.3f}, {length}, {share:.1f} % of the sequence"


def _pairing(one: Model, other: Model) -> tuple[int, ...]:
    distance = np.abs(one.joint[:, None, :] - other.joint[None, :, :]).sum(axis=2)
    count = one.states
    if count <= _MOST_PERMUTED:
        return min(
            permutations(range(count)),
            key=lambda order: sum(float(distance[i, order[i]]) for i in range(count)),
        )
    by_gc = np.empty(count, dtype=int)
    by_gc[np.argsort(one.gc, kind="stable")] = np.argsort(other.gc, kind="stable")
    return tuple(by_gc.tolist())
