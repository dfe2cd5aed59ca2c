"""How surprising stretches of a contig are, beside how surprising they should be."""

from dataclasses import replace
from itertools import pairwise
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.exact import impossible
from hmmseg.inference.threads import in_threads
from hmmseg.kernels.surprise import log_table, surprise
from hmmseg.kernels.tokens import base_codes
from hmmseg.model import Model
from hmmseg.model.contexts import code_dtype
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.sequence.contigs import Contig

__all__ = ["Surprise", "surprise_of_pieces"]


class Surprise(NamedTuple):
    """Sums over the known bases of each piece.

    Attributes
    ----------
    excess : float64[piece]
        Of -ln p - H: p the probability of a base given all before it, H the entropy of what
        could have stood there. Its mean is 0 under the model.
    variance : float64[piece]
        Of the variance of -ln p, so that of ``excess`` under the model.
    known : int64[piece]
        Known bases.
    states : float64[piece, state]
        Of P(state | all bases so far).
    """

    excess: NDArray[np.float64]
    variance: NDArray[np.float64]
    known: NDArray[np.int64]
    states: NDArray[np.float64]


def surprise_of_pieces(
    model: Model, contig: Contig, edges: NDArray[np.int64], threads: int = 1
) -> Surprise:
    """Return the sums over the pieces of a contig.

    Parameters
    ----------
    model
        The model. For a symmetric one the sums are the means of both strands, each read in its
        own direction.
    contig
        The sequence; a circle is read from its first base to its last.
    edges
        int64[piece + 1]: from 0 to the contig's length.
    threads
        Threads to use; the result does not depend on it.

    Raises
    ------
    SequenceError
        The contig is impossible under the model.
    """
    ways = (False, True) if model.symmetric else (False,)
    sums = in_threads(lambda way: _strand(model, contig, edges, way), ways, threads)
    mean = sums[0] if len(sums) == 1 else (sums[0] + sums[1][::-1]) / 2
    return Surprise(
        mean[:, 0], mean[:, 1], mean[:, 2].astype(np.int64), model.machine.pooled(mean[:, 3:])
    )


def _strand(
    model: Model, contig: Contig, edges: NDArray[np.int64], reverse: bool
) -> NDArray[np.float64]:
    """Return float64[piece, sum] of one strand, in its own direction."""
    machine, length = model.machine, len(contig)
    bases = reverse_complement(contig.bases) if reverse else contig.bases
    cuts = length - edges[::-1] if reverse else edges
    sums = np.zeros((len(cuts) - 1, 3 + machine.states))
    forward, table = machine.start_probabilities.copy(), log_table()
    for row, (begin, stop) in zip(sums, pairwise(cuts.tolist()), strict=True):
        codes = np.empty(stop - begin, code_dtype(machine.order))
        base_codes(bases, machine.order, False, begin, stop, codes)
        possible = surprise(
            codes, machine.transitions, machine.emissions, begin > 0, forward, table, row
        )
        if not possible:
            whole = np.empty(length, code_dtype(machine.order))
            base_codes(bases, machine.order, False, 0, length, whole)
            raise impossible(machine, replace(contig, closed=False), whole, reverse)
    return sums
