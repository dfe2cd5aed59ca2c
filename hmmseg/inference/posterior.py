"""Posterior probabilities of states, in windows, so that no whole record is ever held."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.exact import exact_pass
from hmmseg.inference.passes import BlockEnds, find_ends
from hmmseg.inference.streams import BLOCK, Stream, build_stream, in_threads
from hmmseg.inference.tables import Tables, preferred_word, tables_for
from hmmseg.kernels.posteriors import posterior_kernel
from hmmseg.model import Model
from hmmseg.model.contexts import code_dtype
from hmmseg.sequence.contigs import Contig

__all__ = ["WINDOW_BLOCKS", "posterior", "posterior_windows"]

WINDOW_BLOCKS = 64
"""Blocks in a window."""


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
        _Strand(model, contig, reverse, threads, block)
        for reverse in ((False, True) if model.both_strands else (False,))
    ]
    length, size = len(contig), WINDOW_BLOCKS * block
    for begin in range(0, length, size):
        stop = min(begin + size, length)
        window = strands[0].window(begin, stop)
        if len(strands) > 1:
            window += strands[1].window(length - stop, length - begin)[::-1]
            window /= 2
        yield begin, window


class _Strand:
    """One strand of one contig, ready to give the posterior between any two block edges."""

    def __init__(
        self, model: Model, contig: Contig, reverse: bool, threads: int, block: int
    ) -> None:
        word = preferred_word(model.order, model.states, len(contig))
        tables = tables_for(model, word)
        self.model, self.contig, self.reverse, self.threads = model, contig, reverse, threads
        self.stream: Stream = build_stream(
            [contig], model.order, tables.word, reverse, threads, block
        )
        self.ends: BlockEnds = find_ends(model, tables, self.stream, threads)
        self.single: Tables = tables_for(model, 1)

    def window(self, begin: int, stop: int) -> NDArray[np.float64]:
        """Return float64[position, state] of this strand's positions, which are block edges."""
        if not self.ends.lost[0]:
            result = np.zeros((stop - begin, self.model.states))
            edges = self.stream.edges[0]
            first, last = np.searchsorted(edges, (begin, stop))
            if begin == 0 and not self.contig.closed:
                result[0] = self.ends.heads[0]
            done = in_threads(
                lambda block: self._fill(block, begin, result), range(first, last), self.threads
            )
            if all(done):
                return result
            self.ends.lost[0] = True
        codes = self.stream.codes(0)
        return exact_pass(self.model, self.contig, codes, (begin, stop), self.reverse).posterior

    def _fill(self, block: int, begin: int, result: NDArray[np.float64]) -> bool:
        """Add one block's posterior; return whether no number was lost."""
        left, right = self.stream.edges[0][block : block + 2]
        codes = np.empty(right - left, code_dtype(self.model.order))
        forward = np.empty((right - left + 1, self.model.states))
        jobs = self.ends.jobs
        return all(
            posterior_kernel(self.model.states)(
                self.stream.strands[0], self.model.order, self.contig.closed, left, right,
                jobs.starts[job], jobs.ends[job], jobs.shares[job],
                self.single.matrices, self.single.mirrored, self.single.interval,
                codes, forward, result[left - begin : right - begin],
            )
            for job in jobs.of_blocks(block, block + 1)
        )  # fmt: skip
