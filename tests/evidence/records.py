"""Assemblies of records drawn from one model, one of them from another, and their judgement."""

import functools
from collections.abc import Sequence

import numpy as np

from hmmseg.evidence.homogeneity import DIFFERS, Homogeneity, Judge
from hmmseg.evidence.stretches import Words
from hmmseg.evidence.typical import DRAWN_LENGTHS, Typical, typical_blocks
from hmmseg.inference.streams import Corpus
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate
from hmmseg.training.baum_welch import fit
from tests.evidence.planted import island_model

__all__ = ["HOST", "assembly", "judged", "named", "shifted", "trained", "typical_of"]

HOST = island_model((0.38, 0.58), (9_000, 900))
Records = list[tuple[str, list[Contig]]]


def shifted(points: float) -> Model:
    """Return the host with so much more GC in both states, in points (per cent)."""
    low, high = 0.38 + points / 100, 0.58 + points / 100
    return island_model((low, high), (9_000, 900))


def assembly(seed: int, lengths: Sequence[int], odd: tuple[int, float] | None = None) -> Records:
    """Return records of the host and, if wanted, one of a length and with other GC: ``odd``."""
    drawn = [one.bases for one in simulate(HOST, list(lengths), seed)]
    if odd is not None:
        length, points = odd
        # A seed apart, or the record would be a copy of the first with bases exchanged.
        drawn.append(next(iter(simulate(shifted(points), [length], seed + 10_000))).bases)
    names = [f"host_{i}" for i in range(len(lengths))] + ["odd"]
    return [
        (name, [Contig(name, 0, bases, False, len(bases))])
        for name, bases in zip(names, drawn, strict=False)
    ]


def trained(records: Records, start: Model = HOST) -> Model:
    """Return a model trained on an assembly."""
    contigs = [contig for _, found in records for contig in found]
    corpus = Corpus(contigs, start.order, start.both_strands, 2)
    return fit(start, corpus, max_iterations=20, threads=2).model


@functools.cache
def typical_of(model: Model, seed: int) -> tuple[Typical, ...]:
    """Return what blocks drawn from a model are like; once for each model."""
    return typical_blocks(model, (one.bases for one in simulate(model, DRAWN_LENGTHS, seed)))


def judged(model: Model, records: Records, seed: int = 1, threads: int = 1) -> Homogeneity:
    """Return how records fit a model."""
    words = Words.of(model)
    total = np.zeros(words.count, np.int64)
    for _, contigs in records:
        for contig in contigs:
            total += words.counts(contig, 0, len(contig))
    judge = Judge(model, typical_of(model, seed), total, threads)
    for name, contigs in records:
        judge.add(name, contigs)
    return judge.judgement()


def named(found: Homogeneity) -> list[str]:
    """Return the records that differ."""
    return [one.record for one in found.records if one.verdict == DIFFERS]
