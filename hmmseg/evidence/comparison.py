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
    hmm_heldout,
    known_bases,
)
from hmmseg.evidence.pieces import Piece
from hmmseg.evidence.rivals import CLASSIFIER, HMM, Rivals, call_hmm, call_windows, trained_pair
from hmmseg.evidence.tallies import MEASURES, BlockTally, Tally
from hmmseg.evidence.tuning import Tuned
from hmmseg.evidence.verdicts import Verdict, verdict_on_bits, verdict_on_f1
from hmmseg.kernels.elementary import LN2, log
from hmmseg.model import Model
from hmmseg.model.dimension import free_parameters
from hmmseg.regions.calling import PATH
from hmmseg.training.labelled import half_counts, labelled_model
from hmmseg.training.restarts import Plan

__all__ = [
    "Accuracy",
    "Agreement",
    "Blind",
    "Settings",
    "accuracy",
    "best_labelled_order",
    "blind",
]


Told = Callable[[int], None]


@dataclass(frozen=True)
class Settings:
    """How the two are compared.

    Parameters
    ----------
    symmetric
        Whether both strands are treated alike.
    folds
        Sequence is held out in so many turns.
    replicates
        Bootstrap replicates.
    seed
        Of all random draws.
    threads
        Threads to use; only times depend on it.
    max_order
        Highest order of chains.
    max_hmm_order
        Highest order of HMMs.
    states, restarts, max_iterations, tolerance
        Of the HMMs that are fitted without labels.
    decoder
        Of the HMM.
    """

    symmetric: bool = True
    folds: int = 5
    replicates: int = 1000
    seed: int = 1
    threads: int = 1
    max_order: int = 8
    max_hmm_order: int = 3
    states: int = 2
    restarts: int = 3
    max_iterations: int = 100
    tolerance: float = 1e-6
    decoder: str = PATH

    def plan(self, order: int) -> Plan:
        """Return how an HMM of one order is fitted."""
        return Plan(
            states=self.states,
            order=order,
            symmetric=self.symmetric,
            restarts=self.restarts,
            seed=self.seed,
            max_iterations=self.max_iterations,
            tolerance=self.tolerance,
            pseudocount=half_counts(order),
        )


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
        By way of calling.
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
        models = []
        for fold in range(int(folds.max()) + 1):
            known = [pieces[i] for i in np.flatnonzero(folds != fold).tolist()]
            models.append(
                labelled_model(
                    [piece.contig for piece in known],
                    [piece.truth for piece in known],
                    order,
                    settings.symmetric,
                    half_counts(order),
                )
            )
        found = hmm_heldout(pieces, folds, models, 0, settings.threads)
        totals.append(float(found.bits.sum()))
    return int(np.argmin(totals))


def accuracy(
    pieces: Sequence[Piece],
    folds: NDArray[np.int64],
    order: int,
    settings: Settings,
    told: Told = lambda _: None,
) -> Accuracy:
    """Train and test both ways of calling in folds, and measure them against the labels.

    Parameters
    ----------
    pieces
        The sequence with its labels.
    folds
        int64[piece]: the fold in which each piece is held out.
    order
        Context length of both.
    settings
        How they are compared.
    told
        Called with the number of bases of each piece that is done.

    Raises
    ------
    LabelError
        A fold's training part is of one class only.
    """
    rivals = Rivals(pieces, folds, order, settings.symmetric, settings.threads, settings.decoder)
    tallies = rivals.run(told)
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
        order=order,
        bases=bases,
        true_regions=int(tallies[HMM].regions[:, 0].sum()),
        measures=measures,
        tuned=rivals.tuned,
        tallies=tallies,
        seconds_per_mb={way: took * 1e6 / bases for way, took in rivals.seconds.items()},
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
    settings
        How they are compared.
    told
        Called with the name of each kind of model that is done.
    """
    kinds = []
    for order in range(settings.max_order + 1):
        kinds.append(chain_heldout(pieces, folds, order, settings.symmetric))
        told(kinds[-1].name)
    fitted = {}
    for order in range(settings.max_hmm_order + 1):
        plan = settings.plan(order)
        models = []
        for fold in range(int(folds.max()) + 1):
            known = [pieces[i] for i in np.flatnonzero(folds != fold).tolist()]
            models.append(fitted_hmm(known, plan, settings.threads))
        parameters = free_parameters(models[0])
        kinds.append(hmm_heldout(pieces, folds, models, parameters, settings.threads))
        fitted[order] = models
        told(kinds[-1].name)
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
        agreement=_agreement(pieces, folds, fitted[hmm.order], settings),
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
        known = [pieces[i] for i in np.flatnonzero(folds != fold).tolist()]
        calls = [call_hmm(model, piece.contig, threads, decoder).intervals for piece in known]
        try:
            caller, tuned = trained_pair(known, calls, model.order, settings.symmetric, threads)
        except HmmsegError:
            return None
        for number in np.flatnonzero(folds == fold).tolist():
            contig = pieces[number].contig
            theirs = call_hmm(model, contig, threads, decoder).intervals
            blocks.append(call_windows(caller, contig, tuned.scale).against(theirs, len(contig)))
    tally = Tally(blocks)
    both, classifier_only, hmm_only, _ = tally.bases.sum(axis=0).tolist()
    called = both + classifier_only + hmm_only
    return Agreement(
        both,
        hmm_only,
        classifier_only,
        float(tally.measures()["mcc"][0]),
        both / called if called else float("nan"),
    )
