"""Labels: known regions, as they come in a BED file, on records and on contigs."""

import re
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import LabelError
from hmmseg.sequence.contigs import Contig
from hmmseg.sequence.intervals import empty_intervals, merge, read_bed

__all__ = ["Labels", "inside", "without_serial"]


def without_serial(name: str) -> str:
    """Return a region's name without the number that ``decode`` appends: STATE of STATE_12."""
    return re.sub(r"_[0-9]+$", "", name)


@dataclass(frozen=True, eq=False)
class Labels:
    """Intervals of known regions.

    Parameters
    ----------
    path
        Where they were read.
    intervals
        By record: int64[interval, 2], sorted and apart, in record positions.
    lines
        By record: file and line of the interval that reaches furthest, and where it ends.
    """

    path: str
    intervals: Mapping[str, NDArray[np.int64]]
    lines: Mapping[str, tuple[str, int]]

    @classmethod
    def read(cls, path: str | Path, name: str | None = None) -> "Labels":
        """Read a BED file.

        Parameters
        ----------
        path
            The file.
        name
            Use only intervals of this name, or of this name with a number as in NAME_12.

        Raises
        ------
        LabelError
            A line is not BED, or no interval is left; the message names file and line.
        """
        spans: dict[str, list[tuple[int, int]]] = {}
        lines: dict[str, tuple[str, int]] = {}
        for line in read_bed(path):
            if name is not None and name not in (line.name, without_serial(line.name)):
                continue
            spans.setdefault(line.record, []).append((line.start, line.end))
            if line.end > lines.get(line.record, ("", -1))[1]:
                lines[line.record] = (line.where, line.end)
        if not spans:
            named = "" if name is None else f" named {name}"
            raise LabelError(f"{path}: holds no interval{named}; give the known regions as BED")
        merged = {record: merge(np.array(found)) for record, found in spans.items()}
        return cls(str(path), merged, lines)

    def check(self, record_lengths: Mapping[str, int], others_too: bool = False) -> None:
        """Raise LabelError if an interval lies outside the records that were read.

        Parameters
        ----------
        record_lengths
            Lengths of the records in bases.
        others_too
            Pass over labels of other records, because only some were selected.
        """
        for record, (where, end) in self.lines.items():
            if record not in record_lengths:
                if others_too:
                    continue
                raise LabelError(
                    f"{where}: record {record} is not in the sequence; check names and selection"
                )
            if end > record_lengths[record]:
                raise LabelError(
                    f"{where}: the interval ends at {end}, but record {record} has "
                    f"{record_lengths[record]} bases"
                )

    def on(self, contig: Contig) -> NDArray[np.int64]:
        """Return int64[interval, 2]: the labelled parts of a contig, in its own positions."""
        spans = self.intervals.get(contig.record)
        if spans is None:
            return empty_intervals()
        parts = [
            np.clip(spans - shift, 0, len(contig))
            for shift in (contig.start, contig.start - contig.record_length)
        ]
        return merge(np.concatenate(parts))


def inside(intervals: NDArray[np.int64], begin: int, stop: int) -> NDArray[np.bool_]:
    """Return bool[position]: which positions of a stretch lie in an interval.

    Parameters
    ----------
    intervals
        int64[interval, 2], sorted and apart.
    begin, stop
        Positions, half-open.
    """
    first = int(np.searchsorted(intervals[:, 1], begin, side="right"))
    last = int(np.searchsorted(intervals[:, 0], stop, side="left"))
    steps = np.zeros(stop - begin + 1, np.int8)
    chosen = np.clip(intervals[first:last] - begin, 0, stop - begin)
    steps[chosen[:, 0]] += 1
    steps[chosen[:, 1]] -= 1
    return np.cumsum(steps[:-1], dtype=np.int8).astype(bool)
