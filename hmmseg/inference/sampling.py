"""Paths drawn from their posterior: what lengths and numbers of regions are compatible."""

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.exact import impossible
from hmmseg.inference.passes import find_ends
from hmmseg.inference.streams import BLOCK, build_stream
from hmmseg.inference.tables import tables_for
from hmmseg.kernels.drawing import draw_back, filter_forward
from hmmseg.kernels.tokens import base_codes
from hmmseg.model import Model
from hmmseg.model.contexts import code_dtype
from hmmseg.model.machine import Machine
from hmmseg.sequence.contigs import Contig

__all__ = ["sample_path"]


def sample_path(model: Model, contig: Contig, random: np.random.Generator) -> NDArray[np.uint8]:
    """Draw one path from P(path | contig), read on the forward strand.

    Parameters
    ----------
    model
        The model.
    contig
        The sequence.
    random
        Source of uniform numbers.

    Returns
    -------
    uint8[position]
        States.

    Raises
    ------
    SequenceError
        The contig is impossible under the model.

    References
    ----------
    Forward filtering, backward sampling: Carter & Kohn 1994, Biometrika 81: 541-553.
    """
    machine = model.machine
    last = -1
    vector = machine.start_probabilities.copy()
    if contig.closed:
        last = _state_at_the_cut(machine, contig, random)
        vector = np.where(np.arange(machine.states) == last, 1.0, 0.0)
    begins = range(0, len(contig), BLOCK)
    marks = []
    forward = np.empty((BLOCK, machine.states))
    for begin in begins:
        marks.append(vector.copy())
        _filter(machine, contig, begin, vector, forward)
    path = np.empty(len(contig), np.uint8)
    state = last
    for begin, mark in zip(reversed(begins), reversed(marks), strict=True):
        count = _filter(machine, contig, begin, mark, forward)
        if begin + count == len(contig) and contig.closed:
            # The circle's last state is the one before its first.
            forward[count - 1] = np.where(np.arange(machine.states) == last, 1.0, 0.0)
            state = -1
        state = draw_back(
            forward[:count], machine.transitions, state, random.random(count),
            path[begin : begin + count],
        )  # fmt: skip
    return machine.owners[path].astype(np.uint8)


def _filter(
    machine: Machine,
    contig: Contig,
    begin: int,
    vector: NDArray[np.float64],
    forward: NDArray[np.float64],
) -> int:
    """Filter one block from the vector before it; return its length."""
    stop = min(begin + BLOCK, len(contig))
    codes = np.empty(stop - begin, code_dtype(machine.order))
    base_codes(contig.bases, machine.order, contig.closed, begin, stop, codes)
    skipped = 0
    possible = True
    if begin == 0 and not contig.closed:
        # The first base has no transition before it.
        first = vector * machine.emissions[:, codes[0]]
        possible = bool(first.sum() > 0)
        forward[0] = first / (first.sum() if possible else 1.0)
        vector[:] = forward[0]
        skipped = 1
    possible = possible and filter_forward(
        machine.transitions, machine.emissions, codes[skipped:], vector,
        forward[skipped : stop - begin],
    )  # fmt: skip
    if not possible:
        whole = np.empty(len(contig), code_dtype(machine.order))
        base_codes(contig.bases, machine.order, contig.closed, 0, len(contig), whole)
        raise impossible(machine, contig, whole)
    return stop - begin


def _state_at_the_cut(machine: Machine, contig: Contig, random: np.random.Generator) -> int:
    """Draw the last state of a circle from its posterior."""
    tables = tables_for(machine, 1)
    ends = find_ends(machine, tables, build_stream([contig], machine.order, 1), 1)
    first = ends.jobs.blocks == 0
    shares = np.zeros(machine.states)
    shares[ends.jobs.starts[first].argmax(axis=1)] = ends.jobs.shares[first]
    return int(np.searchsorted(np.cumsum(shares), random.random() * shares.sum(), side="right"))
