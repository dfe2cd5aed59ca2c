"""Zoom levels of a bigWig file: what a browser draws when it shows more than it can resolve.

A level cuts every record into bins of equal size and keeps the number of bases with a value,
the lowest, the highest, the sum and the sum of squares of each bin that has any.
"""

from collections.abc import Iterable, Iterator, Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg.tracks.bbi import ZOOM, Items

__all__ = ["ROW", "bins_of_rows", "bins_of_runs", "first_bin_size", "merged"]

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
    """Return what is known of the bins in which runs lie.

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
    ROW[bin]
        In ascending order; without bins that have no value.
    """
    start, end = runs["start"].astype(np.int64), runs["end"].astype(np.int64)
    first = start // size
    pieces = (end - 1) // size - first + 1
    run = np.repeat(np.arange(len(runs)), pieces)
    offset = np.arange(len(run)) - np.repeat(np.cumsum(pieces) - pieces, pieces)
    number = first[run] + offset
    columns = {
        "record": records[run],
        "start": np.maximum(start[run], number * size),
        "end": np.minimum(end[run], number * size + size),
    }
    columns["bases"] = columns["end"] - columns["start"]
    columns["lowest"] = columns["highest"] = value = runs["value"].astype(np.float64)[run]
    columns["total"] = columns["bases"] * value
    columns["squares"] = columns["total"] * value
    return _joined(columns, number)


def bins_of_rows(rows: Items, size: int) -> Items:
    """Join neighbouring rows that lie in one bin.

    Parameters
    ----------
    rows : ROW[row]
        In ascending order; none crosses the border of a bin.
    size : int
        Bases to a bin.
    """
    return _joined({name: rows[name] for name in ROW.names or ()}, rows["start"] // size)


def merged(pieces: Iterable[Items], size: int) -> Iterator[Items]:
    """Join rows of one bin that come in different pieces.

    Parameters
    ----------
    pieces : iterable of ROW[row]
        Rows in ascending order; within a piece one for each bin.
    size : int
        Bases to a bin.

    Yields
    ------
    ROW[bin]
        Rows in ascending order, one for each bin in all.
    """
    held = np.empty(0, dtype=ROW)
    for piece in pieces:
        seam = bins_of_rows(np.concatenate([held, piece[:1]]), size)
        rows = np.concatenate([seam, piece[1:]])
        # The next rows may belong to the last bin.
        yield rows[:-1]
        held = rows[-1:]
    yield held


def _joined(columns: Mapping[str, NDArray[Any]], bins: NDArray[np.integer[Any]]) -> Items:
    """Return one row for each bin from columns of ROW."""
    record = columns["record"]
    new = (record[1:] != record[:-1]) | (bins[1:] != bins[:-1])
    at = np.concatenate([np.zeros(min(1, len(bins)), np.int64), np.flatnonzero(new) + 1])
    rows = np.empty(len(at), dtype=ROW)
    for name, values in columns.items():
        reduce = _REDUCED.get(name)
        rows[name] = values[at] if reduce is None or not len(at) else reduce.reduceat(values, at)
    return rows


_REDUCED: Mapping[str, np.ufunc] = {
    "end": np.maximum,
    "bases": np.add,
    "lowest": np.minimum,
    "highest": np.maximum,
    "total": np.add,
    "squares": np.add,
}
"""How the columns of rows that lie in one bin make that of the bin; the first row has the rest."""
