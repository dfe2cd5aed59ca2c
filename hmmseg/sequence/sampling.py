"""A seeded sample of an assembly, so that training on a large genome stays affordable."""

import heapq
from collections.abc import Iterable
from itertools import pairwise

import numpy as np

from hmmseg.sequence.contigs import Contig

__all__ = ["BLOCK_BASES", "sample_contigs"]

BLOCK_BASES = 250_000
"""Bases in a block, the unit that is drawn; shorter contigs are blocks of their own."""


def sample_contigs(
    contigs: Iterable[Contig], bases: int, seed: int, block: int = BLOCK_BASES
) -> tuple[list[Contig], bool]:
    """Draw blocks at random, without replacement, until they hold about so many bases.

    Contigs pass by once, and only the blocks drawn so far are kept, so memory does not grow with
    the genome. Every block gets a uniform number; those with the smallest stay.

    Parameters
    ----------
    contigs
        In the assembly's order.
    bases
        Bases to draw, at most but for the last block.
    seed
        Of the numbers.
    block
        Bases in a block.

    Returns
    -------
    tuple of list of Contig, bool
        The sample in the assembly's order, and whether anything was left out. Contigs are
        returned whole, circles as circles, if nothing was.
    """
    random = np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, 1])))
    whole: list[Contig] | None = []
    kept: list[tuple[float, int, Contig]] = []  # (minus its number, place, block)
    held = serial = 0
    for contig in contigs:
        for piece in _blocks(contig, block):
            serial += 1
            # The largest number comes first in the heap.
            drawn = -float(random.random())
            if whole is None and drawn < kept[0][0] and held >= bases:
                continue
            heapq.heappush(kept, (drawn, serial, piece if whole is not None else _own(piece)))
            held += len(piece)
        if whole is not None:
            whole.append(contig)
            if held > bases:
                whole = None
                kept = [(drawn, at, _own(piece)) for drawn, at, piece in kept]
        while whole is None and held - len(kept[0][2]) >= bases:
            held -= len(heapq.heappop(kept)[2])
    if whole is not None:
        return whole, False
    return [piece for _, _, piece in sorted(kept, key=lambda entry: entry[1])], True


def _blocks(contig: Contig, block: int) -> list[Contig]:
    """Cut a contig into blocks of equal length, as near to the given one as can be."""
    count = max(1, round(len(contig) / block))
    edges = [len(contig) * i // count for i in range(count + 1)]
    return [
        Contig(
            contig.record,
            (contig.start + begin) % contig.record_length,
            contig.bases[begin:end],
            False,
            contig.record_length,
        )
        for begin, end in pairwise(edges)
    ]


def _own(contig: Contig) -> Contig:
    """Return the contig with bases of its own, so that its record can be forgotten."""
    if contig.bases.base is None:
        return contig
    return Contig(
        contig.record, contig.start, contig.bases.copy(), contig.closed, contig.record_length
    )
