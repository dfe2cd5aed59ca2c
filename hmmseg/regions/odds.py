"""Log-odds of every base between a state and the background."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from hmmseg.kernels.elementary import LN2, log_array
from hmmseg.kernels.tokens import base_codes
from hmmseg.model import Model
from hmmseg.model.contexts import code_dtype
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.sequence.contigs import Contig

__all__ = ["LogOdds", "rest_of"]

_MOST_BITS = 1000.0
"""Stands for infinity, so that sums stay numbers."""


def rest_of(model: Model, state: int) -> list[int]:
    """Return the states a region is told from: background, or all others where there is none."""
    others = [i for i in model.background if i != state]
    return others or [i for i in range(model.states) if i != state]


class LogOdds:
    """log2 P(base | context, state) / P(base | context, background).

    The background is the mixture of the states that are not reported, or of all other states
    where every state is reported, weighted by their stationary shares.

    Parameters
    ----------
    model
        The model.
    states
        The states whose log-odds are wanted.
    """

    def __init__(self, model: Model, states: Sequence[int]) -> None:
        self._model = model
        self.bits = np.array([self._against_background(state) for state in states])
        """float64[state, code], of the states asked for"""

    def _against_background(self, state: int) -> NDArray[np.float64]:
        model = self._model
        others = rest_of(model, state)
        if not others:
            return np.zeros(model.emissions.shape[1])
        shares = model.shares[others]
        shares = (
            shares / shares.sum() if shares.sum() > 0 else np.full(len(others), 1 / len(others))
        )
        background = (shares[:, None] * model.emissions[others]).sum(axis=0)
        with np.errstate(invalid="ignore"):
            bits = (log_array(model.emissions[state]) - log_array(background)) / LN2
        return np.clip(np.where(np.isnan(bits), 0.0, bits), -_MOST_BITS, _MOST_BITS)

    def window(self, contig: Contig, begin: int, stop: int) -> NDArray[np.float64]:
        """Return float64[state, position] bits of a stretch of a contig, of the states asked for.

        For a symmetric model of order 1 or more they are the mean of both strands.

        Parameters
        ----------
        contig
            The sequence.
        begin, stop
            Positions, half-open.
        """
        codes = self._codes(contig.bases, contig.closed, begin, stop)
        forward: NDArray[np.float64] = np.take(self.bits, codes, axis=1)
        if not self._model.both_strands:
            return forward
        length, order = len(contig), self._model.order
        # The reverse strand reads this stretch after the bases that follow it.
        reach = np.arange(begin, stop + order)
        reach = reach % length if contig.closed else reach[reach < length]
        bases = reverse_complement(contig.bases[reach])
        skipped = len(bases) - (stop - begin)
        codes = self._codes(bases, False, skipped, len(bases))
        forward += np.take(self.bits, codes, axis=1)[:, ::-1]
        forward /= 2
        return forward

    def _codes(
        self, bases: NDArray[np.uint8], closed: bool, begin: int, stop: int
    ) -> NDArray[np.unsignedinteger]:
        codes = np.empty(stop - begin, code_dtype(self._model.order))
        base_codes(bases, self._model.order, closed, begin, stop, codes)
        return codes
