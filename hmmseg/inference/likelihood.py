"""Log-likelihood of contigs."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.expectation import log_likelihoods
from hmmseg.inference.streams import Corpus
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig

__all__ = ["log_likelihood"]


def log_likelihood(
    model: Model, contigs: Sequence[Contig], threads: int = 1
) -> NDArray[np.float64]:
    """Return the log-likelihood of each contig.

    Parameters
    ----------
    model
        The model.
    contigs
        The sequence.
    threads
        Threads to use; the result does not depend on it.

    Returns
    -------
    float64[contig]
        log P(contig | model) in nats. For a circle, log trace of the product of all steps minus
        log trace(T**n). For a symmetric model of order 1 or more, the mean of both strands.

    Raises
    ------
    SequenceError
        A contig is impossible under the model.
    """
    corpus = Corpus(contigs, model.order, model.both_strands, threads)
    return log_likelihoods(model, corpus, threads)
