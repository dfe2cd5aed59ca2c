"""One pass over a stream: what is known at both ends of every block.

After it, blocks are independent. Contigs for which a scaled number was lost are named, and
whoever runs the pass does them again with logarithms (:mod:`hmmseg.inference.exact`).
"""

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.streams import Stream
from hmmseg.inference.tables import Tables
from hmmseg.inference.threads import in_threads
from hmmseg.kernels.blocks import block_kernels
from hmmseg.kernels.chains import chain_kernel, chains_pay
from hmmseg.kernels.scan import log_scaled, log_trace_of_power, scan_closed, scan_contigs
from hmmseg.model.machine import Machine

__all__ = ["BlockEnds", "Jobs", "find_ends"]

_BLOCKS_AT_ONCE = 64


@dataclass(frozen=True, eq=False)
class Jobs:
    """Independent pieces of work: a block between two known vectors.

    An open contig makes one job of a block; a circle makes one for each state in which the
    block may be entered, with the probability that it is.

    Attributes
    ----------
    blocks : int64[job]
        Sorted.
    starts, ends : float64[job, state]
        Forward vector before, backward vector behind the block, each up to a factor.
    shares : float64[job]
        Probability with which the job counts.
    """

    blocks: NDArray[np.int64]
    starts: NDArray[np.float64]
    ends: NDArray[np.float64]
    shares: NDArray[np.float64]

    def of_blocks(self, first: int, last: int) -> range:
        """Return the jobs of blocks ``first`` to ``last``, half-open."""
        begin, stop = np.searchsorted(self.blocks, (first, last))
        return range(int(begin), int(stop))

    def without(self, dropped: NDArray[np.bool_]) -> "Jobs":
        """Return the jobs but for those of some blocks (bool[block])."""
        return self.taken(~dropped[self.blocks])

    def taken(self, chosen: NDArray[np.intp] | NDArray[np.bool_]) -> "Jobs":
        """Return some of the jobs."""
        return Jobs(
            self.blocks[chosen], self.starts[chosen], self.ends[chosen], self.shares[chosen]
        )


@dataclass(frozen=True, eq=False)
class BlockEnds:
    """What one pass over a stream found.

    Attributes
    ----------
    jobs : Jobs
        Of all contigs but the lost ones.
    heads : float64[contig, state]
        Posterior at the first base of open contigs.
    logs : float64[contig]
        Log-likelihoods in nats.
    lost : bool[contig]
        Contigs to be done again with logarithms.
    """

    jobs: Jobs
    heads: NDArray[np.float64]
    logs: NDArray[np.float64]
    lost: NDArray[np.bool_]


def find_ends(machine: Machine, tables: Tables, stream: Stream, threads: int) -> BlockEnds:
    """Compute every block's transfer matrix, then the vectors at its ends.

    Parameters
    ----------
    machine
        The parameters.
    tables
        Its matrices, of the stream's word length.
    stream
        Tokens.
    threads
        Threads to use.
    """
    states, blocks, contigs = machine.states, len(stream.bounds) - 1, len(stream.closed)
    if tables.interval == 0:
        return _everything_lost(states, contigs)
    products = np.empty((blocks, states, states))
    times = np.zeros((blocks, states), np.int64)
    first_vectors = np.ascontiguousarray(
        machine.start_probabilities * machine.emissions[:, stream.heads].T
    )
    carried = chains_pay(states)
    mine = _in_circles(stream) if carried else np.arange(blocks)
    scan = _Scan(
        np.empty((blocks, states)),
        np.empty((blocks, states)),
        np.zeros((contigs, states)),
        np.zeros(contigs),
        _transfer(tables, stream, threads, mine, products, times),
    )
    if carried:
        _run_through(tables, stream, threads, first_vectors, scan)
    else:
        scan_contigs(products, times, stream.contig_blocks, stream.closed, first_vectors, *scan)
    circles = _scan_circles(machine, stream, products, times, scan.logs, scan.lost)
    jobs = _merge_jobs(stream, scan.starts, scan.ends, circles)
    if scan.lost.any():
        jobs = jobs.without(np.repeat(scan.lost, np.diff(stream.contig_blocks)))
    return BlockEnds(jobs, scan.heads, scan.logs, scan.lost)


class _Scan(NamedTuple):
    """What :func:`hmmseg.kernels.scan.scan_contigs` fills."""

    starts: NDArray[np.float64]
    ends: NDArray[np.float64]
    heads: NDArray[np.float64]
    logs: NDArray[np.float64]
    lost: NDArray[np.bool_]


def _in_circles(stream: Stream) -> NDArray[np.int64]:
    """Return the blocks of closed contigs."""
    return np.flatnonzero(np.repeat(stream.closed, np.diff(stream.contig_blocks)))


