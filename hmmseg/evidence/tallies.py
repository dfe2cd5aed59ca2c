"""Counts of one way of calling on blocks of known truth, and the measures they give.

All that the measures need is counted block by block, in integers, so that drawing blocks again
costs no new look at the sequence. Scores are counted at levels of a sixteenth of a bit.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.evidence import metrics
from hmmseg.evidence.matching import Matching, match_regions
from hmmseg.kernels.elementary import LN2, exp, log_array
from hmmseg.regions.labels import inside

__all__ = [
    "LEVEL_COUNT",
    "MEASURES",
    "BlockTally",
    "Tally",
    "level_probabilities",
    "levels_of_bits",
    "log_odds_of",
]

_STEPS_PER_BIT = 16
_MOST_BITS = 32
_TOP = _STEPS_PER_BIT * _MOST_BITS
LEVEL_COUNT = 2 * _TOP + 1

MEASURES = {
    "sensitivity": "share of true bases called",
    "precision": "share of called bases true",
    "f1": "harmonic mean of sensitivity and precision",
    "mcc": "correlation of calls with truth (Matthews)",
    "roc_area": "area under the ROC curve of the score",
    "pr_area": "area under the precision-recall curve of the score",
    "brier": "mean squared error of the probability (less is better)",
    "regions_hit": "share of true regions that overlap a call",
    "regions_hit_half": "share of true regions that share half of both lengths with a call",
    "false_per_mb": "calls that overlap no true region, per Mb (less is better)",
    "edge_median": "median distance of region edges, bases (less is better)",
    "edge_p90": "90th percentile of the distance of region edges, bases (less is better)",
}
"""Name and meaning of each measure, in the order in which they are shown."""


def log_odds_of(posterior: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return log2 p / (1 - p) of a flat array, infinite at 0 and 1."""
    return (log_array(posterior) - log_array(1 - posterior)) / LN2


def levels_of_bits(bits: NDArray[np.float64]) -> NDArray[np.int64]:
    """Return the level of each log-odds, 0 to ``LEVEL_COUNT - 1``, limited to 32 bits."""
    limited = np.clip(bits, -_MOST_BITS, _MOST_BITS)
    return np.rint(limited * _STEPS_PER_BIT).astype(np.int64) + _TOP


def level_probabilities() -> NDArray[np.float64]:
    """Return float64[level]: the probability that each level's log-odds mean."""
    bits = (np.arange(LEVEL_COUNT) - _TOP) / _STEPS_PER_BIT
    return np.array([1 / (1 + exp(-value * LN2)) for value in bits])


class BlockTally(NamedTuple):
    """Counts of one block.

    Attributes
    ----------
    bases : int64[4]
        True and called, called only, true only, neither.
    positives, negatives : int64[level]
        True and other bases at each score.
    matching : Matching
        Of its regions.
    """

    bases: NDArray[np.int64]
    positives: NDArray[np.int64]
    negatives: NDArray[np.int64]
    matching: Matching

    @classmethod
    def of(
        cls,
        true: NDArray[np.int64],
        called: NDArray[np.int64],
        length: int,
        scores: Iterator[tuple[int, NDArray[np.float64]]],
    ) -> "BlockTally":
        """Count one block.

        Parameters
        ----------
        true, called
            int64[interval, 2]: sorted and apart.
        length
            Of the block, in bases.
        scores
            First position and float64[position] log-odds bits of consecutive stretches.
        """
        positives, negatives = (np.zeros(LEVEL_COUNT, np.int64) for _ in range(2))
        hits = 0
        for begin, bits in scores:
            truth = inside(true, begin, begin + len(bits))
            levels = levels_of_bits(bits)
            positives += np.bincount(levels[truth], minlength=LEVEL_COUNT)
            negatives += np.bincount(levels[~truth], minlength=LEVEL_COUNT)
            hits += int((truth & inside(called, begin, begin + len(bits))).sum())
        all_true, all_called = (int((x[:, 1] - x[:, 0]).sum()) for x in (true, called))
        rest = length - all_true - all_called + hits
        return cls(
            np.array([hits, all_called - hits, all_true - hits, rest]),
            positives,
            negatives,
            match_regions(true, called, length),
        )


