"""Regions of one length, planted in background that a model draws."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from hmmseg.kernels.sampling import draw
from hmmseg.model import Model
from hmmseg.regions.odds import rest_of

__all__ = ["planted"]

_LONGEST_CONTIG = 1 << 19


def planted(
    model: Model, state: int, length: int, flank: int, trials: int, random: np.random.Generator
) -> Iterator[tuple[NDArray[np.uint8], NDArray[np.int64]]]:
    """Draw contigs of background with regions of a state in them.

    Parameters
    ----------
    model
        The model; outside regions it keeps to the states of :func:`~hmmseg.regions.odds.rest_of`.
    state
        The regions' state.
    length, flank
        Bases of each region, and of background before each and at the contig's end.
    trials
        Regions in all contigs together.
    random
        Source of uniform numbers.

    Yields
    ------
    tuple of uint8[position], int64[region]
        Bases, and where regions start.
    """
    outside, inside = _cumulative(model, state)
    emissions = np.cumsum(model.machine.emissions[:, :-1].reshape(model.machine.states, -1, 4), 2)
    most = max(_LONGEST_CONTIG // (length + flank), 1)
    for first in range(0, trials, most):
        count = min(most, trials - first)
        bases = np.empty(count * (flank + length) + flank, np.uint8)
        path = np.empty(len(bases), np.uint8)
        uniforms = random.random((len(bases), 2))
        memory = np.array([model.machine.states, 0, 0], np.int64)
        starts = flank + np.arange(count, dtype=np.int64) * (flank + length)
        at = 0
        for start in [*starts.tolist(), len(bases)]:
            for steps, stop in ((outside, start), (inside, start + length)):
                piece = slice(at, min(stop, len(bases)))
                draw(
                    steps, emissions, model.order, memory, uniforms[piece], path[piece],
                    bases[piece],
                )  # fmt: skip
                at = piece.stop
        yield bases, starts


def _cumulative(model: Model, state: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return float64[stage + 1, stage] cumulative steps outside and inside, the start last."""
    machine = model.machine
    out = np.isin(machine.owners, rest_of(model, state))
    start = np.where(out, model.shares[machine.owners], 0.0)
    start = start if start.sum() > 0 else out.astype(np.float64)
    own = np.flatnonzero(machine.owners == state)
    steps = np.vstack([machine.transitions, start])
    # Whatever the stage, a region is left as from the last one.
    steps[own] = machine.transitions[own[-1]]
    steps = np.where(out, steps, 0.0)
    steps = np.where(steps.sum(axis=1, keepdims=True) > 0, steps, start)
    into = np.zeros_like(steps)
    into[:, own[0]] = 1.0
    return (np.cumsum(steps / steps.sum(axis=1, keepdims=True), axis=1), np.cumsum(into, axis=1))
