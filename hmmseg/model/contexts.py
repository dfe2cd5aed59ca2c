"""Codes: a base together with as much of its context as is known.

An order-k emission reads a base given the ``k`` bases before it. Where a base of that context
is missing, or the contig has only begun, the context backs off to its longest known suffix.
A *code* names one base behind one known context of ``0 ... k`` bases:

    code = offset(length) + 4 * context + base,   offset(length) = (4**(length + 1) - 4) / 3

where a context is read as a number in base four, oldest base first. The last code,
``missing_code(order)``, stands for a missing base, which every state emits with probability 1.
"""

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "backed_off_emissions",
    "code_count",
    "code_dtype",
    "code_offset",
    "joint_levels",
    "missing_code",
    "reverse_complement_words",
]


def code_offset(length: int) -> int:
    """Return the first code whose known context is ``length`` bases long."""
    return (4 ** (length + 1) - 4) // 3


def missing_code(order: int) -> int:
    """Return the code of a missing base, the last one of an order."""
    return code_offset(order + 1)


def code_count(order: int) -> int:
    """Return the number of codes of an order, the missing one included."""
    return missing_code(order) + 1


def code_dtype(order: int) -> type[np.unsignedinteger]:
    """Return the narrowest unsigned type that holds every code: 16 bits up to order 6."""
    return np.uint16 if code_count(order) <= np.iinfo(np.uint16).max + 1 else np.uint32


def reverse_complement_words(length: int) -> NDArray[np.int64]:
    """Return, for each word of ``length`` bases as a number, its reverse complement's number.

    Parameters
    ----------
    length
        Bases in a word, at least 1.

    Returns
    -------
    int64[word]
        A permutation that is its own inverse.
    """
    words = np.arange(4**length, dtype=np.int64)
    mirrored = np.zeros_like(words)
    for _ in range(length):
        mirrored = 4 * mirrored + (3 - words % 4)
        words //= 4
    return mirrored


def joint_levels(joint: NDArray[np.float64]) -> list[NDArray[np.float64]]:
    """Return the marginals of a joint table over words of every shorter length.

    Parameters
    ----------
    joint
        float64[..., 4**(order + 1)]: probabilities or counts of words in alphabetical order.

    Returns
    -------
    list of float64[..., 4**(length + 1)]
        One table for each context length from 0 to the order, the leading bases summed out.
    """
    levels = [joint]
    while levels[0].shape[-1] > 4:
        longest = levels[0]
        by_first = longest.reshape(*longest.shape[:-1], 4, longest.shape[-1] // 4)
        marginal = (by_first[..., 0, :] + by_first[..., 1, :]) + (
            by_first[..., 2, :] + by_first[..., 3, :]
        )
        levels.insert(0, marginal)
    return levels


def backed_off_emissions(joint: NDArray[np.float64], order: int) -> NDArray[np.float64]:
    """Return P(base | known context, state) for every code.

    Parameters
    ----------
    joint
        float64[state, 4**(order + 1)]: each state's joint word table.
    order
        Context length in bases.

    Returns
    -------
    float64[state, code]
        Conditional probabilities; 1 for the missing code. A context that the joint table gives
        no mass takes the conditional of its next shorter suffix.
    """
    states = joint.shape[0]
    table = np.ones((states, code_count(order)))
    shorter = np.full((states, 1, 4), 0.25)
    for length, level in enumerate(joint_levels(joint)):
        rows = level.reshape(states, 4**length, 4)
        mass = (rows[..., 0] + rows[..., 1]) + (rows[..., 2] + rows[..., 3])
        # Repeating along the leading base gives each context its suffix's row.
        suffix = np.tile(shorter, (1, rows.shape[1] // shorter.shape[1], 1))
        seen = mass > 0
        conditional = np.where(seen[..., None], rows / np.where(seen, mass, 1.0)[..., None], suffix)
        start = code_offset(length)
        table[:, start : start + 4 ** (length + 1)] = conditional.reshape(states, -1)
        shorter = conditional
    return table
