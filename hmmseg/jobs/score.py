"""The command ``score``: how well a model explains each record."""

from collections.abc import Iterator
from typing import NamedTuple

from hmmseg.inference.expectation import log_likelihoods
from hmmseg.inference.streams import Corpus
from hmmseg.jobs.sources import Sources
from hmmseg.kernels.elementary import LN2
from hmmseg.model import load_model

__all__ = ["RecordScore", "score"]


class RecordScore(NamedTuple):
    """One record's score.

    Attributes
    ----------
    record : str
        Its name.
    bases : int
        Known bases in its contigs.
    log_likelihood : float
        In nats, all contigs together.
    bits_per_base : float
        -log2 likelihood for each known base.
    """

    record: str
    bases: int
    log_likelihood: float
    bits_per_base: float


def score(sources: Sources, model_path: str, threads: int) -> Iterator[RecordScore]:
    """Yield the log-likelihood of each record under a model.

    Parameters
    ----------
    sources
        The sequence.
    model_path
        A model document; a chain is a model with one state.
    threads
        Threads to use; the result does not depend on it.
    """
    model = load_model(model_path)
    for record, contigs in sources.read_contigs():
        if contigs:
            corpus = Corpus(contigs, model.order, model.both_strands, threads)
            total = float(log_likelihoods(model, corpus, threads).sum())
            yield RecordScore(record.name, corpus.bases, total, -total / LN2 / corpus.bases)