@dataclass(frozen=True, eq=False)
class Tally:
    """Counts of all blocks, one way of calling.

    Attributes
    ----------
    bases : int64[block, 4]
        As of :class:`BlockTally`, like the next two.
    positives, negatives : int64[block, level]
    regions : int64[block, 5]
        True, called, hit, hit by half, false.
    distances : int64[edge]
        Of the edges of hit regions in all blocks, sorted.
    owners : int64[edge]
        The block of each.
    """

    bases: NDArray[np.int64]
    positives: NDArray[np.int64]
    negatives: NDArray[np.int64]
    regions: NDArray[np.int64]
    distances: NDArray[np.int64]
    owners: NDArray[np.int64]

    @classmethod
    def of(cls, blocks: Sequence[BlockTally]) -> "Tally":
        """Return the counts of blocks, in their order."""
        matchings = [one.matching for one in blocks]
        owners = np.repeat(np.arange(len(blocks)), [len(m.distances) for m in matchings])
        distances = np.concatenate([m.distances for m in matchings])
        order = np.argsort(distances, kind="stable")
        return cls(
            bases=np.array([one.bases for one in blocks]),
            positives=np.array([one.positives for one in blocks]),
            negatives=np.array([one.negatives for one in blocks]),
            regions=np.array([m[:5] for m in matchings]),
            distances=distances[order],
            owners=owners[order],
        )

    @classmethod
    def together(cls, parts: Sequence["Tally"], places: Sequence[NDArray[np.int64]]) -> "Tally":
        """Return the counts of all parts in one.

        Parameters
        ----------
        parts
            Each of some of the blocks.
        places
            int64[block] for each part: the number of each of its blocks among all.
        """
        order = np.argsort(np.concatenate(places))
        bases, positives, negatives, regions = (
            np.concatenate([getattr(part, name) for part in parts])[order]
            for name in ("bases", "positives", "negatives", "regions")
        )
        distances = np.concatenate([part.distances for part in parts])
        owners = np.concatenate(
            [place[part.owners] for part, place in zip(parts, places, strict=True)]
        )
        edges = np.argsort(distances, kind="stable")
        return cls(bases, positives, negatives, regions, distances[edges], owners[edges])

    def measures(self, weights: NDArray[np.int64] | None = None) -> dict[str, NDArray[np.float64]]:
        """Return float64[replicate] of each measure.

        Parameters
        ----------
        weights
            int64[replicate, block]: how often each block counts; once by default.
        """
        if weights is None:
            weights = np.ones((1, len(self.bases)), np.int64)
        tp, fp, fn, tn = (weights @ self.bases).T
        positives, negatives = weights @ self.positives, weights @ self.negatives
        true, _, hit, by_half, false = (weights @ self.regions).T
        bases = tp + fp + fn + tn
        return {
            "sensitivity": metrics.sensitivity(tp, fn),
            "precision": metrics.precision(tp, fp),
            "f1": metrics.f1_score(tp, fp, fn),
            "mcc": metrics.matthews_correlation(tp, fp, fn, tn),
            "roc_area": metrics.roc_area(positives, negatives),
            "pr_area": metrics.average_precision(positives, negatives),
            "brier": metrics.brier_score(positives, negatives, level_probabilities()),
            "regions_hit": metrics.sensitivity(hit, true - hit),
            "regions_hit_half": metrics.sensitivity(by_half, true - by_half),
            "false_per_mb": false * 1e6 / bases,
            "edge_median": self._quantiles(weights, 0.5),
            "edge_p90": self._quantiles(weights, 0.9),
        }

    def curve(self) -> metrics.Reliability:
        """Return the reliability curve of all blocks together."""
        return metrics.reliability(
            self.positives.sum(axis=0), self.negatives.sum(axis=0), level_probabilities()
        )

    def roc(self) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
        """Return false-positive rate, sensitivity and precision at each level as threshold."""
        called = [
            np.cumsum(counts.sum(axis=0)[::-1]).astype(np.float64)
            for counts in (self.positives, self.negatives)
        ]
        right, wrong = called
        return (
            wrong / max(wrong[-1], 1),
            right / max(right[-1], 1),
            metrics.precision(right, wrong),
        )

    def _quantiles(self, weights: NDArray[np.int64], share: float) -> NDArray[np.float64]:
        """Return the smallest distance that at least a share of the edges does not exceed."""
        if not len(self.distances):
            return np.full(len(weights), np.nan)
        result = np.full(len(weights), np.nan)
        for number, row in enumerate(weights):
            reached = np.cumsum(row[self.owners])
            if reached[-1]:
                at = int(np.searchsorted(reached, share * reached[-1], side="left"))
                result[number] = self.distances[at]
        return result
