"""Whether posteriors mean what they say, on sequence whose path is known: drawn from the model.

This takes the model for true. It shows what the posteriors are worth if the genome is as the
model has it, and nothing about whether it is.
"""

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from hmmseg.evidence import metrics
from hmmseg.inference.posterior import posterior_windows
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig

__all__ = [
    "THRESHOLDS",
    "Called",
    "StateReliability",
    "called_table",
    "curve_table",
    "drawn_lengths",
    "reliability_of_states",
    "statement",
]

THRESHOLDS = (0.5, 0.6, 0.7, 0.8, 0.9, 0.95, 0.99)
"""Posteriors above which bases count as called."""

FEWEST_BASES, MOST_BASES = 5_000_000, 10_000_000
"""Drawn in all: as much as the assembly has, within these bounds."""

_BINS = 10
_LEVELS = 1 << 16
"""Posteriors are counted in so many steps, so that all sums are of integers."""


class Called(NamedTuple):
    """Bases whose posterior is above a threshold.

    Attributes
    ----------
    threshold : float
    bases : int
        How many there are.
    nominal, observed : float
        Share of them that is wrong, as the posteriors say and in truth; NaN without any.
    """

    threshold: float
    bases: int
    nominal: float
    observed: float


@dataclass(frozen=True, eq=False)
class StateReliability:
    """How far the posterior of one state can be trusted.

    Attributes
    ----------
    state : str
        Its name.
    bases : int
        Drawn and decoded.
    brier : float
        Mean squared difference between posterior and truth.
    curve : metrics.Reliability
        In bins of the posterior.
    called : tuple of Called
        At each of the thresholds.
    """

    state: str
    bases: int
    brier: float
    curve: metrics.Reliability
    called: tuple[Called, ...]


def drawn_lengths(lengths: Sequence[int], seed: int) -> list[int]:
    """Return lengths to draw: those of the assembly's contigs, within bounds in all.

    Short assemblies are drawn several times. Of long ones, contigs are taken by chance until
    there are enough, the last one cut.

    Parameters
    ----------
    lengths
        Of the contigs, in bases.
    seed
        Of the choice.
    """
    total = sum(lengths)
    if total <= MOST_BASES:
        return list(lengths) * max(math.ceil(FEWEST_BASES / total), 1)
    random = np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, len(lengths)])))
    chosen: list[int] = []
    left = MOST_BASES
    for number in np.argsort(random.random(len(lengths)), kind="stable").tolist():
        chosen.append(min(lengths[number], left))
        left -= chosen[-1]
        if left == 0:
            break
    return chosen


def reliability_of_states(
    model: Model,
    drawn: Iterable[tuple[NDArray[np.uint8], NDArray[np.uint8]]],
    threads: int = 1,
) -> list[StateReliability]:
    """Decode sequence whose path is known; compare.

    Parameters
    ----------
    model
        The model, which drew the sequence.
    drawn
        Bases and path, uint8[position], of each contig.
    threads
        Threads to use; the result does not depend on it.

    References
    ----------
    DeGroot & Fienberg 1983, The Statistician 32: 12-22 (reliability curves).
    """
    states = [i for i, reported in enumerate(model.reported) if reported]
    counts = np.zeros((len(states), 2, _LEVELS + 1), np.int64)
    total = 0
    for bases, path in drawn:
        total += len(bases)
        contig = Contig("drawn", 0, bases, False, len(bases))
        for begin, posterior in posterior_windows(model, contig, threads):
            truth = path[begin : begin + len(posterior)]
            for row, state in zip(counts, states, strict=True):
                levels = np.rint(posterior[:, state] * _LEVELS).astype(np.int64)
                for wrong, same in enumerate((truth == state, truth != state)):
                    row[wrong] += np.bincount(levels[same], minlength=_LEVELS + 1)
    said = np.arange(_LEVELS + 1) / _LEVELS
    return [
        StateReliability(
            model.names[state],
            total,
            float(metrics.brier_score(right, wrong, said)),
            metrics.reliability(right, wrong, said, _BINS),
            tuple(_called(threshold, right, wrong) for threshold in THRESHOLDS),
        )
        for state, (right, wrong) in zip(states, counts, strict=True)
    ]


def _called(threshold: float, right: NDArray[np.int64], wrong: NDArray[np.int64]) -> Called:
    above = np.arange(_LEVELS + 1) > threshold * _LEVELS
    both = (right + wrong)[above]
    bases = int(both.sum())
    if not bases:
        return Called(threshold, 0, math.nan, math.nan)
    doubt = int((both * (_LEVELS - np.arange(_LEVELS + 1))[above]).sum())
    return Called(threshold, bases, doubt / _LEVELS / bases, int(wrong[above].sum()) / bases)


def curve_table(found: Sequence[StateReliability]) -> pd.DataFrame:
    """Return the reliability curves, one row for each bin that has bases."""
    return pd.DataFrame(
        [
            (one.state, number / _BINS, (number + 1) / _BINS, bases, said, seen)
            for one in found
            for said, seen, bases, number in zip(*one.curve, strict=True)
        ],
        columns=["state", "low", "high", "bases", "mean_posterior", "observed_fraction"],
    )


def called_table(found: Sequence[StateReliability]) -> pd.DataFrame:
    """Return nominal and observed false discovery rates, one row for each threshold."""
    return pd.DataFrame(
        [
            (one.state, at.threshold, at.bases, at.nominal, at.observed)
            for one in found
            for at in one.called
        ],
        columns=["state", "threshold", "bases", "nominal_fdr", "observed_fdr"],
    )


def statement(found: Sequence[StateReliability]) -> str:
    """Return in words what the posteriors promise, what is true, and what that does not show."""
    if not found:
        return "The model reports no state."
    lines = []
    for one in found:
        half = one.called[0]
        if half.bases == 0:
            lines.append(f"no base is called {one.state} there")
            continue
        lines.append(
            f"{100 * half.observed:.1f} % of the bases called {one.state} (posterior above "
            f"{half.threshold}) are wrong where the posteriors promise "
            f"{100 * half.nominal:.1f} %, with a Brier score of {one.brier:.2g}"
        )
    return (
        f"On {found[0].bases / 1e6:.1f} Mb drawn from the model, {'; '.join(lines)}. This shows "
        "what the posteriors are worth if the model is true, not whether the genome is as the "
        "model has it."
    )
