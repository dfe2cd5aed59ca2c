"""Posterior probabilities of states, in windows, so that no whole record is ever held."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.exact import exact_pass
from hmmseg.inference.passes import BlockEnds, find_ends
from hmmseg.inference.streams import BLOCK, Stream, build_stream
from hmmseg.inference.tables import Tables, preferred_word, tables_for
from hmmseg.inference.threads import in_threads
from hmmseg.kernels.posteriors import posterior_kernel
from hmmseg.model import Model
from hmmseg.model.machine import Machine
from hmmseg.sequence.contigs import Contig

__all__ = ["WINDOW_BLOCKS", "posterior", "posterior_windows"]

WINDOW_BLOCKS = 64
"""Blocks in a window."""

_BLOCKS_AT_ONCE = 8


def posterior(model: Model, contig: Contig, threads: int = 1) -> NDArray[np.float64]:
    """Return the posterior of every state at every position of a contig.

    Parameters
    ----------
    model
        The model.
    contig
        The sequence.
    threads
        Threads to use; the result does not depend on it.

    Returns
    -------
    float64[position, state]
        P(state | contig); the mean of both strands for a symmetric model of order 1 or more.

    Raises
    ------
    SequenceError
        The contig is impossible under the model.
    """
    return np.concatenate([window for _, window in posterior_windows(model, contig, threads)])


def posterior_windows(
    model: Model, contig: Contig, threads: int = 1, block: int = BLOCK
) -> Iterator[tuple[int, NDArray[np.float64]]]:
    """Yield the posterior in windows from the first position to the last.

    Parameters
    ----------
    model
        The model.
    contig
        The sequence.
    threads
        Threads to use; the result does not depend on it.
    block
        Bases in a block; another than the default only in tests.

    Yields
    ------
    tuple of int, float64[position, state]
        The window's first position, and the posterior from there on.

    Raises
    ------
    SequenceError
        The contig is impossible under the model.
    """
    strands = [
        _Strand(model.machine, contig, reverse, threads, block)
        for reverse in ((False, True) if model.both_strands else (False,))
    ]
    length, size = len(contig), WINDOW_BLOCKS * block
    for begin in range(0, length, size):
        window = np.zeros((min(size, length - begin), model.machine.states))
        # Where a strand loses a number it changes to logarithms, and the window is done again.
        share = 1 / len(strands)
        while sum(strand.add_to(window, begin, share) for strand in strands) < len(strands):
            window[:] = 0.0
        yield begin, model.machine.pooled(window)


class _Strand:
    """One strand of one contig, ready to give the posterior between any two block edges."""

    def __init__(
        self, machine: Machine, contig: Contig, reverse: bool, threads: int, block: int
    ) -> None:
        word = preferred_word(machine.order, machine.states, len(contig))
        tables = tables_for(machine, word)
        self.machine, self.contig, self.reverse, self.threads = machine, contig, reverse, threads
        self.stream: Stream = build_stream(
            [contig], machine.order, tables.word, reverse, threads, block
        )
        self.ends: BlockEnds = find_ends(machine, tables, self.stream, threads)
        self.single: Tables = tables_for(machine, 1)

    def add_to(self, window: NDArray[np.float64], first: int, share: float) -> bool:
        """Add this strand's share of the posterior from a forward position on.

        Returns
        -------
        bool
            Whether no number was lost.
        """
        length = len(self.contig)
        begin, stop = first, first + len(window)
        if self.reverse:
            begin, stop = length - stop, length - begin
        # The base at position x of this strand has row origin + step * x of the window.
        origin, step = (length - 1 - first, -1) if self.reverse else (-first, 1)
        if self.ends.lost[0]:
            exact = exact_pass(
                self.machine, self.contig, self.stream.codes(0), (begin, stop), self.reverse
            )
            window += share * exact.posterior[::step]
            return True
        if begin == 0 and not self.contig.closed:
            window[origin] += share * self.ends.heads[0]
        self.ends.lost[0] = not self._add_blocks(window, begin, stop, origin, step, share)
        return not self.ends.lost[0]

    def _add_blocks(
        self,
        window: NDArray[np.float64],
        begin: int,
        stop: int,
        origin: int,
        step: int,
        share: float,
    ) -> bool:
        """Add what blocks between two edges say; return whether no number was lost."""
        edges, jobs = self.stream.edges[0], self.ends.jobs
        first, last = np.searchsorted(edges, (begin, stop))
        add_posteriors = posterior_kernel(self.machine.states)

        def work(block: int) -> bool:
            mine = jobs.of_blocks(block, min(block + _BLOCKS_AT_ONCE, int(last)))
            piece = slice(mine.start, mine.stop)
            return bool(
                add_posteriors(
                    self.stream.strands[0], self.machine.order, self.contig.closed, edges,
                    jobs.blocks[piece], jobs.starts[piece], jobs.ends[piece],
                    share * jobs.shares[piece], self.single.matrices, self.single.mirrored,
                    self.single.interval, window, origin, step,
                )
            )  # fmt: skip

        return all(in_threads(work, range(int(first), int(last), _BLOCKS_AT_ONCE), self.threads))
