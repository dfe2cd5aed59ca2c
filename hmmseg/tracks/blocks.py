"""Packed blocks of runs: unpacked many at a time, or given to another record as they are."""

import zlib
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.tracks import bbi
from hmmseg.tracks.bbi import RUN, SECTION, SECTION_HEAD, STORED, Items

__all__ = ["NO_SUMS", "Sums", "consecutive", "in_batches", "renumber", "sums_of", "unpacked"]

# About how many runs and bins are taken at once: some megabytes, which a
# processor holds near itself. Many small records are many
# small blocks, slow to take one by one.
PIECES_AT_ONCE = 2**16
_BYTES_TO_A_RUN = 6  # compressed, of tracks that are not clear

_PRIME = 65521  # of the checksum Adler-32: RFC 1950, 8.2

Bytes = NDArray[np.uint8]


class Sums(NamedTuple):
    """Sums over bases with a value: their number, sum and sum of squares, lowest and highest."""

    bases: int
    total: float
    squares: float
    lowest: float
    highest: float

    def and_of(self, other: "Sums") -> "Sums":
        """Return those over the bases of both."""
        return Sums(
            self.bases + other.bases,
            self.total + other.total,
            self.squares + other.squares,
            min(self.lowest, other.lowest),
            max(self.highest, other.highest),
        )


NO_SUMS = Sums(0, 0.0, 0.0, np.inf, -np.inf)


def sums_of(records: NDArray[np.int64], runs: Items, lengths: NDArray[np.int64]) -> Sums:
    """Return the sums over runs; ValueError if one is out of bounds.

    Parameters
    ----------
    records : int64[run]
        Number of the record of each run.
    runs : RUN[run]
        The runs.
    lengths : int64[record]
        Length of each record in bases.
    """
    widths, values = runs["end"] - runs["start"], runs["value"].astype(np.float64)
    if not np.isfinite(values).all() or (runs["end"] > lengths[records]).any():
        raise ValueError("values or intervals out of bounds")
    weighted = widths * values
    return Sums(
        int(widths.sum(dtype=np.int64)),
        float(weighted.sum()),
        float((weighted * values).sum()),
        float(values.min()),
        float(values.max()),
    )


def in_batches(blocks: Items, size: int) -> list[Items]:
    """Cut the index of a file into batches of blocks that are worth to be taken at once.

    Parameters
    ----------
    blocks : BLOCK[block]
        Blocks of runs, in order.
    size : int
        Bases to the bins into which the runs will be cut.
    """
    if not len(blocks):
        return []
    bins = (blocks["end"].astype(np.int64) - blocks["start"]) // size
    pieces = np.cumsum(blocks["size"].astype(np.int64) // _BYTES_TO_A_RUN + bins)
    return np.split(blocks, np.flatnonzero(np.diff(pieces // PIECES_AT_ONCE)) + 1)


def consecutive(blocks: Items) -> tuple[int, int]:
    """Return where blocks begin and end in the file; ValueError if others are between them."""
    begins, ends = blocks["offset"], blocks["offset"] + blocks["size"]
    if (begins[1:] != ends[:-1]).any():
        raise ValueError("blocks out of order")
    return int(begins[0]), int(ends[-1])


def unpacked(content: bytes, blocks: Items) -> tuple[NDArray[np.int64], Items]:
    """Unpack consecutive blocks; ValueError if one holds anything else than runs.

    Parameters
    ----------
    content : bytes
        Of the file, from the first block's beginning to the last one's end.
    blocks : BLOCK[block]
        The blocks.

    Returns
    -------
    records : int64[run]
        Number of the record of each run.
    runs : RUN[run]
    """
    packed, ends = memoryview(content), np.cumsum(blocks["size"]).tolist()
    sections = [
        zlib.decompress(packed[begin:end]) for begin, end in zip([0, *ends[:-1]], ends, strict=True)
    ]
    heads = np.frombuffer(b"".join(one[: SECTION.size] for one in sections), SECTION_HEAD)
    counts = heads["count"].astype(np.int64)
    held = [len(one) - SECTION.size for one in sections]
    if (heads["kind"] != bbi.SECTION_OF_RUNS).any() or (counts * RUN.itemsize != held).any():
        raise ValueError("a block that is not one of runs")
    if (heads["record"] != blocks["record"]).any():
        raise ValueError("a block of another record")
    runs = np.frombuffer(b"".join(one[SECTION.size :] for one in sections), RUN)
    return np.repeat(heads["record"].astype(np.int64), counts), runs


def renumber(packed: Bytes, sizes: NDArray[np.uint64], record: int) -> int:
    """Give packed blocks of runs to another record, without unpacking them.

    The checksum at the end of a block, Adler-32, is made of two sums: of all bytes, and of each
    byte times its distance from the end. So it follows from what has changed.

    Parameters
    ----------
    packed : uint8[byte]
        Blocks as `bbi.packed_section` makes them, one after the other; changed in place.
    sizes : uint64[block]
        Bytes of each.
    record : int
        Number of the record.

    Returns
    -------
    int
        Runs in the blocks.

    Raises
    ------
    ValueError
        If a block is packed in another way.
    """
    ends = np.cumsum(sizes.astype(np.int64))
    at = (ends - sizes.astype(np.int64))[:, None] + np.arange(len(STORED) + SECTION.size)
    heads = packed[at]
    if (heads[:, : len(STORED)] != np.frombuffer(STORED, np.uint8)).any():
        raise ValueError("blocks that are packed in another way; remove its folder, make it again")
    number = slice(len(STORED), len(STORED) + 4)
    counts = heads[:, -2].astype(np.int64) + 256 * heads[:, -1].astype(np.int64)
    new = np.frombuffer(record.to_bytes(4, "little"), np.uint8)
    change = new.astype(np.int64) - heads[:, number]
    distance = (SECTION.size + RUN.itemsize * counts)[:, None] - np.arange(4)
    sums_at = ends[:, None] - np.arange(4, 0, -1)
    second, first = packed[sums_at].copy().view(">u2").astype(np.int64).T
    sums = np.stack([second + (change * distance).sum(axis=1), first + change.sum(axis=1)], axis=1)
    packed[at[:, number]] = new
    packed[sums_at] = (sums % _PRIME).astype(">u2").view(np.uint8)
    return int(counts.sum())
