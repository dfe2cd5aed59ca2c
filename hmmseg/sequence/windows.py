"""G+C along a record, in windows of equal width."""

import numpy as np
import numpy.typing as npt

from hmmseg.sequence.alphabet import MISSING
from hmmseg.sequence.contigs import GAP_MIN, gaps
from hmmseg.sequence.intervals import merge
from hmmseg.sequence.reading import Record

__all__ = ["WIDTH", "gc_windows"]

WIDTH = 100
"""Bases to a window."""

_Positions = npt.NDArray[np.int64]


def gc_windows(
    record: Record, gap_min: int = GAP_MIN, width: int = WIDTH
) -> tuple[_Positions, _Positions, npt.NDArray[np.float64]]:
    """G+C over known bases of each window.

    Windows begin at multiples of the width. A gap is in none: it cuts a window into pieces,
    which have the window's value. A window without a known base is left out.

    Parameters
    ----------
    record : Record
    gap_min : int
        Shortest run of N that is a gap, from 1 up.
    width : int
        Bases to a window; the last one of a record may be shorter.

    Returns
    -------
    starts, ends : int64[piece]
        In ascending order, half-open.
    gc : float64[piece]
        From 0 to 1.
    """
    length = len(record)
    borders = np.arange(0, length, width, dtype=np.int64)
    if not length:
        return borders, borders, np.empty(0)
    bases = record.bases
    strong = np.add.reduceat((bases == 1) | (bases == 2), borders, dtype=np.int64)
    known = np.add.reduceat(bases != MISSING, borders, dtype=np.int64)
    holes = merge(gaps(record, gap_min))
    starts = np.unique(np.concatenate([borders, holes.reshape(-1), [length]]))
    starts, ends = starts[:-1], starts[1:]
    # The hole that begins at or before a piece, if any, holds all of it or nothing.
    before = np.searchsorted(holes[:, 0], starts, side="right") - 1
    inside = np.zeros(len(starts), dtype=bool)
    inside[before >= 0] = starts[before >= 0] < holes[before[before >= 0], 1]
    window = starts // width
    kept = ~inside & (known[window] > 0)
    window = window[kept]
    return starts[kept], ends[kept], strong[window] / known[window]
