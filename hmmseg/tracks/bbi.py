"""The layout of bigWig files: headers, blocks of data and the two indexes.

The layout is that of the supplement of Kent et al. (2010), whose tables are named beside each
part. Numbers are little-endian; a *block* is a stretch of compressed data that one entry of the
index points to; records are numbered in the order in which their data come.

A block of runs is a zlib stream whose first 24 bytes, the head of the block, are stored and not
deflated: so the number of its record can be read and changed without unpacking it.

References
----------
Deutsch P. (1996). RFC 1951, DEFLATE Compressed Data Format Specification, 1.3; RFC 1950, ZLIB.
Kent W. J., Zweig A. S., Barber G., Hinrichs A. S., Karolchik D. (2010). BigWig and BigBed:
enabling browsing of large distributed datasets. Bioinformatics 26, 2204-2207.
"""

import struct
import zlib
from collections.abc import Callable, Mapping
from typing import Any, BinaryIO

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "BLOCK",
    "BRANCH",
    "ENTRY",
    "HEADER",
    "INDEX_HEADER",
    "INDEX_MAGIC",
    "MAGIC",
    "MAX_LEVELS",
    "NAMES_HEADER",
    "NAMES_MAGIC",
    "NODE",
    "RUN",
    "SECTION",
    "SECTION_HEAD",
    "SECTION_OF_RUNS",
    "STORED",
    "SUMMARY",
    "ZOOM",
    "ZOOM_HEADER",
    "Items",
    "name_types",
    "pack_section",
    "packed_block",
    "packed_section",
    "write_index",
    "write_names",
]

MAGIC, NAMES_MAGIC, INDEX_MAGIC = 0x888FFC26, 0x78CA8C91, 0x2468ACE0
VERSION = 4
MAX_LEVELS = 10
_EFFORT = 1
"""Of 1 to 9. With more, bins become a few per cent smaller and runs do not."""

# Table 5: magic, version, zoom levels, offsets of names, data and index, two counts and an
# offset that only bigBed uses, offset of the summary, size of the largest block, extensions.
HEADER = struct.Struct("<IHHQQQHHQQIQ")
# Table 6: bases to a bin, reserved, offsets of data and index.
ZOOM_HEADER = struct.Struct("<IIQQ")
# Table 7: bases with a value, lowest, highest, sum, sum of squares.
SUMMARY = struct.Struct("<Qdddd")
# Table 8: magic, items to a node, bytes of a key and of a value, items, reserved.
NAMES_HEADER = struct.Struct("<IIIIQQ")
# Tables 9 and 15: whether it is a leaf, reserved, items.
NODE = struct.Struct("<BBH")
# Table 13: record, first and last base, step, span, kind, reserved, items; kind 1 is runs.
SECTION = struct.Struct("<IIIIIBBH")
SECTION_OF_RUNS = 1
SECTION_HEAD = np.dtype(
    [("record", "<u4"), ("place", "<u4", 4), ("kind", "u1"), ("reserved", "u1"), ("count", "<u2")]
)
# What comes before the head in a packed block: the two bytes of zlib (RFC 1950, 2.2), then
# "not the last, stored" and the length of what is stored with its complement (RFC 1951, 3.2.4).
STORED = struct.pack("<BBBHH", 0x78, 0x01, 0, SECTION.size, 0xFFFF - SECTION.size)
# Table 14: magic, items to a node, items, extent (as in BLOCK), end of data, items to a block.
INDEX_HEADER = struct.Struct("<IIQIIIIQII")

RUN = np.dtype([("start", "<u4"), ("end", "<u4"), ("value", "<f4")])
# Table 18: what is known of the bases of one bin.
ZOOM = np.dtype(
    [
        ("record", "<u4"),
        ("start", "<u4"),
        ("end", "<u4"),
        ("bases", "<u4"),
        ("lowest", "<f4"),
        ("highest", "<f4"),
        ("total", "<f4"),
        ("squares", "<f4"),
    ]
)
_EXTENT = [("record", "<u4"), ("start", "<u4"), ("last_record", "<u4"), ("end", "<u4")]
# Table 16: the extent of a block, its place in the file and its size there.
BLOCK = np.dtype([*_EXTENT, ("offset", "<u8"), ("size", "<u8")])
ENTRY = struct.Struct("<IIIIQQ")  # one BLOCK
# Table 17: the extent of a node, and its place.
BRANCH = np.dtype([*_EXTENT, ("offset", "<u8")])

_FAN_OUT = 256

