"""Bits per base of sequence that a model has not seen: chains and HMMs of every order.

All models add half a count to each word, so that none finds a word impossible.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hmmseg.evidence.pieces import Piece
from hmmseg.inference.expectation import log_likelihoods
from hmmseg.inference.streams import Corpus
from hmmseg.kernels.elementary import LN2, log
from hmmseg.model import Model
from hmmseg.model.contexts import code_offset, missing_code
from hmmseg.model.dimension import chain_parameters, free_parameters
from hmmseg.sequence.alphabet import count_known
from hmmseg.training.chains import chain_of_words, code_counts, fit_chain, log_probability_of_counts
from hmmseg.training.labelled import half_counts
from hmmseg.training.restarts import Plan, fit_restarts

__all__ = [
    "HeldOut",
    "OrderRow",
    "chain_heldout",
    "fitted_hmm",
    "hmm_bits",
    "hmm_heldout",
    "in_place",
    "known_bases",
    "order_rows",
]

Fitter = Callable[[Sequence[Piece]], Model]


@dataclass(frozen=True, eq=False)
class HeldOut:
    """How one kind of model did on pieces that it had not seen.

    Attributes
    ----------
    name : str
        Such as ``chain of order 3``.
    states, order, parameters : int
    bits : float64[piece]
        -log2 probability of each piece.
    """

    name: str
    states: int
    order: int
    parameters: int
    bits: NDArray[np.float64]


def known_bases(pieces: Sequence[Piece]) -> NDArray[np.int64]:
    """Return int64[piece]: how many bases are not missing."""
    return np.array([count_known(p.contig.bases) for p in pieces])


def chain_heldout(
    pieces: Sequence[Piece], folds: NDArray[np.int64], order: int, symmetric: bool
) -> HeldOut:
    """Return how chains of one order predict pieces from those of the other folds.

    Parameters
    ----------
    pieces
        The sequence.
    folds
        int64[piece]: the fold in which each is held out.
    order
        Context length in bases.
    symmetric
        Tie words to their reverse complement.
    """
    strands = 2 if symmetric and order > 0 else 1
    inside = slice(code_offset(order), missing_code(order))
    sums = np.zeros((folds.max() + 1, 4 ** (order + 1)))
    for piece, fold in zip(pieces, folds, strict=True):
        sums[fold] += code_counts([piece.contig], order)[inside]
    total = sums.sum(axis=0)
    chains = [chain_of_words(total - own, order, symmetric, half_counts(order)) for own in sums]
    bits = np.zeros(len(pieces))
    for number, (piece, fold) in enumerate(zip(pieces, folds, strict=True)):
        for reverse in (False, True)[:strands]:
            counts = code_counts([piece.contig], order, reverse)
            bits[number] -= log_probability_of_counts(chains[fold], counts) / LN2 / strands
    parameters = chain_parameters(order, symmetric)
    return HeldOut(f"chain of order {order}", 1, order, parameters, bits)


def fitted_hmm(pieces: Sequence[Piece], plan: Plan, threads: int) -> Model:
    """Return the model that a plan gives on pieces."""
    contigs = [piece.contig for piece in pieces]
    corpus = Corpus(contigs, plan.order, plan.symmetric and plan.order > 0, threads)
    return fit_restarts(plan, corpus, threads).model


def hmm_bits(pieces: Sequence[Piece], model: Model, threads: int) -> NDArray[np.float64]:
    """Return float64[piece]: -log2 probability of pieces that the model was not fitted to."""
    corpus = Corpus([piece.contig for piece in pieces], model.order, model.both_strands, threads)
    return -log_likelihoods(model, corpus, threads) / LN2


def in_place(folds: NDArray[np.int64], parts: Sequence[NDArray[np.float64]]) -> NDArray[np.float64]:
    """Return float64[piece] from the values of each fold's pieces.

    ``folds`` is int64[piece]: the fold of each.
    """
    values = np.zeros(len(folds))
    for fold, part in enumerate(parts):
        values[folds == fold] = part
    return values


def hmm_heldout(model: Model, bits: NDArray[np.float64]) -> HeldOut:
    """Return how models of one kind predict the pieces that each was not fitted to.

    Parameters
    ----------
    model
        One of them.
    bits
        float64[piece]: -log2 probability of each piece.
    """
    name = f"HMM of {model.states} states and order {model.order}"
    return HeldOut(name, model.states, model.order, free_parameters(model), bits)


@dataclass(frozen=True)
class OrderRow:
    """What is known of chains of one order.

    Attributes
    ----------
    order, parameters : int
    log_likelihood : float
        Of the maximum-likelihood chain on all sequence, in nats.
    bits_per_base : float
        The same for each known base.
    bic : float
        -2 log-likelihood + parameters x ln(bases).
    heldout_bits_per_base : float
        Of the pieces under chains that had not seen them.
    """

    order: int
    parameters: int
    log_likelihood: float
    bits_per_base: float
    bic: float
    heldout_bits_per_base: float


def order_rows(
    pieces: Sequence[Piece],
    folds: NDArray[np.int64],
    max_order: int,
    symmetric: bool,
) -> list[OrderRow]:
    """Return a row for each order from 0 up.

    Parameters
    ----------
    pieces
        The sequence.
    folds
        int64[piece]: the fold in which each is held out.
    max_order
        The highest order.
    symmetric
        Tie words to their reverse complement.

    References
    ----------
    Schwarz 1978, Annals of Statistics 6: 461-464; for the order of a Markov chain: Katz 1981,
    Technometrics 23: 243-249.
    """
    contigs = [piece.contig for piece in pieces]
    bases = int(known_bases(pieces).sum())
    rows = []
    for order in range(max_order + 1):
        fit = fit_chain(contigs, order, symmetric)
        parameters = chain_parameters(order, symmetric)
        heldout = chain_heldout(pieces, folds, order, symmetric)
        rows.append(
            OrderRow(
                order=order,
                parameters=parameters,
                log_likelihood=fit.log_likelihood,
                bits_per_base=fit.bits_per_base,
                bic=-2 * fit.log_likelihood + parameters * float(log(float(bases))),
                heldout_bits_per_base=float(heldout.bits.sum()) / bases,
            )
        )
    return rows
