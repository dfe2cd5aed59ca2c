"""How GC drifts along an assembly, slowly, with what is short left out.

GC is counted in windows, and the level at a window is the median of all windows within a span
around it: a stretch shorter than half of the span, such as a region, moves the median little,
while a change over longer distances is followed. The median of a running span keeps noise, so
levels are drawn towards their mean until their variance is that of the drift alone.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg.sequence.alphabet import MISSING
from hmmseg.sequence.contigs import Contig

__all__ = ["SPAN", "WINDOW", "Drift", "RecordWindows", "fit_drift", "running_median", "running_sum"]

WINDOW = 500
"""Bases in a window."""

SPAN = 20_000
"""Bases over which the median is taken."""

_SIDE = SPAN // WINDOW // 2
_AT_ONCE = 1 << 15
_MAD_TO_SD = 1.4826
_MEDIAN_VARIANCE = 1.5708
"""Variance of a median over that of a mean of normal values, pi / 2."""


class RecordWindows:
    """Counts of G+C and of known bases in the windows of one record.

    Parameters
    ----------
    length
        Of the record, in bases.
    circular
        Whether its last window is followed by its first.
    """

    def __init__(self, length: int, circular: bool) -> None:
        self.circular = circular
        windows = -(-length // WINDOW)
        self.strong = np.zeros(windows, np.int64)
        self.known = np.zeros(windows, np.int64)

    def add(self, contig: Contig) -> None:
        """Count a contig of the record."""
        cut = min(contig.record_length - contig.start, len(contig))
        self._count(contig.start, contig.bases[:cut])
        self._count(0, contig.bases[cut:])

    def _count(self, start: int, bases: NDArray[np.uint8]) -> None:
        if not len(bases):
            return
        first, last = start // WINDOW, (start + len(bases) - 1) // WINDOW
        edges = np.maximum(np.arange(first, last + 1) * WINDOW - start, 0)
        strong = (bases == 1) | (bases == 2)
        self.strong[first : last + 1] += np.add.reduceat(strong, edges, dtype=np.int64)
        self.known[first : last + 1] += np.add.reduceat(bases != MISSING, edges, dtype=np.int64)


@dataclass(frozen=True, eq=False)
class Drift:
    """Levels of GC along the records of an assembly.

    Attributes
    ----------
    levels : list of float64[window]
        GC fraction of each window of each record.
    mean : float
        Over all known bases.
    spread : float
        Standard deviation of the drift, without the noise of windows; 0 if none can be told.
    spans : float
        How many spans the known bases would fill.
    """

    levels: list[NDArray[np.float64]]
    mean: float
    spread: float
    spans: float


def fit_drift(records: list[RecordWindows]) -> Drift:
    """Return the drift of an assembly.

    Parameters
    ----------
    records
        Counts of all records.

    Notes
    -----
    The noise of a window is taken from the differences of neighbours, which a slow drift leaves
    alone; the median of ``n`` windows has ``pi / 2 / n`` of its variance. What the levels vary
    beyond that is drift.
    """
    parts = [_levels(record) for record in records]
    level = np.concatenate([one for one, _ in parts])
    behind = np.concatenate([weight for _, weight in parts])
    known = np.concatenate([record.known for record in records]).astype(np.float64)
    seen = (known > 0) & (behind > 0)
    if not seen.any():
        return Drift([np.full(len(one), 0.5) for one, _ in parts], 0.5, 0.0, 0.0)
    total = float(known[seen].sum())
    mean = float((known[seen] * level[seen]).sum() / total)
    noise = _MEDIAN_VARIANCE * _window_variance(records) / np.maximum(behind, 1e-9)
    varied = float((known[seen] * (level[seen] - mean) ** 2).sum() / total)
    drift = max(varied - float((known[seen] * noise[seen]).sum() / total), 0.0)
    # A level keeps the share of its deviation that gives all levels the variance of the drift.
    kept = np.sqrt(drift / np.maximum(drift + noise, 1e-300))
    smooth = np.where(seen, mean + kept * (level - mean), mean)
    edges = np.cumsum([len(one) for one, _ in parts])[:-1]
    return Drift(np.split(smooth, edges), mean, float(np.sqrt(drift)), total / SPAN)


def _levels(record: RecordWindows) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the running median of a record, and how many full windows stand behind each."""
    known = record.known
    usable = 2 * known >= min(WINDOW, max(int(known.max(initial=0)), 1))
    gc = np.where(usable, record.strong / np.maximum(known, 1), np.inf)
    medians = running_median(gc, _SIDE, record.circular)
    behind = running_sum(np.where(usable, known / WINDOW, 0.0), _SIDE, record.circular)
    if record.circular:
        return medians, behind
    # Near an end the span would be half as long, and a region would fill it twice as soon.
    count = len(gc)
    at = np.clip(np.arange(count), min(_SIDE, count // 2), max(count - 1 - _SIDE, count // 2))
    return medians[at], behind[at]


def _around(values: NDArray[np.float64], side: int, circular: bool, fill: float) -> NDArray[Any]:
    """Return float64[window, 2 side + 1], the values around each."""
    if circular and len(values) > 2 * side:
        padded = np.concatenate((values[-side:], values, values[:side]))
    else:
        padded = np.concatenate((np.full(side, fill), values, np.full(side, fill)))
    return np.lib.stride_tricks.sliding_window_view(padded, 2 * side + 1)


def running_median(values: NDArray[np.float64], side: int, circular: bool) -> NDArray[np.float64]:
    """Return the median of the values up to ``side`` places to both sides of each.

    Parameters
    ----------
    values
        float64[place]; infinite where not known, which counts as absent.
    side
        Places to each side.
    circular
        Whether the last value is followed by the first.

    Returns
    -------
    float64[place]
        0 where no value is known.
    """
    around = _around(values, side, circular, np.inf)
    medians = np.zeros(len(values))
    for begin in range(0, len(values), _AT_ONCE):
        piece = np.sort(around[begin : begin + _AT_ONCE], axis=1)
        count = np.isfinite(piece).sum(axis=1)
        low, high = np.maximum(count - 1, 0) // 2, np.maximum(count // 2, 0)
        rows = np.arange(len(piece))
        middle = (piece[rows, low] + piece[rows, np.minimum(high, 2 * side)]) / 2
        medians[begin : begin + _AT_ONCE] = np.where(count > 0, middle, 0.0)
    return medians


def running_sum(values: NDArray[np.float64], side: int, circular: bool) -> NDArray[np.float64]:
    """Return the sum of the values up to ``side`` places to both sides of each."""
    sums: NDArray[np.float64] = _around(values, side, circular, 0.0).sum(axis=1)
    return sums


def _window_variance(records: list[RecordWindows]) -> float:
    """Return the variance of a full window's GC around its level, robustly."""
    steps = []
    for record in records:
        full = 2 * record.known >= WINDOW
        gc = record.strong / np.maximum(record.known, 1)
        steps.append(np.abs(np.diff(gc))[full[1:] & full[:-1]])
    differences = np.concatenate(steps)
    if not len(differences):
        return 0.25 / WINDOW
    return float((_MAD_TO_SD * np.median(differences)) ** 2 / 2)
