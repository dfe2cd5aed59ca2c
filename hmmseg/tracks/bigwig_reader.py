"""One bigWig file of runs, read through its indexes."""

import mmap
import struct
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from functools import cached_property
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import OutputError
from hmmseg.tracks import bbi
from hmmseg.tracks.bbi import BLOCK, HEADER, SUMMARY, Items
from hmmseg.tracks.blocks import consecutive, in_batches, unpacked

__all__ = ["BigWigReader", "explained_reading"]

# Wider than any record: for who wants no bins.
_NO_BINS = 2**32


@contextmanager
def explained_reading(path: str | Path) -> Iterator[None]:
    """Raise OutputError for what reading a damaged bigWig file may raise."""
    try:
        yield
    except (ValueError, IndexError, struct.error, zlib.error) as error:
        raise OutputError(f"{path}: not a readable bigWig file of runs ({error})") from error


class BigWigReader:
    """Reads the runs of a bigWig file whose data are runs, as `BigWigWriter` writes them.

    Used as a context manager. A file that is not such a bigWig raises ValueError,
    ``struct.error`` or ``zlib.error``.

    Parameters
    ----------
    path : path
        The file.

    Attributes
    ----------
    record_lengths : dict
        Length of each record in bases, in the order of their numbers.
    """

    def __init__(self, path: str | Path) -> None:
        with open(path, "rb") as file:
            self._content = mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ)
        header = HEADER.unpack_from(self._content)
        magic, names_at, self._index_at, self._summary_at = (header[i] for i in (0, 3, 5, -3))
        if magic != bbi.MAGIC:
            raise ValueError("not a bigWig file")
        self.record_lengths = self._read_names(names_at)

    def __enter__(self) -> "BigWigReader":
        """Return the reader itself."""
        return self

    def __exit__(self, *_: object) -> None:
        """Close the file."""
        self.close()

    def close(self) -> None:
        """Close the file."""
        self._content.close()

    def runs(self) -> Iterator[tuple[int, NDArray[np.void]]]:
        """Yield the number of a record and runs (RUN[run]) of it, in order."""
        for records, runs in self.batches(_NO_BINS):
            cuts = np.flatnonzero(np.diff(records)) + 1
            for first, last in zip([0, *cuts], [*cuts, len(runs)], strict=True):
                yield int(records[first]), runs[first:last]

    def batches(self, size: int) -> Iterator[tuple[NDArray[np.int64], Items]]:
        """Yield runs in batches that span many records, in order.

        Parameters
        ----------
        size : int
            Bases to the bins into which the runs will be cut.

        Yields
        ------
        records : int64[run]
            Number of the record of each run.
        runs : RUN[run]
        """
        for batch in in_batches(self.blocks, size):
            begin, end = consecutive(batch)
            yield unpacked(self._content[begin:end], batch)

    def sums(self) -> tuple[int, float]:
        """Return how many bases have a value, and the sum of these, as the summary has it."""
        bases, _, _, total, _ = SUMMARY.unpack_from(self._content, self._summary_at)
        return int(bases), float(total)

    @cached_property
    def blocks(self) -> Items:
        """All blocks, BLOCK[block], in the order of records."""
        leaves = [np.empty(0, BLOCK), *self._leaves(self._root(), BLOCK, bbi.BRANCH)]
        return np.concatenate(leaves)

    def _root(self) -> int:
        magic = bbi.INDEX_HEADER.unpack_from(self._content, self._index_at)[0]
        if magic != bbi.INDEX_MAGIC:
            raise ValueError("no index")
        return self._index_at + bbi.INDEX_HEADER.size

    def _read_names(self, offset: int) -> dict[str, int]:
        magic, _, size, *_ = bbi.NAMES_HEADER.unpack_from(self._content, offset)
        if magic != bbi.NAMES_MAGIC:
            raise ValueError("no names")
        leaf, branch = bbi.name_types(size)
        leaves = self._leaves(offset + bbi.NAMES_HEADER.size, leaf, branch)
        items = np.sort(np.concatenate(list(leaves)), order="number")
        return {item["key"].decode(): int(item["length"]) for item in items}

    def _leaves(
        self, offset: int, leaf: np.dtype[np.void], branch: np.dtype[np.void]
    ) -> Iterator[Items]:
        """Yield the items of the leaves below the node at `offset`, in order."""
        is_leaf, _, count = bbi.NODE.unpack_from(self._content, offset)
        kind = leaf if is_leaf else branch
        start = offset + bbi.NODE.size
        content = self._content[start : start + count * kind.itemsize]
        if len(content) != count * kind.itemsize:
            raise ValueError("the file is cut short")
        items = np.frombuffer(content, dtype=kind)
        if is_leaf:
            yield items
            return
        for item in items:
            if int(item["offset"]) <= offset:  # a node stands after the one above it
                raise ValueError("broken index")
            yield from self._leaves(int(item["offset"]), leaf, branch)