Items = NDArray[np.void]


def pack_section(record: int, runs: Items) -> bytes:
    """Return the uncompressed block of at most 65,535 runs of one record (RUN[run])."""
    start, end = int(runs["start"][0]), int(runs["end"][-1])
    head = SECTION.pack(record, start, end, 0, 0, SECTION_OF_RUNS, 0, len(runs))
    return head + runs.tobytes()


def name_types(size: int) -> tuple[np.dtype[np.void], np.dtype[np.void]]:
    """Return what leaves and branches of the tree of names hold (tables 10 and 11)."""
    leaf = np.dtype([("key", f"S{size}"), ("number", "<u4"), ("length", "<u4")])
    return leaf, np.dtype([("key", f"S{size}"), ("offset", "<u8")])


def packed_block(content: bytes) -> bytes:
    """Return the content of a block compressed."""
    return zlib.compress(content, _EFFORT)


def packed_section(content: bytes) -> bytes:
    """Return the content of a block of runs compressed, but for its head."""
    deflating = zlib.compressobj(_EFFORT, zlib.DEFLATED, -zlib.MAX_WBITS)
    runs = deflating.compress(memoryview(content)[SECTION.size :]) + deflating.flush()
    return STORED + content[: SECTION.size] + runs + zlib.adler32(content).to_bytes(4, "big")


def write_names(file: BinaryIO, record_lengths: Mapping[str, int]) -> None:
    """Write the B+ tree that leads from a record's name to its number and length.

    Keys are in the order of their bytes, as searching the tree needs it; numbers follow the
    order of `record_lengths`.
    """
    keys = [name.encode() for name in record_lengths]
    size = max(map(len, keys))
    leaf, branch = name_types(size)
    items = np.empty(len(keys), dtype=leaf)
    items["key"] = keys
    items["number"] = np.arange(len(keys))
    items["length"] = list(record_lengths.values())
    items.sort(order="key")
    file.write(NAMES_HEADER.pack(NAMES_MAGIC, _FAN_OUT, size, 8, len(keys), 0))
    _write_tree(file, items, lambda first, _: _filled(branch, key=first["key"]))


def write_index(file: BinaryIO, blocks: Items, items_per_block: int) -> int:
    """Write the R-tree that leads from positions to blocks; return its offset.

    Parameters
    ----------
    file : binary file
        Open at the end of the data.
    blocks : BLOCK[block]
        In the order of their positions.
    items_per_block : int
        The most items that a block holds.
    """
    offset = file.tell()
    extent = (0, 0, 0, 0)
    if len(blocks):
        first, last = blocks[0], blocks[-1]
        extent = (first["record"], first["start"], last["last_record"], last["end"])
    file.write(
        INDEX_HEADER.pack(INDEX_MAGIC, _FAN_OUT, len(blocks), *extent, offset, items_per_block, 0)
    )
    _write_tree(file, blocks, _branches)
    return offset


def _branches(first: Items, last: Items) -> Items:
    return _filled(
        BRANCH,
        record=first["record"],
        start=first["start"],
        last_record=last["last_record"],
        end=last["end"],
    )


def _filled(dtype: np.dtype[Any], **columns: NDArray[Any]) -> Items:
    items = np.zeros(len(next(iter(columns.values()))), dtype=dtype)
    for name, column in columns.items():
        items[name] = column
    return items


def _write_tree(file: BinaryIO, leaves: Items, branches: Callable[[Items, Items], Items]) -> None:
    """Write the nodes of a tree, the root first, each level after the one above it.

    `branches` makes the items that stand for nodes from the first and the last item of each;
    their offsets are filled in here.
    """
    levels = [leaves]
    while len(levels[-1]) > _FAN_OUT:
        items = levels[-1]
        first = np.arange(0, len(items), _FAN_OUT)
        last = np.minimum(first + _FAN_OUT, len(items)) - 1
        levels.append(branches(items[first], items[last]))
    begin = file.tell()
    for height in range(len(levels) - 1, -1, -1):
        items = levels[height]
        starts = range(0, max(1, len(items)), _FAN_OUT)
        begin += len(starts) * NODE.size + items.nbytes
        if height:
            # The nodes below come next, and all but the last of them are full.
            full = NODE.size + _FAN_OUT * levels[height - 1].itemsize
            items["offset"] = begin + full * np.arange(len(items))
        for start in starts:
            node = items[start : start + _FAN_OUT]
            file.write(NODE.pack(height == 0, 0, len(node)) + node.tobytes())
