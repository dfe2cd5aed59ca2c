"""One turn of a comparison: what comes of holding out one fold and training on the others."""

import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import HmmsegError
from hmmseg.evidence.heldout import fitted_hmm, hmm_bits
from hmmseg.evidence.pieces import Piece
from hmmseg.evidence.rivals import CLASSIFIER, HMM, call_hmm, call_windows, trained_pair
from hmmseg.evidence.tallies import BlockTally, Tally
from hmmseg.evidence.tuning import Tuned
from hmmseg.model import Model
from hmmseg.regions.calling import PATH
from hmmseg.training.labelled import half_counts, labelled_model
from hmmseg.training.restarts import Plan

__all__ = ["Measured", "Predicted", "Settings", "divided", "measured", "predicted"]


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
class Measured:
    """Both ways of calling, trained on labels and tested on the fold that was held out.

    Attributes
    ----------
    order : int
        Context length of both.
    tuned : Tuned
        Window and threshold of the classifier.
    tallies : mapping of str to Tally
        Of the pieces held out, by way of calling.
    seconds : mapping of str to float
        That calling took, by way of calling; empty where it is not known.
    """

    order: int
    tuned: Tuned
    tallies: Mapping[str, Tally]
    seconds: Mapping[str, float]


@dataclass(frozen=True, eq=False)
class Predicted:
    """HMMs fitted without labels, and how each predicts the fold that was held out.

    Attributes
    ----------
    models : list of Model
        By their order, from 0 up.
    bits : list of float64[piece]
        For each model -log2 probability of each piece held out.
    """

    models: list[Model]
    bits: list[NDArray[np.float64]]


def divided(
    pieces: Sequence[Piece], folds: NDArray[np.int64], fold: int
) -> tuple[list[Piece], list[Piece]]:
    """Return the pieces to train on, and those of one fold.

    ``folds`` is int64[piece]: the fold in which each piece is held out.
    """
    known, held = (np.flatnonzero(which).tolist() for which in (folds != fold, folds == fold))
    return [pieces[number] for number in known], [pieces[number] for number in held]


def measured(
    pieces: Sequence[Piece],
    folds: NDArray[np.int64],
    fold: int,
    order: int,
    settings: Settings,
    told: Callable[[int], None] = lambda _: None,
) -> Measured:
    """Train both ways of calling on the labels of all folds but one, and test them on that one.

    Parameters
    ----------
    pieces
        The sequence with its labels.
    folds
        int64[piece]: the fold in which each piece is held out.
    fold
        The one that is held out now.
    order
        Context length of both.
    settings
        How they are compared.
    told
        Called with the number of bases of each piece that is done.

    Raises
    ------
    LabelError
        What is trained on is of one class only; the message says which fold is held out.
    """
    known, held = divided(pieces, folds, fold)
    contigs, truth = [piece.contig for piece in known], [piece.truth for piece in known]
    symmetric, threads = settings.symmetric, settings.threads
    try:
        caller, tuned = trained_pair(known, truth, order, symmetric, threads)
        model = labelled_model(contigs, truth, order, symmetric, half_counts(order))
    except HmmsegError as error:
        raise type(error)(f"with fold {fold + 1} held out, {error}") from None
    ways = {
        HMM: partial(call_hmm, model, threads=threads, decoder=settings.decoder),
        CLASSIFIER: partial(call_windows, caller, scale=tuned.scale),
    }
    blocks: dict[str, list[BlockTally]] = {way: [] for way in ways}
    seconds = dict.fromkeys(ways, 0.0)
    for piece in held:
        for way, call in ways.items():
            begun = time.perf_counter()
            found = call(piece.contig)
            seconds[way] += time.perf_counter() - begun
            blocks[way].append(found.against(piece.truth, len(piece.contig)))
        told(len(piece.contig))
    tallies = {way: Tally.of(counts) for way, counts in blocks.items()}
    return Measured(order, tuned, tallies, seconds)


def predicted(
    pieces: Sequence[Piece],
    folds: NDArray[np.int64],
    fold: int,
    settings: Settings,
    told: Callable[[], None] = lambda: None,
) -> Predicted:
    """Fit an HMM of each order to all folds but one, and predict that one.

    Parameters
    ----------
    pieces
        The sequence.
    folds
        int64[piece]: the fold in which each piece is held out.
    fold
        The one that is held out now.
    settings
        How HMMs are fitted.
    told
        Called after each model.
    """
    known, held = divided(pieces, folds, fold)
    found = Predicted([], [])
    for order in range(settings.max_hmm_order + 1):
        model = fitted_hmm(known, settings.plan(order), settings.threads)
        found.models.append(model)
        found.bits.append(hmm_bits(held, model, settings.threads))
        told()
    return found
