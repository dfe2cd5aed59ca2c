"""Bits that each base takes, given all bases before it."""

from collections.abc import Iterator
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.exact import impossible
from hmmseg.kernels.predictive import circle_bits, open_bits, powers_backward
from hmmseg.kernels.tokens import base_codes
from hmmseg.model import Model
from hmmseg.model.contexts import code_dtype
from hmmseg.model.machine import Machine
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.sequence.contigs import Contig

__all__ = ["predictive_bits", "predictive_windows"]

_TABLE = 1 << 20
"""Entries in a block's table of bare steps."""

_LONGEST_BLOCK = 1 << 16


def predictive_bits(model: Model, contig: Contig) -> NDArray[np.float64]:
    """Return float64[position] of a whole contig, see :func:`predictive_windows`."""
    return np.concatenate([bits for _, bits in predictive_windows(model, contig)])


def predictive_windows(model: Model, contig: Contig) -> Iterator[tuple[int, NDArray[np.float64]]]:
    """Yield -log2 P(base | all bases before it) in windows from the first position to the last.

    They add up to -log2 P(contig). A missing base takes no bits.

    Parameters
    ----------
    model
        The model; a chain is one with one state.
    contig
        The sequence. On a circle "before" begins at the contig's first base.

    Yields
    ------
    tuple of int, float64[position]
        The window's first position, and the bits from there on. For a symmetric model of order
        1 or more they are the mean of both strands, each read in its own direction.

    Raises
    ------
    SequenceError
        The contig is impossible under the model.
    """
    forward = _Strand(model.machine, contig, False)
    backward = None
    if model.both_strands:
        backward = _Strand(model.machine, contig, True)
        for block in range(backward.blocks):
            backward.bits(block)
    for block in range(forward.blocks):
        bits = forward.bits(block)
        if backward is not None:
            bits += backward.bits(backward.blocks - 1 - block)[::-1]
            bits /= 2
        yield int(forward.edges[block]), bits


class _Strand:
    """One strand of a contig in blocks.

    What is known before a block is kept, so that a block may be looked at again.
    """

    def __init__(self, machine: Machine, contig: Contig, reverse: bool) -> None:
        self._machine, self._contig, self._reverse = machine, contig, reverse
        self._bases = reverse_complement(contig.bases) if reverse else contig.bases
        length = len(contig)
        block = min(_LONGEST_BLOCK, max(_TABLE // machine.states**2, 1))
        edges = np.append(np.arange(0, length, block), length)
        # Blocks of the reverse strand are those of the forward strand, mirrored.
        self.edges: NDArray[np.int64] = length - edges[::-1] if reverse else edges
        self._before = [
            np.eye(machine.states) if contig.closed else machine.start_probabilities.copy()
        ]
        self._behind = [np.eye(machine.states)]
        if contig.closed:
            for begin, stop in reversed(list(pairwise(self.edges.tolist()))):
                self._behind.insert(0, self._powers(stop - begin, self._behind[0])[0].copy())

    @property
    def blocks(self) -> int:
        return len(self.edges) - 1

    def bits(self, block: int) -> NDArray[np.float64]:
        """Return a block's bits; all blocks before it must have been looked at before."""
        begin, stop = (int(edge) for edge in self.edges[block : block + 2])
        codes, bits = self._codes(begin, stop), np.empty(stop - begin)
        known, machine = self._before[block].copy(), self._machine
        if self._contig.closed:
            powers = self._powers(stop - begin, self._behind[block + 1])
            circle_bits(codes, machine.transitions, machine.emissions, powers, known, bits)
        else:
            open_bits(codes, machine.transitions, machine.emissions, begin > 0, known, bits)
        if not np.isfinite(bits).all():
            everything = self._codes(0, len(self._bases))
            raise impossible(machine, self._contig, everything, self._reverse)
        if block + 1 == len(self._before):
            self._before.append(known)
        return bits

    def _codes(self, begin: int, stop: int) -> NDArray[np.unsignedinteger]:
        codes = np.empty(stop - begin, code_dtype(self._machine.order))
        base_codes(self._bases, self._machine.order, self._contig.closed, begin, stop, codes)
        return codes

    def _powers(self, length: int, last: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return bare steps from every position of a block to the end of the circle."""
        states = self._machine.states
        powers = np.empty((length + 1, states, states))
        powers[-1] = last
        powers_backward(self._machine.transitions, powers)
        return powers
