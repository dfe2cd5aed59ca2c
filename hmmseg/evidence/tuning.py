"""Choosing the window and threshold of two chains on labelled sequence, by correlation."""

from collections.abc import Iterable, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import LabelError
from hmmseg.evidence.calibration import Scale, fitted_scale
from hmmseg.evidence.metrics import matthews_correlation
from hmmseg.regions.labels import inside
from hmmseg.regions.windows import LEVEL, ChainPair, WindowCaller, Windows
from hmmseg.sequence.contigs import Contig

__all__ = ["WINDOWS_TRIED", "ScoreCounts", "Tuned", "tune"]

WINDOWS_TRIED = (50, 100, 200, 500, 1000, 2000, 5000)
"""Lengths in bases among which the best window is sought."""

_STEPS_IN_WINDOW = 20
_SPAN = 2.0
_BINS = 8192

Labelled = tuple[Contig, NDArray[np.int64]]


class Tuned(NamedTuple):
    """What was chosen.

    Attributes
    ----------
    windows : Windows
    threshold : float
        In bits of a window.
    mcc : float
        The correlation reached with it.
    scale : Scale
        From scores to log-odds that can be believed.
    """

    windows: Windows
    threshold: float
    mcc: float
    scale: Scale


class ScoreCounts:
    """How often true and other bases reach each score with one window.

    Scores are counted in 8,192 bins from -2 to 2 bits for each base of the window.

    Parameters
    ----------
    pair
        The chains.
    windows
        The window.
    threads
        Threads to use.
    """

    def __init__(self, pair: ChainPair, windows: Windows, threads: int = 1) -> None:
        self._caller = WindowCaller(pair, windows, threads=threads)
        self._counts = np.zeros((2, _BINS), np.int64)
        self._width = 2 * _SPAN * windows.window / _BINS

    def add(self, contig: Contig, truth: NDArray[np.int64]) -> None:
        """Count a contig; one shorter than the window is passed over.

        Parameters
        ----------
        contig
            The sequence.
        truth
            int64[interval, 2]: its regions.
        """
        if len(contig) < self._caller.windows.window:
            return
        for begin, _, best in self._caller.stretches(contig):
            bins = np.floor(best / (LEVEL * self._width)).astype(np.int64) + _BINS // 2
            np.clip(bins, 0, _BINS - 1, out=bins)
            true = inside(truth, begin, begin + len(best))
            self._counts[1] += np.bincount(bins[true], minlength=_BINS)
            self._counts[0] += np.bincount(bins[~true], minlength=_BINS)

    def choose(self) -> Tuned:
        """Return the threshold with the best correlation; the middle of equally good ones.

        Raises
        ------
        LabelError
            All bases that were counted are of one class.
        """
        total = self._counts.sum(axis=1)
        if not total.all():
            raise LabelError(
                "the labels leave one class only: "
                f"{'no base' if not total[1] else 'every base'} of the contigs that hold a window "
                "of this length is labelled; a threshold needs both, check the labels"
            )
        # A base is called if its bin lies above the edge.
        called = np.cumsum(self._counts[:, ::-1], axis=1)[:, ::-1][:, 1:]
        fp, tp = called
        values = matthews_correlation(tp, fp, total[1] - tp, total[0] - fp)
        best = np.flatnonzero(values == values.max())
        edge = int(best[len(best) // 2]) + 1
        threshold = (edge - _BINS // 2) * self._width
        middles = np.arange(0.5 - _BINS // 2, _BINS // 2, dtype=np.float64) * self._width
        scale = fitted_scale(middles, self._counts[1], self._counts[0])
        return Tuned(self._caller.windows, float(threshold), float(values.max()), scale)


def tune(
    pair: ChainPair,
    labelled: Sequence[Labelled],
    lengths: Iterable[int] = WINDOWS_TRIED,
    threads: int = 1,
) -> Tuned:
    """Return the window and threshold with the best correlation; the shortest of equal ones.

    Parameters
    ----------
    pair
        The chains.
    labelled
        Contigs, and int64[interval, 2] regions on them.
    lengths
        Windows to try, in bases; those longer than half of the longest contig are left out,
        but for the shortest.
    threads
        Threads to use; the result does not depend on it.

    Raises
    ------
    LabelError
        The labels leave one class only.
    """
    longest = max(len(contig) for contig, _ in labelled)
    tried = sorted(lengths)
    tried = [length for length in tried if 2 * length <= longest] or [min(tried[0], longest)]
    best: Tuned | None = None
    for length in tried:
        counts = ScoreCounts(pair, Windows(length, max(1, length // _STEPS_IN_WINDOW)), threads)
        for contig, truth in labelled:
            counts.add(contig, truth)
        found = counts.choose()
        if best is None or found.mcc > best.mcc:
            best = found
    assert best is not None
    return best
