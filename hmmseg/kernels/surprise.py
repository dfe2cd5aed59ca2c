"""How surprising bases are beside how surprising they should be.

Four logarithms a base are most of the work, so they are taken by a table.
"""

import numpy as np

from hmmseg.kernels.arrays import copy
from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.elementary import log, log_array

__all__ = ["log_table", "surprise"]

_NODES = 1024
_SMALLEST = 1 / 32
"""Probabilities from here on are close enough to a node."""


def log_table():
    """Return float64[node, 2]: the middles of equal parts of (0, 1], inverted, and their logs."""
    middles = (np.arange(_NODES + 1) + 0.5) / _NODES
    return np.column_stack((1 / middles, log_array(middles)))


@kernel
def _log_of_chance(chance, table):
    """Return the logarithm of a probability: of the nearest node, and of the rest by its series.

    The rest is at most 1 / 64, so the first term left out is below 2e-12.
    """
    if chance < _SMALLEST:
        return log(chance)
    node = int(chance * _NODES)
    rest = chance * table[node, 0] - 1.0
    series = rest * (1 / 3 - rest * (1 / 4 - rest * (1 / 5 - rest * (1 / 6))))
    return table[node, 1] + rest * (1.0 - rest * (0.5 - series))


@kernel
def surprise(codes, transitions, emissions, started, forward, table, sums):
    """Add up the surprise of consecutive bases of an open contig.

    With p the chances of the four bases at a position, given all bases before it, its base b
    surprises by -ln p_b. The entropy H of p is the mean of that, and its variance the sum of
    p ln(p)**2 less H**2.

    Parameters
    ----------
    codes : uint16[position] or uint32[position]
        Codes of the bases.
    transitions : float64[state, state]
        P(next state | state).
    emissions : float64[state, code]
        P(base | context, state).
    started : bool
        Whether there was a base before; if not, ``forward`` holds the start.
    forward : float64[state]
        P(state | all bases so far); brought up to the last base.
    table : float64[node, 2]
        From :func:`log_table`.
    sums : float64[3 + state]
        Added to, for every known base: -ln p_b - H, its variance, 1, and P(state | bases so far).

    Returns
    -------
    bool
        Whether the bases are possible.
    """
    states = forward.size
    missing = emissions.shape[1] - 1
    stepped = np.empty(states)
    for at in range(codes.size):
        for j in range(states):
            mass = forward[j]
            if started:
                mass = 0.0
                for i in range(states):
                    mass += forward[i] * transitions[i, j]
            stepped[j] = mass
        started = True
        code = np.int64(codes[at])
        if code == missing:
            copy(stepped, forward)
            continue
        # Codes of the four bases behind one context stand together.
        first = code - code % 4
        entropy = 0.0
        square = 0.0
        own = 0.0
        for base in range(first, first + 4):
            chance = 0.0
            for j in range(states):
                chance += stepped[j] * emissions[j, base]
            if chance > 0.0:
                bits = -_log_of_chance(chance, table)
                entropy += chance * bits
                square += chance * bits * bits
                if base == code:
                    own = bits
        total = 0.0
        for j in range(states):
            stepped[j] *= emissions[j, code]
            total += stepped[j]
        if total == 0.0:
            return False
        sums[0] += own - entropy
        sums[1] += square - entropy * entropy
        sums[2] += 1.0
        for j in range(states):
            forward[j] = stepped[j] / total
            sums[3 + j] += forward[j]
    return True