def _transfer(
    tables: Tables,
    stream: Stream,
    threads: int,
    blocks: NDArray[np.int64],
    products: NDArray[np.float64],
    times: NDArray[np.int64],
) -> NDArray[np.bool_]:
    """Fill the transfer matrices of blocks; return the contigs in which a value was lost."""
    # Blocks go in pairs, best of equal length.
    by_length = blocks[np.argsort(np.diff(stream.bounds)[blocks], kind="stable")]
    scales = np.zeros(times.shape)
    flags = np.zeros(len(times), bool)
    transfer = block_kernels(products.shape[1]).transfer

    def work(first: int) -> None:
        transfer(
            stream.tokens, stream.bounds, by_length[first : first + _BLOCKS_AT_ONCE],
            tables.matrices, tables.interval, products, scales, flags,
        )  # fmt: skip

    in_threads(work, range(0, len(blocks), _BLOCKS_AT_ONCE), threads)
    times[:] = scales
    return _any_of_blocks(flags, stream.contig_blocks)


def _run_through(
    tables: Tables, stream: Stream, threads: int, first_vectors: NDArray[np.float64], scan: _Scan
) -> None:
    """Fill what is known of open contigs by carrying vectors through them."""
    opened = np.flatnonzero(~stream.closed)
    # Pieces of some hundred blocks each.
    cuts = np.searchsorted(
        stream.contig_blocks[opened], np.arange(0, len(scan.starts), _BLOCKS_AT_ONCE), side="left"
    )
    pieces = [piece for piece in np.split(opened, np.unique(cuts)) if len(piece)]
    through = chain_kernel(first_vectors.shape[1])

    def work(contigs: NDArray[np.int64]) -> None:
        through(
            stream.tokens, stream.bounds, stream.contig_blocks, contigs, first_vectors,
            tables.matrices, tables.mirrored, tables.interval, *scan,
        )  # fmt: skip

    in_threads(work, pieces, threads)


def _everything_lost(states: int, contigs: int) -> BlockEnds:
    none = Jobs(np.empty(0, np.int64), np.empty((0, states)), np.empty((0, states)), np.empty(0))
    return BlockEnds(none, np.zeros((contigs, states)), np.zeros(contigs), np.ones(contigs, bool))


def _any_of_blocks(flags: NDArray[np.bool_], contig_blocks: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Return for each contig whether one of its blocks is flagged."""
    if not flags.any():
        return np.zeros(len(contig_blocks) - 1, bool)
    sums = np.concatenate(([0], np.cumsum(flags)))
    return sums[contig_blocks[1:]] > sums[contig_blocks[:-1]]


def _scan_circles(
    machine: Machine,
    stream: Stream,
    products: NDArray[np.float64],
    times: NDArray[np.int64],
    logs: NDArray[np.float64],
    lost: NDArray[np.bool_],
) -> list[Jobs]:
    """Return the jobs of each circle; fill in its likelihood and whether it was lost."""
    states = machine.states
    jobs = []
    for contig in np.flatnonzero(stream.closed):
        first, last = stream.contig_blocks[contig : contig + 2]
        ends = np.empty((last - first, states, states))
        shares = np.empty((last - first, states))
        value, count, vanished = scan_closed(
            products[first:last], times[first:last], 0, last - first, ends, shares
        )
        length = len(stream.strands[contig])
        logs[contig] = log_scaled(value, count) - log_trace_of_power(machine.transitions, length)
        lost[contig] |= vanished
        jobs.append(
            Jobs(
                np.repeat(np.arange(first, last), states),
                np.tile(np.eye(states), (last - first, 1)),
                ends.reshape(-1, states),
                shares.reshape(-1),
            )
        )
    return jobs


def _merge_jobs(
    stream: Stream,
    starts: NDArray[np.float64],
    ends: NDArray[np.float64],
    circles: list[Jobs],
) -> Jobs:
    """Return the jobs of open contigs and circles together, sorted by block."""
    if not circles:
        return Jobs(np.arange(len(starts)), starts, ends, np.ones(len(starts)))
    in_circle = np.repeat(stream.closed, np.diff(stream.contig_blocks))
    straight = np.flatnonzero(~in_circle)
    parts = [Jobs(straight, starts[straight], ends[straight], np.ones(len(straight))), *circles]
    blocks = np.concatenate([part.blocks for part in parts])
    shares = np.concatenate([part.shares for part in parts])
    order = np.argsort(blocks, kind="stable")
    order = order[shares[order] > 0]
    return Jobs(
        blocks[order],
        np.concatenate([part.starts for part in parts])[order],
        np.concatenate([part.ends for part in parts])[order],
        shares[order],
    )
