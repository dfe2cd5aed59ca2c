"""Drawing a path and its bases from a model, by uniform numbers alone."""

import numpy as np

from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.tokens import words_of

__all__ = ["draw"]


@kernel
def _pick(cumulative, uniform):
    """Return the first index whose cumulative probability exceeds a uniform number."""
    for index in range(cumulative.size - 1):
        if uniform < cumulative[index]:
            return index
    return cumulative.size - 1


@kernel
def draw(transitions, emissions, order, memory, uniforms, path, bases):
    """Fill a path and its bases.

    Parameters
    ----------
    transitions : float64[state + 1, state]
        Cumulative probabilities of the next state; the last row is the start.
    emissions : float64[state, context, 4]
        Cumulative probabilities of a base, for each code's context.
    order : int
        Context length.
    memory : int64[3]
        Last state (the number of states before the first base), context, known bases; updated.
    uniforms : float64[position, 2]
        Independent, in [0, 1).
    path : uint8[position]
        Filled.
    bases : uint8[position]
        Filled.
    """
    state, context, known = memory
    contexts = words_of(order)
    for at in range(path.size):
        state = _pick(transitions[state], uniforms[at, 0])
        size = words_of(known)
        row = (size - 1) // 3 + (context & (size - 1))
        base = _pick(emissions[state, row], uniforms[at, 1])
        path[at] = state
        bases[at] = base
        context = (4 * context + base) & (contexts - 1)
        known = min(known + 1, order)
    memory[0] = state
    memory[1] = context
    memory[2] = known
    return np.int64(path.size)
