"""A machine as the tables that the kernels step by."""

from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.kernels.limits import DECAY_BITS
from hmmseg.kernels.matrices import fill_token_matrices, smallest_entry
from hmmseg.model.machine import Machine

__all__ = ["Tables", "preferred_word", "tables_for"]

_TABLE_BYTES = 1 << 19
"""A table of matrices that is to stay in a core's own cache."""

_LONGEST_WORD = 4

_BASES_A_TOKEN = 64
"""So many bases must share the work of making and unfolding a token's matrix."""


class Tables(NamedTuple):
    """Token matrices of a machine.

    Attributes
    ----------
    word : int
        Bases in a word token.
    matrices, mirrored : float64[token, state, state]
        Matrices and their transposes.
    interval : int
        Tokens between two looks at the scale; 0 where only logarithms are safe.
    """

    word: int
    matrices: NDArray[np.float64]
    mirrored: NDArray[np.float64]
    interval: int


def preferred_word(order: int, states: int, bases: int) -> int:
    """Return the longest word whose table stays small beside the cache and the sequence."""
    word = 1
    while word < _LONGEST_WORD:
        tokens = 4 ** (order + word + 1)
        if tokens * states * states * 8 > _TABLE_BYTES or tokens * _BASES_A_TOKEN > bases:
            break
        word += 1
    return word


# Kept for the contigs of one model that are decoded one after the other.
@lru_cache(maxsize=4)
def tables_for(machine: Machine, word: int) -> Tables:
    """Return the tables of a machine; words become single bases where a product could vanish.

    Parameters
    ----------
    machine
        The machine.
    word
        Bases in a word that would be best.
    """
    while True:
        tokens = machine.emissions.shape[1] + (4 ** (machine.order + word) if word > 1 else 0)
        matrices = np.empty((tokens, machine.states, machine.states))
        fill_token_matrices(machine.transitions, machine.emissions, machine.order, word, matrices)
        bits = -float(np.log2(smallest_entry(matrices)))
        interval = DECAY_BITS if bits <= 1 else int(DECAY_BITS / bits)
        if interval > 0 or word == 1:
            break
        word = 1
    return Tables(word, matrices, np.ascontiguousarray(matrices.transpose(0, 2, 1)), interval)
