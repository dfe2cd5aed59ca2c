"""One bigWig file, written piece by piece and read back through its indexes."""

import mmap
import struct
import zlib
from collections import deque
from collections.abc import Callable, Iterable, Iterator, Mapping
from contextlib import suppress
from functools import cached_property
from pathlib import Path
from typing import BinaryIO

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.threads import aside
from hmmseg.tracks import bbi, zoom
from hmmseg.tracks.bbi import BLOCK, HEADER, RUN, SUMMARY, ZOOM, ZOOM_HEADER, Items

__all__ = ["RUNS_IN_BLOCK", "BigWigReader", "BigWigWriter", "in_batches"]

# The layout of the file depends on these, so they are no options.
RUNS_IN_BLOCK = 1024
ROWS_IN_BLOCK = 512
# A level with no more items than this needs none above it.
FEW = 1024
LEVEL_FACTOR = 4

# About how many runs and bins are taken at once: tens of megabytes.
PIECES_AT_ONCE = 2**17

# Blocks that are compressed or wait to be written, for each thread.
_WAITING = 8


class _Packing:
    """Compresses blocks, in other threads if there are any, and writes them in their order."""

    def __init__(self, file: BinaryIO, threads: int) -> None:
        self._file, self._threads = file, threads
        self._waiting: deque[tuple[tuple[int, int, int, int], Callable[[], bytes]]] = deque()
        self._entries: list[tuple[int, ...]] = []

    def add(self, extent: tuple[int, int, int, int], content: bytes) -> None:
        self._waiting.append((extent, aside(bbi.packed_block, content, self._threads)))
        if len(self._waiting) > _WAITING * self._threads:
            self._write()

    def finish(self) -> Items:
        """Write what waits; return the entries of the index of all blocks."""
        while self._waiting:
            self._write()
        return np.array(self._entries, dtype=BLOCK)

    def _write(self) -> None:
        extent, packed = self._waiting.popleft()
        self._entries.append(bbi.write_block(self._file, extent, packed()))


class BigWigWriter:
    """Writes runs of records, given in order, and then what else a bigWig file has.

    It trusts its caller: records, bounds, order and values are not checked.

    Parameters
    ----------
    path : path
        The file, which is overwritten.
    record_lengths : mapping
        Length of each record in bases, in the order in which runs will come; not empty.
    threads : int
        Threads to use.
    """

    def __init__(
        self, path: str | Path, record_lengths: Mapping[str, int], threads: int = 1
    ) -> None:
        self.runs = 0
        self.bases = 0
        self.total = 0.0
        self._squares, self._lowest, self._highest = 0.0, np.inf, -np.inf
        self._longest = max(record_lengths.values())
        self._path, self._threads = path, threads
        self._file = open(path, "wb")  # noqa: SIM115  (closed by finish)
        self._packing = _Packing(self._file, threads)
        self._summary_at = HEADER.size + bbi.MAX_LEVELS * ZOOM_HEADER.size
        self._file.write(bytes(self._summary_at + SUMMARY.size))
        self._names_at = self._file.tell()
        bbi.write_names(self._file, record_lengths)
        self._data_at = self._file.tell()
        self._file.write(bytes(8))

    def write_runs(self, record: int, runs: Items) -> None:
        """Write at most `RUNS_IN_BLOCK` runs (RUN[run]) of the record of that number."""
        extent = (record, int(runs["start"][0]), record, int(runs["end"][-1]))
        self._packing.add(extent, bbi.pack_section(record, runs))
        lengths, values = runs["end"] - runs["start"], runs["value"].astype(np.float64)
        self.runs += len(runs)
        self.bases += int(lengths.sum(dtype=np.int64))
        self.total += float((lengths * values).sum())
        self._squares += float((lengths * values * values).sum())
        self._lowest = min(self._lowest, float(values.min()))
        self._highest = max(self._highest, float(values.max()))

    def finish(self) -> None:
        """Write index, zoom levels, summary and header, and close the file."""
        blocks = self._packing.finish()
        index_at = bbi.write_index(self._file, blocks, RUNS_IN_BLOCK)
        levels = self._write_levels(blocks) if self.runs > FEW else []
        self._file.write(struct.pack("<I", bbi.MAGIC))
        extremes = (self._lowest, self._highest) if self.runs else (0.0, 0.0)
        summary = SUMMARY.pack(self.bases, *extremes, self.total, self._squares)
        offsets = (self._names_at, self._data_at, index_at, 0, 0, 0, self._summary_at)
        largest = max(
            bbi.SECTION.size + RUNS_IN_BLOCK * RUN.itemsize, ROWS_IN_BLOCK * ZOOM.itemsize
        )
        head = HEADER.pack(bbi.MAGIC, bbi.VERSION, len(levels), *offsets, largest, 0)
        zooms = b"".join(ZOOM_HEADER.pack(size, 0, *places) for size, *places in levels)
        self._write_at(0, head + zooms)
        self._write_at(self._summary_at, summary)
        self._write_at(self._data_at, struct.pack("<Q", len(blocks)))
        self._file.close()

    def abandon(self) -> None:
        """Close the file if it is open, whatever is in it."""
        # What is still to be written may fail as the write before it did; that is known.
        with suppress(OSError):
            self._file.close()

    def _write_levels(self, blocks: Items) -> list[tuple[int, int, int]]:
        """Write zoom levels; return bin size and offsets of data and index of each."""
        levels: list[tuple[int, int, int]] = []
        size = zoom.first_bin_size(self.bases, self.runs, self._longest)
        below, source = self.runs, self._pieces(blocks, size)
        while below > FEW and len(levels) < bbi.MAX_LEVELS:
            data_at = self._file.tell()
            self._file.write(bytes(4))
            entries, count = self._write_rows(zoom.merged(source, size))
            if 2 * count > below:  # hardly fewer items than the level below
                self._file.seek(data_at)
                self._file.truncate()
                break
            levels.append((size, data_at, bbi.write_index(self._file, entries, ROWS_IN_BLOCK)))
            self._write_at(data_at, struct.pack("<I", count))
            size *= LEVEL_FACTOR
            below, source = count, self._rows(entries)
        return levels

    def _write_rows(self, batches: Iterable[Items]) -> tuple[Items, int]:
        packing, count = _Packing(self._file, self._threads), 0
        for rows in _in_blocks(batches):
            first, last = rows[0], rows[-1]
            extent = (first["record"], first["start"], last["record"], last["end"])
            packing.add(extent, rows.astype(ZOOM).tobytes())
            count += len(rows)
        return packing.finish(), count

    def _pieces(self, blocks: Items, size: int) -> Iterator[Items]:
        for records, runs in in_batches(map(bbi.unpack_section, self._read_back(blocks)), size):
            yield zoom.bins_of_runs(records, runs, size)

    def _rows(self, blocks: Items) -> Iterator[Items]:
        for content in self._read_back(blocks):
            yield np.frombuffer(content, dtype=ZOOM).astype(zoom.ROW)

    def _read_back(self, blocks: Items) -> Iterator[bytes]:
        self._file.flush()
        with open(self._path, "rb") as file:
            for block in blocks:
                file.seek(int(block["offset"]))
                yield zlib.decompress(file.read(int(block["size"])))

    def _write_at(self, offset: int, content: bytes) -> None:
        end = self._file.tell()
        self._file.seek(offset)
        self._file.write(content)
        self._file.seek(end)


