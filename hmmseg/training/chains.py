"""Markov chains by counting: one pass, no iteration."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import TrainingError
from hmmseg.kernels.elementary import log_array
from hmmseg.kernels.tokens import add_counts, base_codes
from hmmseg.model import Model
from hmmseg.model.contexts import (
    code_count,
    code_dtype,
    code_offset,
    missing_code,
    reverse_complement_words,
)
from hmmseg.model.parameters import STATIONARY
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.sequence.contigs import Contig
from hmmseg.training.baum_welch import Fit
from hmmseg.training.constraints import Prior
from hmmseg.training.maximisation import log_prior

__all__ = ["chain_of_words", "code_counts", "fit_chain", "log_probability_of_counts"]

_CHUNK = 1 << 22


def code_counts(contigs: Sequence[Contig], order: int, reverse: bool = False) -> NDArray[np.int64]:
    """Return int64[code]: how often each code stands in contigs, on one of their strands."""
    counts = np.zeros(code_count(order), np.int64)
    for contig in contigs:
        bases = reverse_complement(contig.bases) if reverse else contig.bases
        for begin in range(0, len(contig), _CHUNK):
            stop = min(begin + _CHUNK, len(contig))
            codes = np.empty(stop - begin, code_dtype(order))
            base_codes(bases, order, contig.closed, begin, stop, codes)
            add_counts(codes, counts)
    return counts


def chain_of_words(
    words: NDArray[np.float64],
    order: int,
    symmetric: bool,
    pseudocount: float = 0.0,
    name: str = "chain",
    reported: bool = False,
) -> Model:
    """Return the chain with the maximum-likelihood probabilities of counted words.

    Parameters
    ----------
    words
        float64[4**(order + 1)]: counts of words of ``order + 1`` bases.
    order
        Context length in bases.
    symmetric
        Count every word on both strands.
    pseudocount
        Bases added to the counts in all, spread evenly over the words.
    name, reported
        Of the chain's only state.

    Raises
    ------
    TrainingError
        No word was counted.
    """
    counts = words + pseudocount / words.size
    if symmetric:
        counts = (counts + counts[reverse_complement_words(order + 1)]) / 2
    total = counts.sum()
    if total == 0:
        raise TrainingError(
            f"there is no stretch of {order + 1} known bases to count; lower the order or check "
            "the selection of records"
        )
    return Model(
        names=(name,),
        reported=(reported,),
        order=order,
        symmetric=symmetric,
        start_kind=STATIONARY,
        transitions=np.ones((1, 1)),
        joint=(counts / total)[None, :],
    )


def log_probability_of_counts(model: Model, counts: NDArray[np.int64]) -> float:
    """Return the log-probability in nats of sequence with these int64[code] counts."""
    seen = np.flatnonzero(counts[:-1])
    return float((counts[seen] * log_array(model.emissions[0, seen])).sum())


def fit_chain(
    contigs: Sequence[Contig], order: int, symmetric: bool, pseudocount: float = 0.0
) -> Fit:
    """Return the chain that one counting pass gives, as training reports it.

    The closed form is exact for bases whose whole context is known, that is for all but the
    first bases of a contig and those behind missing ones; these take the marginals of the same
    words. Where such a base would be impossible, because its word never stands behind another
    base, its count goes in equal parts to all words that end in it.

    Parameters
    ----------
    contigs
        The sequence.
    order
        Context length in bases.
    symmetric
        Count every word on both strands.
    pseudocount
        As of :meth:`~hmmseg.training.constraints.Prior.even`.

    Raises
    ------
    TrainingError
        There is no word of ``order + 1`` known bases.

    References
    ----------
    Anderson & Goodman 1957, Annals of Mathematical Statistics 28: 89-110.
    """
    strands = [code_counts(contigs, order)]
    if symmetric and order > 0:
        strands.append(code_counts(contigs, order, reverse=True))
    words = strands[0][code_offset(order) : missing_code(order)].astype(np.float64)
    model = chain_of_words(words, order, symmetric, pseudocount)
    while _give_beginnings(words, order, strands, model):
        model = chain_of_words(words, order, symmetric, pseudocount)
    logs = [log_probability_of_counts(model, counts) for counts in strands]
    reached = sum(logs) / len(logs)
    return Fit(
        model=model,
        trace=(reached,),
        objective=reached + log_prior(model, Prior.even(model, pseudocount)),
        converged=True,
        bases=int(strands[0][:-1].sum()),
    )


def _give_beginnings(
    words: NDArray[np.float64], order: int, strands: Sequence[NDArray[np.int64]], model: Model
) -> bool:
    """Count words that only stand at beginnings, behind any base; tell whether there were any."""
    found = False
    for counts in strands:
        for length in range(order):
            codes = slice(code_offset(length), code_offset(length + 1))
            impossible = np.flatnonzero((counts[codes] > 0) & (model.emissions[0, codes] == 0))
            ending = words.reshape(-1, 4 ** (length + 1))
            ending[:, impossible] += counts[codes][impossible] / len(ending)
            found = found or len(impossible) > 0
    return found
