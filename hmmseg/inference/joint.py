"""The joint probability of a sequence and one path, in its parts."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import ModelError
from hmmseg.kernels.elementary import log_array
from hmmseg.kernels.scan import log_trace_of_power
from hmmseg.kernels.tokens import base_codes
from hmmseg.model import Model
from hmmseg.model.contexts import code_dtype
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.sequence.contigs import Contig

__all__ = ["JointParts", "joint_parts"]

_CHUNK = 1 << 20


class JointParts(NamedTuple):
    """log P(sequence, path) in nats, in parts that add up to it.

    Attributes
    ----------
    start : float
        Of the first state; for a circle minus log trace(T**n), so that all paths and sequences
        of its length sum to 1.
    transitions : float
        Of all steps from state to state.
    emissions : float
        Of all bases given their states and contexts.
    """

    start: float
    transitions: float
    emissions: float

    @property
    def total(self) -> float:
        """Their sum."""
        return self.start + self.transitions + self.emissions


def joint_parts(model: Model, contig: Contig, path: NDArray[np.uint8]) -> JointParts:
    """Return the parts of log P(contig, path).

    Parameters
    ----------
    model
        The model, each state with one stage.
    contig
        The sequence.
    path
        uint8[position]: states.

    Returns
    -------
    JointParts
        Minus infinity where a part is impossible. For a symmetric model of order 1 or more the
        emissions are the mean of both strands; start and steps are those of the forward strand,
        whose sum is the same on both.

    Raises
    ------
    ModelError
        A state has several stages, between which a path of states does not tell.
    """
    if max(model.stages) > 1:
        raise ModelError(
            "a state of the model has several stages, between which a path of states does not "
            "tell; give a model with one stage for each state"
        )
    counts = np.zeros((model.states, model.states), np.int64)
    if contig.closed:
        counts[path[-1], path[0]] += 1
        start = -float(log_trace_of_power(model.transitions, len(contig)))
    else:
        start = float(log_array(model.start_probabilities[path[:1]])[0])
    for begin in range(0, len(path) - 1, _CHUNK):
        piece = path[begin : begin + _CHUNK + 1].astype(np.int64)
        steps = piece[:-1] * model.states + piece[1:]
        counts += np.bincount(steps, minlength=counts.size).reshape(counts.shape)
    emitted = _emissions(model, contig, contig.bases, path)
    if model.both_strands:
        mirrored = reverse_complement(contig.bases)
        emitted = (emitted + _emissions(model, contig, mirrored, path[::-1])) / 2
    return JointParts(start, _sum_of_logs(counts, model.transitions), emitted)


def _emissions(
    model: Model, contig: Contig, bases: NDArray[np.uint8], path: NDArray[np.uint8]
) -> float:
    """Return log P(bases | path) of one strand, from how often each state emits each code."""
    width = model.emissions.shape[1]
    counts = np.zeros((model.states, width), np.int64)
    for begin in range(0, len(bases), _CHUNK):
        stop = min(begin + _CHUNK, len(bases))
        codes = np.empty(stop - begin, code_dtype(model.order))
        base_codes(bases, model.order, contig.closed, begin, stop, codes)
        cells = path[begin:stop].astype(np.int64) * width + codes
        counts += np.bincount(cells, minlength=counts.size).reshape(counts.shape)
    return _sum_of_logs(counts, model.emissions)


def _sum_of_logs(counts: NDArray[np.int64], values: NDArray[np.float64]) -> float:
    used = counts > 0
    return float((counts[used] * log_array(values[used])).sum())
