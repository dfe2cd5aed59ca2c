"""One bigWig file, written piece by piece."""

import os
import struct
import zlib
from collections import deque
from collections.abc import Callable, Iterable, Iterator, Mapping
from contextlib import suppress
from pathlib import Path
from typing import BinaryIO

import numpy as np

from hmmseg.inference.threads import ahead, aside
from hmmseg.tracks import bbi, zoom
from hmmseg.tracks.bbi import BLOCK, HEADER, RUN, SUMMARY, ZOOM, ZOOM_HEADER, Items
from hmmseg.tracks.blocks import (
    NO_SUMS,
    Bytes,
    Sums,
    consecutive,
    in_batches,
    renumber,
    sums_of,
    unpacked,
)

__all__ = ["RUNS_IN_BLOCK", "BigWigWriter"]

# The layout of the file depends on these, so they are no options.
RUNS_IN_BLOCK = 1024
ROWS_IN_BLOCK = 512
# A level with no more items than this needs none above it.
FEW = 1024
LEVEL_FACTOR = 4

# Blocks of a level that are taken at once.
_BLOCKS_AT_ONCE = 256
# Blocks that are compressed or wait to be written, for each thread.
_WAITING = 8

_Extent = tuple[int, int, int, int]


class _Packing:
    """Compresses blocks, in other threads if there are any, and writes them in their order."""

    def __init__(self, file: BinaryIO, threads: int) -> None:
        self._file, self._threads = file, threads
        self._waiting: deque[tuple[_Extent, Callable[[], bytes]]] = deque()
        self._entries = bytearray()

    def add(self, extent: _Extent, pack: Callable[[bytes], bytes], content: bytes) -> None:
        """Take the content of a block, and what compresses it."""
        self._waiting.append((extent, aside(pack, content, self._threads)))
        if len(self._waiting) > _WAITING * self._threads:
            self._write()

    def copy(self, blocks: Items, packed: Bytes) -> None:
        """Take compressed blocks; the offsets of their entries are filled in here."""
        while self._waiting:
            self._write()
        ends = np.cumsum(blocks["size"])
        blocks["offset"] = self._file.tell() + ends - blocks["size"]
        self._file.write(packed.data)
        self._entries += blocks.tobytes()

    def finish(self) -> Items:
        """Write what waits; return the entries of the index of all blocks."""
        while self._waiting:
            self._write()
        return np.frombuffer(self._entries, dtype=BLOCK)

    def _write(self) -> None:
        extent, result = self._waiting.popleft()
        packed = result()
        self._entries += bbi.ENTRY.pack(*extent, self._file.tell(), len(packed))
        self._file.write(packed)


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
        self.found = NO_SUMS
        self._lengths = np.array(list(record_lengths.values()), dtype=np.int64)
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
        self._packing.add(extent, bbi.packed_section, bbi.pack_section(record, runs))
        lengths = runs["end"] - runs["start"]
        self.runs += len(runs)
        self.count_in(int(lengths.sum(dtype=np.int64)), float((lengths * runs["value"]).sum()))

    def copy_blocks(self, record: int, blocks: Items, packed: Bytes) -> None:
        """Write blocks of another file as those of the record of that number.

        They are changed in place. What they hold in all must be told to `count_in`.
        """
        self.runs += renumber(packed, blocks["size"], record)
        blocks["record"] = blocks["last_record"] = record
        self._packing.copy(blocks, packed)

    def count_in(self, bases: int, total: float) -> None:
        """Take note of bases that are written, and of the sum of their values."""
        self.bases += bases
        self.total += total

    def finish(self) -> Items:
        """Write index, zoom levels, summary and header, and close the file; return the index.

        All runs are read back meanwhile: what was `found` goes into the summary.

        Raises
        ------
        ValueError, IndexError, struct.error, zlib.error
            What is read back are not the runs that were written.
        """
        blocks = self._packing.finish()
        index_at = bbi.write_index(self._file, blocks, RUNS_IN_BLOCK)
        levels = self._write_levels(blocks)
        self._file.write(struct.pack("<I", bbi.MAGIC))
        found = self.found
        extremes = (found.lowest, found.highest) if self.runs else (0.0, 0.0)
        summary = SUMMARY.pack(found.bases, *extremes, found.total, found.squares)
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
        return blocks

    def abandon(self) -> None:
        """Close the file if it is open, whatever is in it."""
        # What is still to be written may fail as the write before it did; that is known.
        with suppress(OSError):
            self._file.close()

    def _write_levels(self, blocks: Items) -> list[tuple[int, int, int]]:
        """Write zoom levels; return bin size and offsets of data and index of each."""
        levels: list[tuple[int, int, int]] = []
        longest = int(self._lengths.max())
        size = zoom.first_bin_size(self.bases, max(self.runs, 1), longest)
        below, source = self.runs, self._bins(blocks, size)
        if below <= FEW:
            deque(source, maxlen=0)
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
            below, source = count, self._bins_of_level(entries, size)
        return levels

    def _write_rows(self, pieces: Iterable[Items]) -> tuple[Items, int]:
        packing, count = _Packing(self._file, self._threads), 0
        for rows in _in_blocks(pieces):
            first, last = rows[0], rows[-1]
            extent = (first["record"], first["start"], last["record"], last["end"])
            packing.add(extent, bbi.packed_block, rows.tobytes())
            count += len(rows)
        return packing.finish(), count

    def _bins(self, blocks: Items, size: int) -> Iterator[Items]:
        """Read all runs back; yield the bins that they fill, ROW[bin], in pieces."""

        def bins(batch: Items) -> tuple[Sums, Items]:
            begin, end = consecutive(batch)
            records, runs = unpacked(os.pread(file.fileno(), end - begin, begin), batch)
            return sums_of(records, runs, self._lengths), zoom.bins_of_runs(records, runs, size)

        self._file.flush()
        with open(self._path, "rb") as file:
            for sums, rows in ahead(bins, in_batches(blocks, size), self._threads):
                self.found = self.found.and_of(sums)
                yield rows

    def _bins_of_level(self, blocks: Items, size: int) -> Iterator[Items]:
        """Read the level below back; yield the bins that it fills, ROW[bin], in pieces."""

        def bins(at: int) -> Items:
            rows = [
                zlib.decompress(os.pread(file.fileno(), int(block["size"]), int(block["offset"])))
                for block in blocks[at : at + _BLOCKS_AT_ONCE]
            ]
            return zoom.bins_of_rows(np.frombuffer(b"".join(rows), ZOOM).astype(zoom.ROW), size)

        self._file.flush()
        with open(self._path, "rb") as file:
            yield from ahead(bins, range(0, len(blocks), _BLOCKS_AT_ONCE), self._threads)

    def _write_at(self, offset: int, content: bytes) -> None:
        end = self._file.tell()
        self._file.seek(offset)
        self._file.write(content)
        self._file.seek(end)


def _in_blocks(pieces: Iterable[Items]) -> Iterator[Items]:
    """Cut rows into blocks (ZOOM[row]) of `ROWS_IN_BLOCK`; only the last may be shorter."""
    held = np.empty(0, dtype=ZOOM)
    for rows in pieces:
        held = np.concatenate([held, rows.astype(ZOOM)])
        full = len(held) - len(held) % ROWS_IN_BLOCK
        for start in range(0, full, ROWS_IN_BLOCK):
            yield held[start : start + ROWS_IN_BLOCK]
        held = held[full:]
    if len(held):
        yield held
