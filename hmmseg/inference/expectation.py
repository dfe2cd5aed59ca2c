"""The expectation step: likelihood and expected counts of a corpus."""

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.exact import exact_pass
from hmmseg.inference.passes import BlockEnds, find_ends
from hmmseg.inference.streams import Corpus, Stream
from hmmseg.inference.tables import Tables, preferred_word, tables_for
from hmmseg.inference.threads import in_threads
from hmmseg.kernels.blocks import block_kernels
from hmmseg.kernels.matrices import add_heads, unfold_kernel
from hmmseg.model import Model
from hmmseg.model.machine import Machine

__all__ = ["Counts", "expect", "log_likelihoods"]

_MOST_GROUPS = 1024
_FEWEST_GROUPS = 4
_GROUP_BYTES = 1 << 26
_GROUP_JOBS = 128


@dataclass(frozen=True, eq=False)
class Counts:
    """Expected counts, in bases of one strand.

    Attributes
    ----------
    logs : float64[contig]
        Log-likelihoods in nats.
    start : float64[state]
        Expected first states of open contigs.
    transitions : float64[state, state]
        Expected transitions; on the diagonal those within a stage.
    advances : float64[state]
        Expected transitions from one stage of a state to the next.
    emissions : float64[state, code]
        Expected emissions.
    """

    logs: NDArray[np.float64]
    start: NDArray[np.float64]
    transitions: NDArray[np.float64]
    advances: NDArray[np.float64]
    emissions: NDArray[np.float64]

    @property
    def log_likelihood(self) -> float:
        """Log-likelihood of the corpus in nats."""
        return float(self.logs.sum())


def _prepare(model: Model, corpus: Corpus) -> tuple[Machine, Tables]:
    if corpus.order != model.order or corpus.both_strands != model.both_strands:
        raise ValueError("the corpus was prepared for a model of another order or symmetry")
    machine = model.machine if corpus.labels is None else model.machine.clamped()
    word = preferred_word(model.order, machine.states, corpus.bases) if not corpus.labels else 1
    return machine, tables_for(machine, word)


def log_likelihoods(model: Model, corpus: Corpus, threads: int = 1) -> NDArray[np.float64]:
    """Return each contig's log-likelihood.

    Parameters
    ----------
    model
        The model.
    corpus
        The sequence, prepared for the model's order.
    threads
        Threads to use; the result does not depend on it.

    Returns
    -------
    float64[contig]
        In nats; the mean of both strands for a symmetric model of order 1 or more.

    Raises
    ------
    SequenceError
        A contig is impossible under the model.
    """
    machine, tables = _prepare(model, corpus)
    results = []
    for stream, reverse in zip(corpus.streams(tables.word), (False, True), strict=False):
        ends = find_ends(machine, tables, stream, threads)
        for contig in np.flatnonzero(ends.lost):
            again = exact_pass(
                machine, corpus.contigs[contig], stream.codes(int(contig)), reverse=reverse
            )
            ends.logs[contig] = again.log_likelihood
        results.append(ends.logs)
    return results[0] if len(results) == 1 else (results[0] + results[1]) / 2


def expect(model: Model, corpus: Corpus, threads: int = 1) -> Counts:
    """Return likelihood and expected counts of a corpus under a model.

    Parameters
    ----------
    model
        The model.
    corpus
        The sequence, prepared for the model's order.
    threads
        Threads to use; the result does not depend on it.

    Returns
    -------
    Counts
        Means of both strands for a symmetric model of order 1 or more.

    Raises
    ------
    SequenceError
        A contig is impossible under the model.
    """
    machine, tables = _prepare(model, corpus)
    counts = [
        _expect_strand(machine, tables, corpus, stream, reverse, threads)
        for stream, reverse in zip(corpus.streams(tables.word), (False, True), strict=False)
    ]
    if len(counts) == 1:
        return _folded(model, machine, counts[0])
    one, other = counts
    mean = _MachineCounts(*((a + b) / 2 for a, b in zip(one, other, strict=True)))
    return _folded(model, machine, mean)


class _MachineCounts(NamedTuple):
    """Expected counts of a machine: of its stages, and of labelled codes."""

    logs: NDArray[np.float64]
    start: NDArray[np.float64]
    transitions: NDArray[np.float64]
    emissions: NDArray[np.float64]


