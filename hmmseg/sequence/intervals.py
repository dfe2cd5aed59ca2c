"""Intervals on a record: runs, merging, what lies between, and BED lines as input.

An interval array is ``int64[interval, 2]``: start and end, 0-based and half-open.
"""

import re
from collections.abc import Iterator
from pathlib import Path
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from hmmseg.errors import LabelError
from hmmseg.sequence.source import open_text

__all__ = ["BedLine", "complement", "empty_intervals", "flag_runs", "merge", "read_bed"]

Intervals = npt.NDArray[np.int64]

_MIN_COLUMNS = 3
_WHOLE_NUMBER = re.compile(r"[0-9]{1,18}")
"""Eighteen digits fit int64."""


class BedLine(NamedTuple):
    """One data line of a BED file."""

    record: str
    start: int
    end: int
    name: str
    """Fourth column, or an empty string."""
    where: str
    """File and line, for messages."""


def empty_intervals() -> Intervals:
    """Return an interval array without intervals, int64[0, 2]."""
    return np.empty((0, 2), dtype=np.int64)


def flag_runs(flags: npt.NDArray[np.bool_], offset: int = 0) -> Intervals:
    """Find the runs of True in ``flags`` (bool[position]), moved right by ``offset``."""
    steps = np.diff(flags.astype(np.int8), prepend=np.int8(0), append=np.int8(0))
    edges = np.flatnonzero(steps).astype(np.int64) + offset
    return edges.reshape(-1, 2)


def merge(intervals: Intervals) -> Intervals:
    """Sort intervals, drop empty ones, and unite those that overlap or touch.

    Parameters
    ----------
    intervals : int64[interval, 2]
        In any order.

    Returns
    -------
    int64[interval, 2]
        Sorted, with at least one position between neighbours.
    """
    kept = intervals[intervals[:, 1] > intervals[:, 0]]
    if len(kept) == 0:
        return empty_intervals()
    kept = kept[np.argsort(kept[:, 0], kind="stable")]
    reach = np.maximum.accumulate(kept[:, 1])
    opens = np.concatenate(([True], kept[1:, 0] > reach[:-1]))
    closes = np.concatenate((opens[1:], [True]))
    return np.column_stack((kept[opens, 0], reach[closes]))


def complement(merged: Intervals, length: int) -> Intervals:
    """Give the intervals of ``[0, length)`` that ``merged`` (as `merge` returns it) leaves."""
    starts = np.concatenate((np.zeros(1, dtype=np.int64), merged[:, 1]))
    ends = np.concatenate((merged[:, 0], np.full(1, length, dtype=np.int64)))
    return np.column_stack((starts, ends))[ends > starts]


def read_bed(path: str | Path) -> Iterator[BedLine]:
    """Read the first four columns of a BED file, plain or compressed, or ``-``.

    Blank lines, comments and genome browser lines (``track``, ``browser``) are passed over; a file
    without any line is in order.

    Raises
    ------
    LabelError
        The file cannot be read, or a line is not BED; the message names file and line.
    """
    with open_text(path, LabelError, may_be_empty=True) as text:
        for number, line in enumerate(text.lines(), 1):
            content = line.strip()
            if content and not content.startswith(("#", "track ", "browser ")):
                yield _parse_bed(line.rstrip("\r\n"), f"{text.name}:{number}")


def _parse_bed(line: str, where: str) -> BedLine:
    """Parse one data line."""
    fields = line.split("\t") if "\t" in line else line.split()
    if len(fields) < _MIN_COLUMNS:
        raise LabelError(f"{where}: a BED line needs record, start and end, separated by tabs")
    record, first, last = (field.strip() for field in fields[:_MIN_COLUMNS])
    if not record:
        raise LabelError(f"{where}: the first column, the record's name, is empty")
    if not (_WHOLE_NUMBER.fullmatch(first) and _WHOLE_NUMBER.fullmatch(last)):
        raise LabelError(
            f"{where}: start and end must be whole numbers from 0 up, not {first!r} and {last!r}"
        )
    start, end = int(first), int(last)
    if start > end:
        raise LabelError(f"{where}: start {start} lies behind end {end}; BED is 0-based, half-open")
    name = fields[_MIN_COLUMNS].strip() if len(fields) > _MIN_COLUMNS else ""
    return BedLine(record, start, end, name, where)
