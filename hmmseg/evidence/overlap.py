"""How called regions and known features lie upon each other."""

from collections.abc import Mapping, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.sequence.intervals import merge

__all__ = ["Overlap", "overlap"]

_Intervals = NDArray[np.int64]


class Overlap(NamedTuple):
    """How features of one kind and regions of one state overlap.

    Attributes
    ----------
    features : int
        How many there are.
    touched, half_covered : int
        Features with at least one base in a region, and with half their bases or more.
    feature_bases : int
        Bases in features, each counted once.
    shared_bases : int
        Those of them that lie in regions.
    region_bases : int
        Bases in regions.
    """

    features: int
    touched: int
    half_covered: int
    feature_bases: int
    shared_bases: int
    region_bases: int

    def times_expected(self, bases: int) -> float | None:
        """Return shared bases over those expected if regions lay at random in ``bases`` bases."""
        expected = self.feature_bases * self.region_bases / bases if bases else 0.0
        return self.shared_bases / expected if expected > 0 else None


def overlap(
    features: Mapping[str, Sequence[tuple[int, int]]],
    regions: Mapping[str, Sequence[tuple[int, int]]],
    lengths: Mapping[str, int],
) -> Overlap:
    """Measure the overlap of features and regions.

    Parameters
    ----------
    features, regions
        Half-open intervals of each record, in any order. One across the origin of a circle ends
        beyond the record's length.
    lengths
        Lengths of the records in bases.
    """
    count = touched = half = feature_bases = shared = 0
    merged = {
        name: merge(_cut(_array(own), lengths[name]).reshape(-1, 2))
        for name, own in regions.items()
    }
    for name, intervals in features.items():
        own = _array(intervals)
        pieces = _cut(own, lengths[name])
        within = merged.get(name, np.empty((0, 2), np.int64))
        covered = _covered(pieces[:, 0], within) + _covered(pieces[:, 1], within)
        count += len(own)
        touched += int(np.count_nonzero(covered))
        half += int(np.count_nonzero(2 * covered >= own[:, 1] - own[:, 0]))
        united = merge(pieces.reshape(-1, 2))
        feature_bases += _total(united)
        shared += int(_covered(united, within).sum())
    region_bases = sum(_total(united) for united in merged.values())
    return Overlap(count, touched, half, feature_bases, shared, region_bases)


def _cut(intervals: _Intervals, length: int) -> _Intervals:
    """Return int64[interval, 2, 2]: the part of each before the origin, and that behind it."""
    first = np.column_stack((intervals[:, 0], np.minimum(intervals[:, 1], length)))
    beyond = np.maximum(intervals[:, 1] - length, 0)
    return np.stack((first, np.column_stack((np.zeros_like(beyond), beyond))), axis=1)


def _array(intervals: Sequence[tuple[int, int]]) -> _Intervals:
    return np.array(intervals, dtype=np.int64).reshape(-1, 2)


def _total(intervals: _Intervals) -> int:
    return int((intervals[:, 1] - intervals[:, 0]).sum())


def _covered(intervals: _Intervals, within: _Intervals) -> NDArray[np.int64]:
    """Return int64[interval] bases of each interval that lie within sorted, merged ones."""
    lengths = np.concatenate(([0], np.cumsum(within[:, 1] - within[:, 0])))

    def up_to(position: NDArray[np.int64]) -> NDArray[np.int64]:
        """Bases of ``within`` before a position."""
        number = np.searchsorted(within[:, 0], position, side="right")
        last = np.maximum(number - 1, 0)
        if len(within) == 0:
            return np.zeros(len(position), np.int64)
        beyond = np.maximum(within[last, 1] - position, 0)
        result: NDArray[np.int64] = np.where(number > 0, lengths[number] - beyond, 0)
        return result

    return up_to(intervals[:, 1]) - up_to(intervals[:, 0])
