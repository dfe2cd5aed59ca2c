"""Drawing paths from their posterior: forward over blocks, then backward by chance."""

from hmmseg.kernels.compiling import kernel

__all__ = ["draw_back", "filter_forward"]


@kernel
def filter_forward(transitions, emissions, codes, vector, forward):
    """Carry a filtered vector over some codes.

    Parameters
    ----------
    transitions : float64[state, state]
    emissions : float64[state, code]
    codes : uint16[position] or uint32[position]
    vector : float64[state]
        P(state before the codes | what came before); replaced by that of the last position.
    forward : float64[position, state]
        Filled: P(state | codes up to the position).

    Returns
    -------
    bool
        Whether the codes are possible.
    """
    states = vector.size
    for at in range(codes.size):
        total = 0.0
        for j in range(states):
            value = 0.0
            for i in range(states):
                value += vector[i] * transitions[i, j]
            forward[at, j] = value * emissions[j, codes[at]]
            total += forward[at, j]
        if total == 0.0:
            return False
        for j in range(states):
            forward[at, j] /= total
            vector[j] = forward[at, j]
    return True


@kernel
def draw_back(forward, transitions, state, uniforms, path):
    """Draw the states of some positions, given the state behind them.

    Parameters
    ----------
    forward : float64[position, state]
        As from :func:`filter_forward`.
    transitions : float64[state, state]
    state : int
        State behind the last position; -1 if there is none.
    uniforms : float64[position]
        Independent, in [0, 1).
    path : uint8[position]
        Filled.

    Returns
    -------
    int
        State of the first position.
    """
    states = forward.shape[1]
    for at in range(path.size - 1, -1, -1):
        total = 0.0
        for i in range(states):
            total += forward[at, i] * (1.0 if state < 0 else transitions[i, state])
        reached = uniforms[at] * total
        drawn = states - 1
        for i in range(states):
            reached -= forward[at, i] * (1.0 if state < 0 else transitions[i, state])
            if reached < 0.0:
                drawn = i
                break
        path[at] = drawn
        state = drawn
    return state
