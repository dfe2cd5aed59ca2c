"""From what is wanted to a model: compositions tied to those of the genome at hand.

A table from the literature belongs to the genome that it was counted in. What carries over to
another genome is how a region differs from its surroundings, so tables are used as ratios to
the state that stands for the surroundings, and GC levels as odds relative to the genome's own.
"""

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import ModelError
from hmmseg.model.contexts import reverse_complement_words
from hmmseg.model.document import joint_of_chain
from hmmseg.model.parameters import STATIONARY, Model
from hmmseg.model.specification import Specification, StateWish

__all__ = ["anchored", "even_switching", "gc_of_words", "tilted"]

_ROUNDS = 50
_CLOSE = 1e-9
_BASES = "ACGT"


def anchored(wanted: Specification, counts: NDArray[np.float64]) -> Model:
    """Return the model that a specification describes for a genome.

    Parameters
    ----------
    wanted
        The specification.
    counts
        float64[4**(order + 1)]: how often the genome has each word, in alphabetical order.

    Raises
    ------
    ModelError
        A table has contexts that never reach each other.
    """
    genome = (counts + 1) / (counts.sum() + counts.size)
    if wanted.symmetric:
        genome = _mirrored(genome, wanted.order)
    surroundings = None
    for wish in wanted.states:
        if wish.name == wanted.anchor:
            surroundings = _printed(wish, wanted)
    joint = np.array([_table(wish, wanted, genome, surroundings) for wish in wanted.states])
    return Model(
        names=tuple(wish.name for wish in wanted.states),
        reported=tuple(wish.reported for wish in wanted.states),
        order=wanted.order,
        symmetric=wanted.symmetric,
        start_kind=STATIONARY,
        transitions=_transitions(wanted),
        joint=joint,
        stages=tuple(wish.stages for wish in wanted.states),
    )


def _mirrored(table: NDArray[np.float64], order: int) -> NDArray[np.float64]:
    return (table + table[reverse_complement_words(order + 1)]) / 2


def _printed(wish: StateWish, wanted: Specification) -> NDArray[np.float64]:
    """Return the word table of a state's own conditional table."""
    rows = np.array(wish.conditional)
    try:
        table = joint_of_chain("conditional", rows)
    except ModelError as error:
        raise ModelError(f"state {wish.name}: {error}") from None
    return _mirrored(table, wanted.order) if wanted.symmetric else table


def _table(
    wish: StateWish,
    wanted: Specification,
    genome: NDArray[np.float64],
    surroundings: NDArray[np.float64] | None,
) -> NDArray[np.float64]:
    """Return one state's word table."""
    table = genome
    if wish.conditional is not None:
        table = _printed(wish, wanted)
        if surroundings is not None:
            ratio = np.where(
                surroundings > 0, table / np.where(surroundings > 0, surroundings, 1), 1
            )
            table = genome * ratio
    elif wish.independent:
        table = _independent(genome, wanted.order)
    if wish.enriched is not None:
        factors = np.ones(table.size)
        for word, factor in wish.enriched.items():
            factors[_number(word)] = factor
            if wanted.symmetric:
                factors[int(reverse_complement_words(len(word))[_number(word)])] = factor
        table = table * factors
    table = table / table.sum()
    level = wish.gc
    if wish.gc_odds is not None:
        own = gc_of_words(genome)
        odds = wish.gc_odds * own / (1 - own)
        level = odds / (1 + odds)
    table = table if level is None else tilted(table, level, wanted.order)
    return _mirrored(table, wanted.order) if wanted.symmetric else table


def _number(word: str) -> int:
    number = 0
    for base in word:
        number = 4 * number + _BASES.index(base)
    return number


def _independent(table: NDArray[np.float64], order: int) -> NDArray[np.float64]:
    """Return the table of words whose bases do not depend on one another."""
    bases = table.reshape(-1, 4).sum(axis=0)
    product = np.ones(1)
    for _ in range(order + 1):
        product = (product[:, None] * bases[None, :]).reshape(-1)
    return product


def gc_of_words(table: NDArray[np.float64]) -> float:
    """Return the GC fraction of the last bases of a word table, float64[4**(order + 1)]."""
    bases = table.reshape(-1, 4).sum(axis=0)
    return float((bases[1] + bases[2]) / bases.sum())


def tilted(table: NDArray[np.float64], gc: float, order: int) -> NDArray[np.float64]:
    """Return a word table with another GC, in other respects as like the old one as can be.

    Parameters
    ----------
    table
        float64[4**(order + 1)]: word probabilities, none of which is 0.
    gc
        The GC fraction to reach.
    order
        Context length in bases.
    """
    for _ in range(_ROUNDS):
        own = gc_of_words(table)
        if abs(own - gc) < _CLOSE:
            break
        weak, strong = (1 - gc) / (1 - own), gc / own
        factor = np.array([weak, strong, strong, weak])
        for place in range(order + 1):
            table = (table.reshape(4**place, 4, -1) * factor[None, :, None]).reshape(-1)
            table = table / table.sum()
    return table


def _transitions(wanted: Specification) -> NDArray[np.float64]:
    """Return transitions with the wanted lengths, among the states that may follow each other."""
    names = [wish.name for wish in wanted.states]
    allowed = ~np.eye(len(names), dtype=bool)
    for one, other in wanted.never:
        allowed[names.index(one), names.index(other)] = False
        if wanted.symmetric:
            allowed[names.index(other), names.index(one)] = False
    # Of a state with stages, the diagonal is the chance to stay in one of them.
    lengths = np.array([wish.expected_length / wish.stages for wish in wanted.states])
    if len(names) > 1 and not allowed.any(axis=1).all():
        alone = names[int(np.argmin(allowed.any(axis=1)))]
        raise ModelError(f"never: nothing may follow state {alone}")
    return even_switching(lengths, allowed)


def even_switching(lengths: NDArray[np.float64], allowed: NDArray[np.bool_]) -> NDArray[np.float64]:
    """Return transitions that leave every state for all that may follow alike.

    All flows between states are then equal, so the chain is reversible if what may follow is
    mutual.

    Parameters
    ----------
    lengths
        float64[state]: expected lengths of visits, in bases.
    allowed
        bool[state, state]: what may follow; False on the diagonal.

    Returns
    -------
    float64[state, state]
    """
    if len(lengths) == 1:
        return np.ones((1, 1))
    leaving = 1 / (lengths * allowed.sum(axis=1))
    transitions = np.where(allowed, leaving[:, None], 0.0)
    np.fill_diagonal(transitions, 1 - 1 / lengths)
    return transitions
