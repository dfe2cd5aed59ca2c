"""Sequence cut into pieces, and pieces dealt out to folds."""

from collections.abc import Sequence
from itertools import pairwise
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import SequenceError
from hmmseg.sequence.contigs import Contig

__all__ = ["Piece", "block_length", "cut", "deal"]

_BLOCKS_WANTED = 200
_SHORTEST_BLOCK, _LONGEST_BLOCK = 5_000, 1_000_000


class Piece(NamedTuple):
    """A stretch of a contig, read as a contig of its own.

    Attributes
    ----------
    contig : Contig
        The stretch; never a circle.
    source : int
        Number of the contig it was cut from.
    truth : int64[interval, 2]
        Labelled regions in the piece's own positions; none where there are no labels.
    """

    contig: Contig
    source: int
    truth: NDArray[np.int64]


def block_length(bases: int) -> int:
    """Return a length of blocks that makes about 200 of so many bases."""
    wanted = bases // _BLOCKS_WANTED
    return min(max(wanted, _SHORTEST_BLOCK), _LONGEST_BLOCK)


def cut(
    contigs: Sequence[Contig], block: int, truth: Sequence[NDArray[np.int64]] | None = None
) -> list[Piece]:
    """Cut contigs into pieces of equal length as near as possible to a block's.

    Parameters
    ----------
    contigs
        The sequence.
    block
        Wanted length of a piece in bases.
    truth
        int64[interval, 2] of each contig: its labelled regions.
    """
    pieces = []
    for number, contig in enumerate(contigs):
        parts = max(1, round(len(contig) / block))
        edges = [len(contig) * part // parts for part in range(parts + 1)]
        intervals = np.empty((0, 2), np.int64) if truth is None else truth[number]
        for begin, stop in pairwise(edges):
            clipped = np.clip(intervals - begin, 0, stop - begin)
            stretch = Contig(
                contig.record,
                (contig.start + begin) % contig.record_length,
                contig.bases[begin:stop],
                False,
                contig.record_length,
            )
            pieces.append(Piece(stretch, number, clipped[clipped[:, 1] > clipped[:, 0]]))
    return pieces


def deal(pieces: Sequence[Piece], folds: int, whole_contigs: bool) -> NDArray[np.int64]:
    """Return int64[piece]: the fold that each piece is held out in.

    Blocks are dealt out in turn, so that folds interleave. Whole contigs, longest first, each
    go to the fold that holds the fewest bases so far.

    Parameters
    ----------
    pieces
        As :func:`cut` returns them.
    folds
        How many.
    whole_contigs
        Keep the pieces of a contig together.

    Raises
    ------
    SequenceError
        There is less to deal out than there are folds.
    """
    units = len({piece.source for piece in pieces}) if whole_contigs else len(pieces)
    if units < folds:
        what = "contigs" if whole_contigs else "blocks"
        raise SequenceError(
            f"{units} {what} cannot make {folds} folds; give fewer --folds, more sequence, or "
            f"{'--split blocks' if whole_contigs else 'a shorter --block'}"
        )
    if not whole_contigs:
        return np.arange(len(pieces)) % folds
    sizes: dict[int, int] = {}
    for piece in pieces:
        sizes[piece.source] = sizes.get(piece.source, 0) + len(piece.contig)
    filled = np.zeros(folds, np.int64)
    fold_of = {}
    for source in sorted(sizes, key=lambda s: (-sizes[s], s)):
        fold = int(np.argmin(filled))
        filled[fold] += sizes[source]
        fold_of[source] = fold
    return np.array([fold_of[piece.source] for piece in pieces])
