"""Finished tracks whose packed blocks are taken over into another, record by record."""

from collections.abc import Iterator
from itertools import pairwise
from pathlib import Path

import numpy as np

from hmmseg.tracks.bbi import Items
from hmmseg.tracks.bigwig_reader import BigWigReader, explained_reading
from hmmseg.tracks.blocks import Bytes, consecutive

__all__ = ["PackedTrack"]

_BLOCKS_AT_ONCE = 1024


class PackedTrack:
    """Hands out the blocks of single records, in any order.

    The index is read once. The file is open only while blocks are read: a large assembly has more
    parts than a system lets a process open.

    Parameters
    ----------
    path : path
        A bigWig file written by `PosteriorTrack`.

    Attributes
    ----------
    record_lengths : dict
        Length of each record in bases.
    sums : tuple of int and float
        How many bases have a value, and the sum of these.

    Raises
    ------
    OutputError
        The file is no readable bigWig.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        with explained_reading(path), BigWigReader(path) as file:
            self.record_lengths, self.sums = file.record_lengths, file.sums()
            self._blocks = file.blocks
        numbers = np.arange(len(self.record_lengths) + 1)
        bounds = np.searchsorted(self._blocks["record"], numbers).tolist()
        self._bounds = dict(zip(self.record_lengths, pairwise(bounds), strict=True))

    def blocks_of(self, record: str) -> Iterator[tuple[Items, Bytes]]:
        """Yield blocks of a record, BLOCK[block], and what they hold, in pieces."""
        first, last = self._bounds[record]
        for at in range(first, last, _BLOCKS_AT_ONCE):
            blocks = self._blocks[at : min(at + _BLOCKS_AT_ONCE, last)].copy()
            begin, end = consecutive(blocks)
            with self.path.open("rb") as file:
                file.seek(begin)
                yield blocks, np.fromfile(file, np.uint8, end - begin)
