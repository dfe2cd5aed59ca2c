"""Chains and a two-state model from labelled sequence, by counting."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import LabelError
from hmmseg.model import Model
from hmmseg.model.contexts import code_offset, missing_code
from hmmseg.model.parameters import STATIONARY
from hmmseg.sequence.alphabet import MISSING
from hmmseg.sequence.contigs import Contig
from hmmseg.training.chains import chain_of_words, code_counts

__all__ = [
    "BACKGROUND",
    "HALF_A_COUNT",
    "REGION",
    "half_counts",
    "labelled_chains",
    "labelled_model",
    "labelled_words",
]

REGION = "region"
BACKGROUND = "background"

HALF_A_COUNT = 0.5
"""What is added to each count where no word may be impossible (Krichevsky & Trofimov 1981, IEEE
Transactions on Information Theory 27: 199-207)."""

Intervals = NDArray[np.int64]


def half_counts(order: int) -> float:
    """Return the pseudo-count in all that adds half a count to each word."""
    return float(HALF_A_COUNT * 4 ** (order + 1))


def labelled_words(
    contigs: Sequence[Contig], truth: Sequence[Intervals], order: int
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return how often each word stands inside and outside of labelled regions.

    Only words that lie wholly on one side count.

    Parameters
    ----------
    contigs
        The sequence.
    truth
        int64[interval, 2] of each contig: its regions, sorted and apart.
    order
        Words have one base more.

    Returns
    -------
    tuple of float64[4**(order + 1)]
        Inside, outside.
    """
    parts = [np.zeros(4 ** (order + 1)) for _ in range(2)]
    for contig, intervals in zip(contigs, truth, strict=True):
        outside = contig.bases.copy()
        within = np.full_like(outside, MISSING)
        for start, end in intervals:
            outside[start:end] = MISSING
            within[start:end] = contig.bases[start:end]
        for side, bases in enumerate((within, outside)):
            counts = code_counts([replace(contig, bases=bases)], order)
            parts[side] += counts[code_offset(order) : missing_code(order)]
    return parts[0], parts[1]


def labelled_chains(
    contigs: Sequence[Contig],
    truth: Sequence[Intervals],
    order: int,
    symmetric: bool,
    pseudocount: float = 0.0,
) -> tuple[Model, Model]:
    """Return the chain of the labelled regions and the chain of all other sequence.

    Parameters
    ----------
    contigs
        The sequence.
    truth
        int64[interval, 2] of each contig: its regions, sorted and apart.
    order
        Context length in bases.
    symmetric
        Count every word on both strands.
    pseudocount
        Bases added to the counts of each chain in all.

    Raises
    ------
    LabelError
        Everything is labelled, or nothing.
    """
    within, outside = labelled_words(contigs, truth, order)
    unit = "known base" if order == 0 else f"stretch of {order + 1} known bases"
    for words, what in ((within, "inside"), (outside, "outside of")):
        if not words.any():
            raise LabelError(
                f"the labels leave one class only: no {unit} stands {what} the labelled regions; "
                "two chains need both, check the labels"
            )
    return (
        chain_of_words(within, order, symmetric, pseudocount, REGION, True),
        chain_of_words(outside, order, symmetric, pseudocount, BACKGROUND, False),
    )


def labelled_model(
    contigs: Sequence[Contig],
    truth: Sequence[Intervals],
    order: int,
    symmetric: bool,
    pseudocount: float = 0.0,
) -> Model:
    """Return the two-state model of labelled sequence.

    Its emissions are those of :func:`labelled_chains`; its transitions are counted, with half a
    count added to each change of state.

    Parameters
    ----------
    contigs
        The sequence.
    truth
        int64[interval, 2] of each contig: its regions, sorted and apart.
    order
        Context length in bases.
    symmetric
        Tie the emissions to both strands; transitions of two states are reversible anyway.
    pseudocount
        Bases added to the word counts of each state in all.

    Raises
    ------
    LabelError
        Everything is labelled, or nothing.
    """
    region, background = labelled_chains(contigs, truth, order, symmetric, pseudocount)
    changes = np.array([HALF_A_COUNT, HALF_A_COUNT])
    bases = np.zeros(2)
    for contig, intervals in zip(contigs, truth, strict=True):
        within = int((intervals[:, 1] - intervals[:, 0]).sum())
        bases += (len(contig) - within, within)
        changes += ((intervals[:, 0] > 0).sum(), (intervals[:, 1] < len(contig)).sum())
    leaving = changes / (bases + 1)
    return Model(
        names=(BACKGROUND, REGION),
        reported=(False, True),
        order=order,
        symmetric=symmetric,
        start_kind=STATIONARY,
        transitions=np.array([[1 - leaving[0], leaving[0]], [leaving[1], 1 - leaving[1]]]),
        joint=np.concatenate((background.joint, region.joint)),
    )