def in_batches(
    sections: Iterable[tuple[int, Items]], size: int
) -> Iterator[tuple[NDArray[np.int64], Items]]:
    """Join sections: many small records are many small blocks, slow to take one by one.

    Parameters
    ----------
    sections : iterable of (int, RUN[run])
        Number of the record and its runs, in order.
    size : int
        Bases to the bins into which the runs will be cut.

    Yields
    ------
    records : int64[run]
        Number of the record of each run.
    runs : RUN[run]
    """
    records: list[NDArray[np.int64]] = []
    batch: list[Items] = []
    pieces = 0
    for record, runs in sections:
        records.append(np.full(len(runs), record, dtype=np.int64))
        batch.append(runs)
        pieces += len(runs) + int(runs["end"][-1] - runs["start"][0]) // size
        if pieces >= PIECES_AT_ONCE:
            yield np.concatenate(records), np.concatenate(batch)
            records, batch, pieces = [], [], 0
    if batch:
        yield np.concatenate(records), np.concatenate(batch)


def _in_blocks(batches: Iterable[Items]) -> Iterator[Items]:
    """Cut a stream of rows into blocks of `ROWS_IN_BLOCK`; only the last may be shorter."""
    held = np.empty(0, dtype=zoom.ROW)
    for rows in batches:
        held = np.concatenate([held, rows])
        full = len(held) - len(held) % ROWS_IN_BLOCK
        for start in range(0, full, ROWS_IN_BLOCK):
            yield held[start : start + ROWS_IN_BLOCK]
        held = held[full:]
    if len(held):
        yield held


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
        magic, _, _, names_at, _, self._index_at, *_ = HEADER.unpack_from(self._content)
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
        """Yield the number of the record and the runs (RUN[run]) of each block, in order."""
        for leaf in self._leaves(self._root(), BLOCK, bbi.BRANCH):
            yield from self._unpacked(leaf)

    def runs_of(self, number: int) -> Iterator[NDArray[np.void]]:
        """Yield the runs (RUN[run]) of each block of one record, in order."""
        first, last = np.searchsorted(self._blocks["record"], (number, number + 1))
        for _, runs in self._unpacked(self._blocks[first:last]):
            yield runs

    @cached_property
    def _blocks(self) -> Items:
        """All blocks, BLOCK[block], in the order of records."""
        leaves = [np.empty(0, BLOCK), *self._leaves(self._root(), BLOCK, bbi.BRANCH)]
        return np.concatenate(leaves)

    def _root(self) -> int:
        magic = bbi.INDEX_HEADER.unpack_from(self._content, self._index_at)[0]
        if magic != bbi.INDEX_MAGIC:
            raise ValueError("no index")
        return self._index_at + bbi.INDEX_HEADER.size

    def _unpacked(self, blocks: Items) -> Iterator[tuple[int, NDArray[np.void]]]:
        for block in blocks:
            start = int(block["offset"])
            content = self._content[start : start + int(block["size"])]
            yield bbi.unpack_section(zlib.decompress(content))

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
