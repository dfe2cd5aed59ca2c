"""Models and sequence that are measured."""

import numpy as np

from hmmseg.model import Model
from hmmseg.model.contexts import reverse_complement_words
from hmmseg.sequence.contigs import Contig

__all__ = ["a_model", "contigs"]


def a_model(states: int, order: int, symmetric: bool = False) -> Model:
    """Return a model whose states differ somewhat, stays of 1,000 bases on average."""
    rng = np.random.default_rng(states + order)
    joint = rng.dirichlet([20.0] * 4 ** (order + 1), states)
    if symmetric:
        joint = (joint + joint[:, reverse_complement_words(order + 1)]) / 2
    leave = 1e-3 / max(states - 1, 1)
    transitions = np.full((states, states), leave)
    np.fill_diagonal(transitions, 1 - leave * (states - 1))
    names = tuple(f"state-{i}" for i in range(states))
    kept = (True,) * states
    return Model(names, kept, order, symmetric, "stationary", transitions, joint)


def contigs(lengths: list[int]) -> list[Contig]:
    """Return contigs of random bases."""
    rng = np.random.default_rng(1)
    return [
        Contig(f"r{i}", 0, rng.integers(0, 4, n, dtype=np.uint8), False, n)
        for i, n in enumerate(lengths)
    ]
