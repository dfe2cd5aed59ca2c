"""Called regions beside true ones: which are hit, which are false, how far edges are off."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

__all__ = ["Matching", "match_regions"]

_HALF = 0.5


class Matching(NamedTuple):
    """What came of the regions of one stretch.

    Attributes
    ----------
    true, called : int
        Numbers of regions.
    hit : int
        True regions that overlap a call.
    hit_by_half : int
        True regions that share at least half of their own length and of a call's length.
    false : int
        Calls that overlap no true region.
    distances : int64[edge]
        For each edge of a hit region, how far the same edge of the call with the largest
        overlap is away; edges at an end of the stretch are left out.
    """

    true: int
    called: int
    hit: int
    hit_by_half: int
    false: int
    distances: NDArray[np.int64]


def match_regions(true: NDArray[np.int64], called: NDArray[np.int64], length: int) -> Matching:
    """Compare called with true regions.

    Parameters
    ----------
    true, called
        int64[interval, 2]: sorted and apart.
    length
        Of the stretch on which they lie.
    """
    touched = np.zeros(len(called), bool)
    hit = by_half = 0
    distances: list[int] = []
    firsts = np.searchsorted(called[:, 1], true[:, 0], side="right")
    lasts = np.searchsorted(called[:, 0], true[:, 1], side="left")
    for (start, end), first, last in zip(true.tolist(), firsts, lasts, strict=True):
        if first >= last:
            continue
        hit += 1
        touched[first:last] = True
        found = called[first:last]
        shared = np.minimum(found[:, 1], end) - np.maximum(found[:, 0], start)
        longer = np.maximum(found[:, 1] - found[:, 0], end - start)
        by_half += bool((shared >= _HALF * longer).any())
        best = found[int(np.argmax(shared))]
        if start > 0:
            distances.append(abs(int(best[0]) - start))
        if end < length:
            distances.append(abs(int(best[1]) - end))
    return Matching(
        true=len(true),
        called=len(called),
        hit=hit,
        hit_by_half=by_half,
        false=int((~touched).sum()),
        distances=np.array(distances, dtype=np.int64),
    )
