"""Tracks in bins of equal width: lowest, mean and highest value of each, as one byte."""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hmmseg.tracks import zoom
from hmmseg.tracks.bigwig import read_batches

__all__ = ["LEVELS", "NOTHING", "Binned", "Layout", "read_binned"]

LEVELS = 250
"""A value from 0 to 1 is kept as a whole number up to this."""
NOTHING = 255
"""A bin in which no base has a value."""

_MOST_BINS = 2_000_000
_NARROWEST = 10
_STEPS = (1, 2, 5)

Bytes = NDArray[np.uint8]


@dataclass(frozen=True, eq=False)
class Layout:
    """Where the bins of each record stand in one long array.

    Parameters
    ----------
    record_lengths
        Length of each record in bases, in the order of the array.
    size
        Bases to a bin; the last of a record may be shorter.
    """

    record_lengths: Mapping[str, int]
    size: int

    @classmethod
    def fitting(cls, record_lengths: Mapping[str, int], tracks: int) -> "Layout":
        """Return the layout with the narrowest round bins that so many tracks can have."""
        bases = sum(record_lengths.values())
        size, step = _NARROWEST, 0
        while bases > size * (_MOST_BINS // max(tracks, 1)):
            step += 1
            size = _NARROWEST * _STEPS[step % 3] * 10 ** (step // 3)
        return cls(record_lengths, size)

    @property
    def counts(self) -> NDArray[np.int64]:
        """int64[record]: bins of each record."""
        lengths = np.array(list(self.record_lengths.values()), dtype=np.int64)
        return -(-lengths // self.size)

    @property
    def offsets(self) -> NDArray[np.int64]:
        """int64[record + 1]: where the bins of each record begin, and where all end."""
        return np.concatenate([[0], np.cumsum(self.counts)])


@dataclass(frozen=True, eq=False)
class Binned:
    """A track in bins, and sums over its bases.

    Attributes
    ----------
    lowest, mean, highest : uint8[bin]
        In steps of 1 / `LEVELS`, or `NOTHING`.
    total : float
        Sum of the values of all bases.
    bases : int
        Bases with a value.
    above : dict
        Bases with at least so high a value, for the thresholds asked for.
    holes : int64[hole, 3]
        Stretches without a value: place of the record, start, end.
    """

    lowest: Bytes
    mean: Bytes
    highest: Bytes
    total: float
    bases: int
    above: dict[float, int]
    holes: NDArray[np.int64]


def read_binned(path: Path, layout: Layout, thresholds: tuple[float, ...] = ()) -> Binned:
    """Read a track of values from 0 to 1.

    Parameters
    ----------
    path
        A bigWig file of runs.
    layout
        Where the bins are to stand.
    thresholds
        Values for which the bases at or above are counted.
    """
    offsets = layout.offsets
    bins = int(offsets[-1])
    lowest, mean, highest = (np.full(bins, NOTHING, dtype=np.uint8) for _ in range(3))
    sums = _Sums(layout, thresholds)

    def pieces() -> "zoom.Iterator[zoom.Items]":
        for records, runs in read_batches(path, layout.record_lengths, layout.size):
            sums.add(records, runs)
            yield zoom.bins_of_runs(records, runs, layout.size)

    for rows in zoom.merged(pieces(), layout.size):
        at = offsets[rows["record"]] + rows["start"] // layout.size
        lowest[at] = _byte(rows["lowest"])
        highest[at] = _byte(rows["highest"])
        mean[at] = _byte(rows["total"] / rows["bases"])
    return Binned(
        lowest, mean, highest, sums.total, sums.bases, dict(sums.above), sums.holes()
    )  # fmt: skip


def _byte(values: NDArray[np.floating]) -> Bytes:
    kept = np.minimum(np.maximum(np.floor(values * float(LEVELS) + 0.5), 0), LEVELS)
    return kept.astype(np.uint8)


class _Sums:
    """Sums over the bases of a track, and where it has none."""

    def __init__(self, layout: Layout, thresholds: tuple[float, ...]) -> None:
        self.total, self.bases = 0.0, 0
        self.above = dict.fromkeys(thresholds, 0)
        self._lengths = np.array(list(layout.record_lengths.values()), dtype=np.int64)
        self._covered: list[NDArray[np.int64]] = []

    def add(self, records: NDArray[np.int64], runs: NDArray[np.void]) -> None:
        """Take in one batch of runs."""
        start, end = runs["start"].astype(np.int64), runs["end"].astype(np.int64)
        widths, values = end - start, runs["value"].astype(np.float64)
        self.total += float((widths * values).sum())
        self.bases += int(widths.sum())
        for threshold in self.above:
            # Values are kept in single precision.
            self.above[threshold] += int(widths[values >= np.float32(threshold)].sum())
        joins = (records[1:] == records[:-1]) & (start[1:] == end[:-1])
        first = np.concatenate([[True], ~joins])
        last = np.concatenate([~joins, [True]])
        self._covered.append(np.stack([records[first], start[first], end[last]], axis=1))

    def holes(self) -> NDArray[np.int64]:
        """int64[hole, 3]: what the runs leave of the records."""
        edges = np.arange(len(self._lengths))
        zeros = np.zeros_like(edges)
        # A mark before the first and behind the last base of each record.
        marks = [
            np.stack([edges, zeros, zeros], axis=1),
            np.stack([edges, self._lengths, self._lengths], axis=1),
        ]
        covered = np.concatenate([*self._covered, *marks])
        covered = covered[np.lexsort((covered[:, 2], covered[:, 1], covered[:, 0]))]
        same = covered[1:, 0] == covered[:-1, 0]
        open_between = same & (covered[1:, 1] > covered[:-1, 2])
        at = np.flatnonzero(open_between)
        return np.stack([covered[at, 0], covered[at, 2], covered[at + 1, 1]], axis=1)
