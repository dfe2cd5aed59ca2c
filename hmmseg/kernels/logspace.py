"""Forward and backward with logarithms: slow, and safe for any parameters.

Used for contigs on which the scaled kernels would lose a value, such as under transition
probabilities of 1e-300, or where a sequence may be impossible.
"""

import numpy as np

from hmmseg.kernels.arrays import copy, largest
from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.elementary import exp, log, log_array

__all__ = ["first_impossible", "log_likelihood", "log_pass"]

_BLOCK = 4096


@kernel
def _log_sum(terms):
    """Return the logarithm of a sum of exponentials of float64[term]."""
    most = largest(terms)
    if most == -np.inf:
        return -np.inf
    total = 0.0
    for term in terms:
        total += exp(term - most)
    return most + log(total)


@kernel
def _tables(transitions, emissions):
    states, codes = emissions.shape
    return (
        log_array(transitions.ravel()).reshape(states, states),
        log_array(emissions.ravel()).reshape(states, codes),
    )


@kernel
def _rebase(vector):
    """Count a vector from its largest entry, which is returned; 0 if all are impossible.

    Entries then stay near 0, where differences of logarithms are exact to the last digits.
    """
    most = largest(vector)
    if most == -np.inf:
        return 0.0
    for j in range(vector.size):
        vector[j] -= most
    return most


@kernel
def _forward(log_t, log_e, code, vector, out, terms):
    """Fill the next forward vector, rebased; return what was counted off."""
    for j in range(vector.size):
        for i in range(vector.size):
            terms[i] = vector[i] + log_t[i, j]
        out[j] = _log_sum(terms) + log_e[j, code]
    return _rebase(out)


@kernel
def _backward(log_t, log_e, code, vector, out, terms):
    """Fill the next backward vector, rebased."""
    for i in range(vector.size):
        for j in range(vector.size):
            terms[j] = log_t[i, j] + log_e[j, code] + vector[j]
        out[i] = _log_sum(terms)
    _rebase(out)


@kernel
def log_likelihood(transitions, emissions, codes, start, end):
    """Return log of start' (product over codes of T diag(e)) end.

    Parameters
    ----------
    transitions : float64[state, state]
    emissions : float64[state, code]
    codes : uint16[position] or uint32[position]
    start, end : float64[state]
        Natural logarithms.
    """
    log_t, log_e = _tables(transitions, emissions)
    vector = start.copy()
    following = np.empty_like(vector)
    terms = np.empty_like(vector)
    taken = 0.0
    for code in codes:
        taken += _forward(log_t, log_e, code, vector, following, terms)
        copy(following, vector)
    return taken + _log_sum(vector + end)


@kernel
def first_impossible(transitions, emissions, codes, start):
    """Return the first position at which no path is left; the number of codes if there is one.

    Parameters
    ----------
    transitions, emissions, codes, start
        As for :func:`log_likelihood`.
    """
    log_t, log_e = _tables(transitions, emissions)
    vector = start.copy()
    following = np.empty_like(vector)
    terms = np.empty_like(vector)
    for position in range(codes.size):
        _forward(log_t, log_e, codes[position], vector, following, terms)
        copy(following, vector)
        if largest(vector) == -np.inf:
            return position
    return codes.size


@kernel
def log_pass(
    transitions, emissions, codes, start, end, share, begin, stop, posterior,
    transition_counts, emission_counts, head,
):  # fmt: skip
    """Add posteriors and expected counts of a sequence of codes, times ``share``.

    Parameters
    ----------
    transitions, emissions, codes, start, end
        As for :func:`log_likelihood`.
    share : float
        Weight of everything that is added.
    begin, stop : int
        The positions whose posteriors are wanted.
    posterior : float64[stop - begin, state]
        Added to.
    transition_counts : float64[state, state]
        Added to.
    emission_counts : float64[state, code]
        Added to.
    head : float64[state]
        Added to: posterior of the state before the first code.
    """
    log_t, log_e = _tables(transitions, emissions)
    states = start.size
    blocks = (codes.size + _BLOCK - 1) // _BLOCK
    marks = np.empty((blocks + 1, states))
    terms = np.empty(states)
    forward = np.empty((_BLOCK + 1, states))
    taken = np.empty(_BLOCK)
    vector = start.copy()
    following = np.empty(states)
    for position in range(codes.size):
        if position % _BLOCK == 0:
            copy(vector, marks[position // _BLOCK])
        _forward(log_t, log_e, codes[position], vector, following, terms)
        copy(following, vector)
    backward = end.copy()
    for block in range(blocks - 1, -1, -1):
        offset = block * _BLOCK
        length = min(_BLOCK, codes.size - offset)
        copy(marks[block], forward[0])
        for at in range(length):
            taken[at] = _forward(
                log_t, log_e, codes[offset + at], forward[at], forward[at + 1], terms
            )
        for at in range(length - 1, -1, -1):
            code = codes[offset + at]
            total = _log_sum(forward[at + 1] + backward)
            for j in range(states):
                expected = share * exp(forward[at + 1, j] + backward[j] - total)
                emission_counts[j, code] += expected
                if begin <= offset + at < stop:
                    posterior[offset + at - begin, j] += expected
                for i in range(states):
                    pair = forward[at, i] + log_t[i, j] + log_e[j, code] + backward[j]
                    transition_counts[i, j] += share * exp(pair - taken[at] - total)
            _backward(log_t, log_e, code, backward, following, terms)
            copy(following, backward)
    total = _log_sum(start + backward)
    for j in range(states):
        head[j] += share * exp(start[j] + backward[j] - total)
