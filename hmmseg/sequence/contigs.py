"""Contigs: what gaps and exclusions leave of a record."""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from hmmseg.sequence.alphabet import CHUNK, MISSING
from hmmseg.sequence.intervals import complement, merge
from hmmseg.sequence.reading import Record

__all__ = ["GAP_MIN", "Contig", "gaps", "spans_origin", "split"]

GAP_MIN = 25
"""A run of N at least this long is a gap."""


@dataclass(frozen=True, eq=False)
class Contig:
    """A gap-free stretch of a record.

    Attributes
    ----------
    record : str
        The record's name.
    start : int
        Position ``i`` of the contig is position ``(start + i) % record_length`` of the record.
    bases : uint8[position]
    closed : bool
        The contig is a whole circular record: its last base is followed by its first.
    record_length : int
    """

    record: str
    start: int
    bases: npt.NDArray[np.uint8]
    closed: bool
    record_length: int

    def __len__(self) -> int:
        """Length in bases."""
        return len(self.bases)


def gaps(record: Record, gap_min: int = GAP_MIN) -> npt.NDArray[np.int64]:
    """Find the gaps of a record.

    Parameters
    ----------
    record : Record
    gap_min : int
        Shortest run of N that is a gap, from 1 up.

    Returns
    -------
    int64[gap, 2]
        A gap across the origin of a circular record is measured as one and given as two
        intervals.

    Raises
    ------
    ValueError
        ``gap_min`` is below 1.
    """
    if gap_min < 1:
        raise ValueError(f"gap_min must be at least 1, not {gap_min}")
    runs = record.n_runs
    lengths = runs[:, 1] - runs[:, 0]
    if spans_origin(record, runs):
        lengths[[0, -1]] = lengths[0] + lengths[-1]
    return runs[lengths >= gap_min]


def spans_origin(record: Record, intervals: npt.NDArray[np.int64]) -> bool:
    """Whether the last interval goes on in the first, over the origin of a circular record."""
    if not record.circular or len(intervals) < 2:
        return False
    return int(intervals[0, 0]) == 0 and int(intervals[-1, 1]) == len(record)


def split(
    record: Record, gap_min: int = GAP_MIN, exclude: npt.NDArray[np.int64] | None = None
) -> list[Contig]:
    """Cut a record into contigs.

    Parameters
    ----------
    record : Record
    gap_min : int
        Shortest run of N that is a gap, from 1 up. Shorter runs stay, as missing bases.
    exclude : int64[interval, 2], optional
        Intervals of the record that cut like gaps.

    Returns
    -------
    list of Contig
        By start. In a circular record the stretch across the origin is one contig, whose start
        plus length exceeds the record's length. A stretch without a known base is left out, so
        a record of nothing but gaps gives an empty list. Bases are views of the record's, but
        for the contig across the origin.

    Raises
    ------
    ValueError
        ``gap_min`` is below 1, or an excluded interval lies outside the record.
    """
    cuts = gaps(record, gap_min)
    if exclude is not None and len(exclude):
        if exclude.min() < 0 or exclude.max() > len(record):
            raise ValueError(f"an excluded interval lies outside record {record.name}")
        cuts = np.concatenate((cuts, exclude))
    pieces = complement(merge(cuts), len(record))
    if record.circular and len(pieces) == 1 and pieces[0, 1] - pieces[0, 0] == len(record):
        whole = Contig(record.name, 0, record.bases, True, len(record))
        return [whole] if _any_known(whole.bases) else []
    spans = [(int(start), record.bases[start:end]) for start, end in pieces]
    if spans_origin(record, pieces):
        first, last = spans.pop(0), spans.pop()
        spans.append((last[0], np.concatenate((last[1], first[1]))))
    return [
        Contig(record.name, start, bases, False, len(record))
        for start, bases in spans
        if _any_known(bases)
    ]


def _any_known(bases: npt.NDArray[np.uint8]) -> bool:
    """Whether a stretch holds a base that is not missing."""
    chunks = (bases[offset : offset + CHUNK] for offset in range(0, len(bases), CHUNK))
    return any(bool((chunk != MISSING).any()) for chunk in chunks)
