"""Sequences with a known path, drawn from a model."""

from collections.abc import Iterator, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.kernels.sampling import draw
from hmmseg.model import Model

__all__ = ["Drawn", "drawn_from", "simulate"]

_CHUNK = 1 << 18


class Drawn(NamedTuple):
    """A sequence and the path that made it.

    Attributes
    ----------
    bases : uint8[position]
        0 to 3.
    path : uint8[position]
        States.
    """

    bases: NDArray[np.uint8]
    path: NDArray[np.uint8]


def simulate(model: Model, lengths: Sequence[int], seed: int) -> Iterator[Drawn]:
    """Draw sequences of the given lengths.

    Every sequence has random numbers of its own, so one does not change with the others'
    lengths. The draws use uniform numbers of PCG64 only, which are the same everywhere.

    Parameters
    ----------
    model
        Where sequences come from. Each begins from its start, without context.
    lengths
        In bases.
    seed
        Any whole number from 0 up.

    Yields
    ------
    Drawn
        One for each length.
    """
    for number, length in enumerate(lengths):
        seeds = np.random.SeedSequence([seed, number])
        yield drawn_from(model, length, np.random.Generator(np.random.PCG64(seeds)))


def drawn_from(model: Model, length: int, random: np.random.Generator) -> Drawn:
    """Draw one sequence.

    Parameters
    ----------
    model
        Where it comes from.
    length
        In bases.
    random
        Source of uniform numbers.
    """
    machine = model.machine
    following = np.cumsum(np.vstack([machine.transitions, machine.start_probabilities]), axis=1)
    emissions = np.cumsum(machine.emissions[:, :-1].reshape(machine.states, -1, 4), axis=2)
    drawn = Drawn(np.empty(length, np.uint8), np.empty(length, np.uint8))
    memory = np.array([machine.states, 0, 0], dtype=np.int64)
    for begin in range(0, length, _CHUNK):
        piece = slice(begin, min(begin + _CHUNK, length))
        uniforms = random.random((piece.stop - piece.start, 2))
        draw(
            following, emissions, model.order, memory, uniforms,
            drawn.path[piece], drawn.bases[piece],
        )  # fmt: skip
    return drawn._replace(path=machine.owners.astype(np.uint8)[drawn.path])
