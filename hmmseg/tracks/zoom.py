"""Zoom levels of a bigWig file: what a browser draws when it shows more than it can resolve.

A level cuts every record into bins of equal size and keeps the number of bases with a value,
the lowest, the highest, the sum and the sum of squares of each bin that has any.
"""

from collections.abc import Iterable, Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg.tracks.bbi import ZOOM, Items

__all__ = ["ROW", "bins_of_runs", "first_bin_size", "merged"]

# Sums are kept in double precision until they are written.
ROW = np.dtype(
    [(name, "<f8" if name in ("total", "squares") else ZOOM[name]) for name in ZOOM.names or ()]
)

_RUNS_TO_A_BIN = 10
# No record is cut into more bins than this, whatever its length: it bounds the memory.
_MOST_BINS = 2**20


def first_bin_size(bases: int, runs: int, longest: int) -> int:
    """Return the bin size, in bases, of the first level.

    Parameters
    ----------
    bases, runs : int
        Bases with a value and the number of runs they make, more than none.
    longest : int
        Length in bases of the longest record.
    """
    return max(_RUNS_TO_A_BIN * bases // runs, -(-longest // _MOST_BINS), 1)


def bins_of_runs(records: NDArray[np.integer[Any]], runs: Items, size: int) -> Items:
    """Cut runs at the borders of bins.

    Parameters
    ----------
    records : integer[run]
        Number of the record of each run.
    runs : RUN[run]
        Runs in ascending order of record and position.
    size : int
        Bases to a bin.

    Returns
    -------
    ROW[piece]
        One row for each run and bin that overlap, in ascending order.
    """
    start, end = runs["start"].astype(np.int64), runs["end"].astype(np.int64)
    first = start // size
    pieces = (end - 1) // size - first + 1
    run = np.repeat(np.arange(len(runs)), pieces)
    offset = np.arange(len(run)) - np.repeat(np.cumsum(pieces) - pieces, pieces)
    border = (first[run] + offset) * size
    rows = np.empty(len(run), dtype=ROW)
    rows["record"] = records[run]
    rows["start"] = np.maximum(start[run], border)
    rows["end"] = np.minimum(end[run], border + size)
    rows["bases"] = rows["end"] - rows["start"]
    value = runs["value"].astype(np.float64)[run]
    rows["lowest"] = rows["highest"] = value
    rows["total"] = rows["bases"] * value
    rows["squares"] = rows["total"] * value
    return rows


def merged(pieces: Iterable[Items], size: int) -> Iterator[Items]:
    """Join neighbouring rows that lie in one bin.

    Parameters
    ----------
    pieces : iterable of ROW[row]
        Rows in ascending order, of which none crosses the border of a bin.
    size : int
        Bases to a bin.

    Yields
    ------
    ROW[bin]
        Rows in ascending order, one for each bin in all.
    """
    held = np.empty(0, dtype=ROW)
    for rows in pieces:
        joined = _join(np.concatenate([held, rows]), size)
        # The next rows may belong to the last bin.
        yield joined[:-1]
        held = joined[-1:]
    yield held


def _join(rows: Items, size: int) -> Items:
    if not len(rows):
        return rows
    bins = rows["start"] // size
    new = (rows["record"][1:] != rows["record"][:-1]) | (bins[1:] != bins[:-1])
    at = np.concatenate([[0], np.flatnonzero(new) + 1])
    joined: Items = rows[at]
    joined["end"] = np.maximum.reduceat(rows["end"], at)
    joined["lowest"] = np.minimum.reduceat(rows["lowest"], at)
    joined["highest"] = np.maximum.reduceat(rows["highest"], at)
    for name in ("bases", "total", "squares"):
        joined[name] = np.add.reduceat(rows[name], at)
    return joined
