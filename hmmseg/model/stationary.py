"""The stationary distribution of a transition matrix, without a linear-algebra library."""

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import ModelError

__all__ = ["closed_classes", "stationary_distribution"]


def _reachable(transitions: NDArray[np.float64]) -> NDArray[np.bool_]:
    """Return which states can be reached from which, in any number of steps."""
    reach = (transitions > 0) | np.eye(len(transitions), dtype=bool)
    for middle in range(len(transitions)):
        reach |= np.outer(reach[:, middle], reach[middle])
    return reach


def closed_classes(transitions: NDArray[np.float64]) -> list[list[int]]:
    """Return the sets of states that, once entered, are never left.

    Parameters
    ----------
    transitions
        float64[state, state]: rows sum to 1.
    """
    reach = _reachable(transitions)
    classes: list[list[int]] = []
    for state in range(len(transitions)):
        members = np.flatnonzero(reach[state])
        closed = bool(reach[members, state].all())
        if closed and members[0] == state:
            classes.append(members.tolist())
    return classes


def stationary_distribution(transitions: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the stationary distribution by the Grassmann-Taksar-Heyman elimination.

    It subtracts nothing, so every entry keeps full relative precision, and it uses only sums,
    products and quotients in a fixed order, so the bits do not depend on the machine.

    Parameters
    ----------
    transitions
        float64[state, state]: rows sum to 1.

    Returns
    -------
    float64[state]
        Probabilities; 0 for states that are left for good.

    Raises
    ------
    ModelError
        There is more than one closed set of states, so the distribution is not unique.

    References
    ----------
    Grassmann, Taksar & Heyman 1985, Operations Research 33: 1107-1116.
    """
    classes = closed_classes(transitions)
    if len(classes) > 1:
        raise ModelError(
            f"transitions: states {classes[0]} and {classes[1]} never reach each other, so there "
            "is no single stationary start; give 'start' as a list of probabilities"
        )
    members = classes[0]
    rates = transitions[np.ix_(members, members)].copy()
    # Fold the last state into the others, one at a time.
    for last in range(len(members) - 1, 0, -1):
        rates[:last, last] /= rates[last, :last].sum()
        rates[:last, :last] += rates[:last, last, None] * rates[last, None, :last]
    weights = np.ones(len(members))
    for state in range(1, len(members)):
        weights[state] = (weights[:state] * rates[:state, state]).sum()
    result = np.zeros(len(transitions))
    result[members] = weights / weights.sum()
    return result