def _folded(model: Model, machine: Machine, counts: _MachineCounts) -> Counts:
    """Return the counts of states, summed over their stages and over labels."""
    codes = model.emissions.shape[1]
    by_label = counts.emissions.reshape(machine.states, -1, codes)
    emissions = machine.pooled(by_label.sum(axis=1).T).T
    transitions, advances = counts.transitions, np.zeros(model.states)
    if machine.states > model.states:
        within = np.equal.outer(machine.owners, machine.owners) & ~np.eye(
            len(machine.owners), dtype=bool
        )
        steps = np.where(within, transitions, 0.0)
        advances = machine.pooled(steps.sum(axis=1))
        transitions = machine.pooled(machine.pooled(transitions - steps).T).T
    return Counts(
        counts.logs,
        machine.pooled(counts.start),
        np.ascontiguousarray(transitions),
        advances,
        np.ascontiguousarray(emissions),
    )


def _expect_strand(
    machine: Machine,
    tables: Tables,
    corpus: Corpus,
    stream: Stream,
    reverse: bool,
    threads: int,
) -> _MachineCounts:
    ends = find_ends(machine, tables, stream, threads)
    weights = _pair_weights(tables, stream, ends, threads)
    counts = _MachineCounts(
        ends.logs,
        np.zeros(machine.states),
        np.zeros_like(machine.transitions),
        np.zeros_like(machine.emissions),
    )
    unfold_kernel(machine.states)(
        weights, tables.matrices, machine.order, tables.word, counts.transitions, counts.emissions
    )
    kept = ~(ends.lost | stream.closed)
    add_heads(ends.heads, stream.heads, kept, counts.start, counts.emissions)
    for contig in np.flatnonzero(ends.lost):
        codes = stream.codes(int(contig))
        again = exact_pass(machine, corpus.contigs[contig], codes, reverse=reverse)
        counts.logs[contig] = again.log_likelihood
        counts.start[:] += again.start
        counts.transitions[:] += again.transitions
        counts.emissions[:] += again.emissions
    return counts


def _pair_weights(
    tables: Tables, stream: Stream, ends: BlockEnds, threads: int
) -> NDArray[np.float64]:
    """Return float64[token, state, state] pair weights of all contigs that were not lost.

    Jobs are shared out to groups by their number alone, each group adds up its own table in
    order, and the tables are added in order, so threads never show in the sums.
    """
    jobs = ends.jobs
    states, count = tables.matrices.shape[1], len(jobs.blocks)
    most = min(max(_GROUP_BYTES // tables.matrices.nbytes, _FEWEST_GROUPS), _MOST_GROUPS)
    groups = min(max(count // _GROUP_JOBS, _FEWEST_GROUPS), most)
    # Blocks go in pairs, best of equal length, within their group: only the last may be odd.
    edges = np.arange(groups + 1) * (count // 2) // groups * 2
    edges[-1] = count
    flags = np.zeros(len(stream.bounds) - 1, bool)
    lengths = (stream.bounds[1:] - stream.bounds[:-1])[jobs.blocks]
    order = np.lexsort((lengths, np.repeat(np.arange(groups), edges[1:] - edges[:-1])))
    paired = jobs.taken(order)

    def work(group: int) -> NDArray[np.float64] | None:
        piece = slice(edges[group], edges[group + 1])
        if piece.start == piece.stop:
            return None
        table = np.zeros(tables.matrices.shape)
        block_kernels(states).expect(
            stream.tokens, stream.bounds, paired.blocks[piece], paired.starts[piece],
            paired.ends[piece], paired.shares[piece], tables.matrices, tables.mirrored,
            tables.interval, table, flags,
        )  # fmt: skip
        return table

    tables_of_groups = in_threads(work, range(groups), threads)
    if flags.any():
        found = np.searchsorted(stream.contig_blocks, np.flatnonzero(flags), side="right") - 1
        ends.lost[found] = True
        spared = jobs.without(np.repeat(ends.lost, np.diff(stream.contig_blocks)))
        return _pair_weights(
            tables, stream, BlockEnds(spared, ends.heads, ends.logs, ends.lost), threads
        )
    total = np.zeros(tables.matrices.shape)
    for table in tables_of_groups:
        if table is not None:
            total += table
    return total
