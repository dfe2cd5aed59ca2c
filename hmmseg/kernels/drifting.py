"""Drawing bases from a Markov chain whose GC changes along the sequence."""

import numpy as np

from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.tokens import words_of

__all__ = ["draw_chain"]


@kernel
def draw_chain(table, factors, window, order, memory, uniforms, bases):
    """Fill bases, each by one uniform number.

    Behind every context the weights of C and G are multiplied by the factor of the window that
    the base lies in, and the weights of all four bases scaled to sum to 1 (exponential tilting).

    Parameters
    ----------
    table : float32[row, symbol]
        P(base | context) in the order of codes: contexts of no base first, whole ones last. Half
        the width keeps a large table in the processor's cache; sums are of full width.
    factors : float64[window]
        On the odds of G+C, for each window.
    window : int
        Bases in a window.
    order : int
        Context length.
    memory : int64[3]
        Position of the first base in the windows, context, known bases; updated.
    uniforms : float64[position]
        Independent, in [0, 1).
    bases : uint8[position]
        Filled.

    Returns
    -------
    int
        Number of bases.
    """
    place, context, known = memory
    mask = words_of(order) - 1
    at = 0
    while at < bases.size:
        number = (place + at) // window
        stop = min((number + 1) * window - place, bases.size)
        factor = factors[number]
        offset = (words_of(known) - 1) // 3
        if known < order:
            stop = at + 1
        for position in range(at, stop):
            row = offset + context
            below_c = np.float64(table[row, 0])
            below_g = below_c + factor * table[row, 1]
            below_t = below_g + factor * table[row, 2]
            reached = uniforms[position] * (below_t + table[row, 3])
            base = int(reached >= below_c) + int(reached >= below_g) + int(reached >= below_t)
            bases[position] = base
            # Within the first bases nothing is cut off, since they are fewer than the order.
            context = 4 * context + base
            context &= mask
        if known < order:
            known += 1
        at = stop
    memory[0] = place + bases.size
    memory[1] = context
    memory[2] = known
    return np.int64(bases.size)
