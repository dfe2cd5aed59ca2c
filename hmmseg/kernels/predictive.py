"""Predictive information: -log2 P(base | all bases before it)."""

import numpy as np

from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.elementary import LN2, log

__all__ = ["circle_bits", "open_bits", "powers_backward"]


@kernel
def open_bits(codes, transitions, emissions, started, forward, bits):
    """Fill the bits of consecutive bases of an open contig.

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
    bits : float64[position]
        Filled; infinite from an impossible base on.
    """
    states = forward.size
    stepped = np.empty(states)
    for at in range(codes.size):
        total = 0.0
        for j in range(states):
            if started:
                mass = 0.0
                for i in range(states):
                    mass += forward[i] * transitions[i, j]
            else:
                mass = forward[j]
            stepped[j] = mass * emissions[j, codes[at]]
            total += stepped[j]
        started = True
        bits[at] = -log(total) / LN2
        for j in range(states):
            forward[j] = stepped[j] / total if total > 0.0 else 0.0


@kernel
def powers_backward(transitions, powers):
    """Fill all but the last of some matrices with ``transitions`` times the one behind it.

    Parameters
    ----------
    transitions : float64[state, state]
        Rows sum to 1.
    powers : float64[position + 1, state, state]
        The last one is given.
    """
    states = transitions.shape[0]
    for at in range(powers.shape[0] - 2, -1, -1):
        for i in range(states):
            for j in range(states):
                total = 0.0
                for k in range(states):
                    total += transitions[i, k] * powers[at + 1, k, j]
                powers[at, i, j] = total


@kernel
def _trace_of_product(left, right):
    total = 0.0
    for i in range(left.shape[0]):
        for k in range(left.shape[1]):
            total += left[i, k] * right[k, i]
    return total


@kernel
def circle_bits(codes, transitions, emissions, powers, product, bits):
    """Fill the bits of consecutive bases of a circle.

    The probability of the bases up to one of them is the trace of their steps' product and of
    as many bare steps as it takes to close the circle.

    Parameters
    ----------
    codes : uint16[position] or uint32[position]
        Codes of the bases.
    transitions, emissions : float64[state, state], float64[state, code]
        As for :func:`open_bits`.
    powers : float64[position + 1, state, state]
        Bare steps from before and behind each of these bases to the end of the circle.
    product : float64[state, state]
        Steps of all bases so far, up to a factor; brought up to the last base.
    bits : float64[position]
        Filled; not a number behind an impossible base.
    """
    states = product.shape[0]
    stepped = np.empty_like(product)
    before = _trace_of_product(product, powers[0])
    for at in range(codes.size):
        largest = 0.0
        for i in range(states):
            for j in range(states):
                mass = 0.0
                for k in range(states):
                    mass += product[i, k] * transitions[k, j]
                stepped[i, j] = mass * emissions[j, codes[at]]
                largest = max(largest, stepped[i, j])
        behind = _trace_of_product(stepped, powers[at + 1])
        bits[at] = -log(behind / before) / LN2
        for i in range(states):
            for j in range(states):
                product[i, j] = stepped[i, j] / largest
        before = behind / largest
