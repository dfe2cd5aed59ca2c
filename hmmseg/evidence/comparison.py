"""The hidden Markov model and the chain on the same held-out sequence."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import HmmsegError
from hmmseg.evidence.bootstrap import Interval, interval_of, resampled
from hmmseg.evidence.heldout import (
    HeldOut,
    chain_heldout,
    fitted_hmm,
    hmm_bits,
    hmm_heldout,
    in_place,
    known_bases,
)
from hmmseg.evidence.pieces import Piece
from hmmseg.evidence.rivals import CLASSIFIER, HMM, call_hmm, call_windows, trained_pair
from hmmseg.evidence.tallies import MEASURES, BlockTally, Tally
from hmmseg.evidence.tuning import Tuned
from hmmseg.evidence.turns import Measured, Predicted, Settings, divided
from hmmseg.evidence.verdicts import Verdict, verdict_on_bits, verdict_on_f1
from hmmseg.kernels.elementary import LN2, log
from hmmseg.model import Model
from hmmseg.training.labelled import half_counts, labelled_model

__all__ = [
    "Accuracy",
    "Agreement",
    "Blind",
    "accuracy",
    "best_labelled_order",
    "blind",
]


@dataclass(frozen=True, eq=False)
class Accuracy:
    """Both ways of calling, measured against a truth.

    Attributes
    ----------
    order : int
        Context length of both.
    bases, true_regions : int
        What was held out, in all turns together.
    measures : mapping of str to three Interval
        For each measure the HMM's, the classifier's, and the paired difference.
    tuned : list of Tuned
        Window and threshold of the classifier in each turn.
    tallies : mapping of str to Tally
        By way of calling.
    seconds_per_mb : mapping of str to float
        By way of calling; empty where it is not known.
    verdict : Verdict
        In words.
    """

    order: int
    bases: int
    true_regions: int
    measures: dict[str, tuple[Interval, Interval, Interval]]
    tuned: list[Tuned]
    tallies: dict[str, Tally]
    seconds_per_mb: dict[str, float]
    verdict: Verdict


def best_labelled_order(
    pieces: Sequence[Piece], folds: NDArray[np.int64], settings: Settings
) -> int:
    """Return the order at which a two-state model from labels best predicts held-out sequence.

    Parameters
    ----------
    pieces
        The sequence with its labels.
    folds
        int64[piece]: the fold in which each piece is held out.
    settings
        Highest order, strands and threads.
    """
    totals = []
    for order in range(settings.max_hmm_order + 1):
        bits = []
        for fold in range(int(folds.max()) + 1):
            known, held = divided(pieces, folds, fold)
            model = labelled_model(
                [piece.contig for piece in known],
                [piece.truth for piece in known],
                order,
                settings.symmetric,
                half_counts(order),
            )
            bits.append(hmm_bits(held, model, settings.threads))
        totals.append(float(in_place(folds, bits).sum()))
    return int(np.argmin(totals))


def accuracy(
    pieces: Sequence[Piece], folds: NDArray[np.int64], turns: Sequence[Measured], settings: Settings
) -> Accuracy:
    """Measure both ways of calling against the labels, from what each turn has counted.

    Parameters
    ----------
    pieces
        The sequence with its labels.
    folds
        int64[piece]: the fold in which each piece is held out.
    turns
        One for each fold, all of the same order.
    settings
        How they are compared.
    """
    places = [np.flatnonzero(folds == fold) for fold in range(len(turns))]
    tallies = {
        way: Tally.together([turn.tallies[way] for turn in turns], places)
        for way in (HMM, CLASSIFIER)
    }
    weights = resampled(len(pieces), settings.replicates, settings.seed)
    whole = {way: tally.measures() for way, tally in tallies.items()}
    drawn = {way: tally.measures(weights) for way, tally in tallies.items()}
    measures = {}
    for name in MEASURES:
        values = [float(whole[way][name][0]) for way in (HMM, CLASSIFIER)]
        replicates = [drawn[way][name] for way in (HMM, CLASSIFIER)]
        measures[name] = (
            interval_of(values[0], replicates[0]),
            interval_of(values[1], replicates[1]),
            # The same blocks are drawn for both, so the difference is a paired one.
            interval_of(values[0] - values[1], replicates[0] - replicates[1]),
        )
    bases = sum(len(piece.contig) for piece in pieces)
    hmm, classifier, difference = measures["f1"]
    return Accuracy(
        order=turns[0].order,
        bases=bases,
        true_regions=int(tallies[HMM].regions[:, 0].sum()),
        measures=measures,
        tuned=[turn.tuned for turn in turns],
        tallies=tallies,
        seconds_per_mb={
            way: sum(turn.seconds[way] for turn in turns) * 1e6 / bases for way in turns[0].seconds
        },
        verdict=verdict_on_f1(difference, hmm.value, classifier.value),
    )


@dataclass(frozen=True, eq=False)
class Agreement:
    """How far two sets of calls are the same.

    Attributes
    ----------
    both, hmm_only, classifier_only : int
        Bases called.
    mcc, jaccard : float
        Correlation of the two, and bases called by both of all called.
    """

    both: int
    hmm_only: int
    classifier_only: int
    mcc: float
    jaccard: float


@dataclass(frozen=True, eq=False)
class Blind:
    """What can be said without labels.

    Attributes
    ----------
    rows : list of (HeldOut, Interval)
        Every model with its bits per held-out base.
    best_chain, best_hmm : HeldOut
        Those with the fewest bits.
    gain : Interval
        Bits per base that the best HMM saves.
    agreement : Agreement or None
        Of calls on held-out sequence; None if the HMM calls nothing, or everything.
    model : Model
        The best kind of HMM, fitted to all sequence.
    verdict : Verdict
        In words.
    """

    rows: list[tuple[HeldOut, Interval]]
    best_chain: HeldOut
    best_hmm: HeldOut
    gain: Interval
    agreement: Agreement | None
    model: Model
    verdict: Verdict


def blind(
    pieces: Sequence[Piece],
    folds: NDArray[np.int64],
    turns: Sequence[Predicted],
    settings: Settings,
    told: Callable[[str], None] = lambda _: None,
) -> Blind:
    """Compare chains and HMMs on sequence without labels.

    Parameters
    ----------
    pieces
        The sequence.
    folds
        int64[piece]: the fold in which each piece is held out.
    turns
        One for each fold: HMMs that have not seen it.
    settings
        How they are compared.
    told
        Called with the name of each kind of chain that is done.
    """
    kinds = []
    for order in range(settings.max_order + 1):
        kinds.append(chain_heldout(pieces, folds, order, settings.symmetric))
        told(kinds[-1].name)
    for order, model in enumerate(turns[0].models):
        kinds.append(hmm_heldout(model, in_place(folds, [turn.bits[order] for turn in turns])))
    bases = known_bases(pieces)
    weights = resampled(len(pieces), settings.replicates, settings.seed)
    rows = [(kind, _per_base(kind.bits, bases, weights)) for kind in kinds]
    chain = min((k for k in kinds if k.states == 1), key=lambda k: float(k.bits.sum()))
    hmm = min((k for k in kinds if k.states > 1), key=lambda k: float(k.bits.sum()))
    gain = _per_base(chain.bits - hmm.bits, bases, weights)
    total = int(bases.sum())
    cost = float(log(float(total))) / LN2 / 2 / total
    price = (hmm.parameters - chain.parameters) * cost
    return Blind(
        rows=rows,
        best_chain=chain,
        best_hmm=hmm,
        gain=gain,
        agreement=_agreement(pieces, folds, [turn.models[hmm.order] for turn in turns], settings),
        model=fitted_hmm(pieces, settings.plan(hmm.order), settings.threads),
        verdict=verdict_on_bits(gain, price, chain.name, hmm.name),
    )


def _per_base(
    bits: NDArray[np.float64], bases: NDArray[np.int64], weights: NDArray[np.int64]
) -> Interval:
    """Return bits per base of pieces, with its bootstrap interval."""
    drawn = np.array([float((row * bits).sum()) / float((row * bases).sum()) for row in weights])
    return interval_of(float(bits.sum()) / float(bases.sum()), drawn)


def _agreement(
    pieces: Sequence[Piece], folds: NDArray[np.int64], models: Sequence[Model], settings: Settings
) -> Agreement | None:
    """Compare calls on held-out pieces; the chains are counted in the HMM's calls on the rest."""
    blocks: list[BlockTally] = []
    threads, decoder = settings.threads, settings.decoder
    for fold, model in enumerate(models):
        known, held = divided(pieces, folds, fold)
        calls = [call_hmm(model, piece.contig, threads, decoder).intervals for piece in known]
        try:
            caller, tuned = trained_pair(known, calls, model.order, settings.symmetric, threads)
        except HmmsegError:
            return None
        for contig in (piece.contig for piece in held):
            theirs = call_hmm(model, contig, threads, decoder).intervals
            blocks.append(call_windows(caller, contig, tuned.scale).against(theirs, len(contig)))
    tally = Tally.of(blocks)
    both, classifier_only, hmm_only, _ = tally.bases.sum(axis=0).tolist()
    called = both + classifier_only + hmm_only
    return Agreement(
        both,
        hmm_only,
        classifier_only,
        float(tally.measures()["mcc"][0]),
        both / called if called else float("nan"),
    )
