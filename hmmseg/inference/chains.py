"""The probability of a sequence under a chain, with its start stated."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.kernels.elementary import log_array
from hmmseg.kernels.tokens import add_counts, base_codes
from hmmseg.model import Model
from hmmseg.model.chain import with_stationary_start
from hmmseg.model.contexts import code_dtype, missing_code
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.sequence.contigs import Contig

__all__ = ["STARTS", "ChainParts", "ChainScorer"]

STARTS = ("counted", "stationary", "free")
"""How a contig's first bases are counted: by the model's own words, which is how every model is
scored; by the chain's stationary distribution; or not at all, as given."""

_CHUNK = 1 << 22


class ChainParts(NamedTuple):
    """log P(contig) in nats, in two parts.

    Attributes
    ----------
    start : float
        Of the first bases, as many as the order; 0 for a circle, which has no start.
    steps : float
        Of all others, given the bases before them.
    """

    start: float
    steps: float


class ChainScorer:
    """Scores contigs under a chain.

    Parameters
    ----------
    model
        A model with one state.
    start
        One of :data:`STARTS`.

    Raises
    ------
    ModelError
        The model has several states, or no single stationary distribution.
    """

    def __init__(self, model: Model, start: str) -> None:
        self._model = model
        self._steps = log_array(model.emissions[0])
        own = model if start == "counted" else with_stationary_start(model)
        self._starts = log_array(own.emissions[0])
        if start == "free":
            self._starts = np.zeros_like(self._starts)

    def parts(self, contig: Contig) -> ChainParts:
        """Return the parts of a contig; the mean of both strands for a symmetric chain.

        A symmetric chain of order 0 has the same on both strands.
        """
        found = [self._of(contig, contig.bases)]
        if self._model.both_strands:
            found.append(self._of(contig, reverse_complement(contig.bases)))
        count = len(found)
        return ChainParts(
            sum(one.start for one in found) / count, sum(one.steps for one in found) / count
        )

    def _of(self, contig: Contig, bases: NDArray[np.uint8]) -> ChainParts:
        order = self._model.order
        first = 0 if contig.closed else min(order, len(bases))
        begun = self._sum(self._starts, contig, bases, 0, first)
        return ChainParts(begun, self._sum(self._steps, contig, bases, first, len(bases)))

    def _sum(
        self,
        logs: NDArray[np.float64],
        contig: Contig,
        bases: NDArray[np.uint8],
        begin: int,
        stop: int,
    ) -> float:
        order = self._model.order
        counts = np.zeros(missing_code(order) + 1, np.int64)
        for at in range(begin, stop, _CHUNK):
            codes = np.empty(min(_CHUNK, stop - at), code_dtype(order))
            base_codes(bases, order, contig.closed, at, at + len(codes), codes)
            add_counts(codes, counts)
        used = counts > 0
        return float((counts[used] * logs[used]).sum())
