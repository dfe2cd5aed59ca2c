"""Single contigs with logarithms, where scaled numbers would lose a value."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import SequenceError
from hmmseg.kernels.elementary import exp, log_array
from hmmseg.kernels.logspace import first_impossible, log_likelihood, log_pass
from hmmseg.kernels.scan import log_trace_of_power
from hmmseg.model.machine import Machine
from hmmseg.sequence.contigs import Contig

__all__ = ["ExactPass", "exact_pass", "impossible"]


class ExactPass(NamedTuple):
    """What is known of one contig.

    Attributes
    ----------
    log_likelihood : float
        In nats.
    start : float64[state]
        Posterior at the first base; zeros for a circle.
    transitions : float64[state, state]
        Expected counts.
    emissions : float64[state, code]
        Expected counts.
    posterior : float64[position, state]
        Of the positions that were asked for.
    """

    log_likelihood: float
    start: NDArray[np.float64]
    transitions: NDArray[np.float64]
    emissions: NDArray[np.float64]
    posterior: NDArray[np.float64]


def exact_pass(
    machine: Machine,
    contig: Contig,
    codes: NDArray[np.unsignedinteger],
    window: tuple[int, int] = (0, 0),
    reverse: bool = False,
) -> ExactPass:
    """Return likelihood, expected counts and posteriors of one contig.

    Parameters
    ----------
    machine
        The parameters.
    contig
        Names the record in an error.
    codes
        uint16[position] or uint32[position]: the contig's codes on the strand that is read.
    window
        Positions, half-open and on that strand, whose posteriors are wanted.
    reverse
        Whether the codes are those of the reverse strand.

    Raises
    ------
    SequenceError
        The sequence is impossible under the model; names the record and the position.
    """
    states = machine.states
    result = ExactPass(
        0.0,
        np.zeros(states),
        np.zeros((states, states)),
        np.zeros_like(machine.emissions),
        np.zeros((window[1] - window[0], states)),
    )
    head = np.zeros(states)
    if contig.closed:
        total = _circle(machine, codes, window, result, head)
    else:
        first = log_array(machine.start_probabilities * machine.emissions[:, codes[0]])
        total = log_likelihood(
            machine.transitions, machine.emissions, codes[1:], first, np.zeros(states)
        )
        if np.isfinite(total):
            log_pass(
                machine.transitions, machine.emissions, codes[1:], first, np.zeros(states), 1.0,
                window[0] - 1, window[1] - 1, result.posterior,
                result.transitions, result.emissions, head,
            )  # fmt: skip
            result.start[:] = head
            result.emissions[:, codes[0]] += head
            if window[0] == 0 < window[1]:
                result.posterior[0] = head
    if not np.isfinite(total):
        raise impossible(machine, contig, codes, reverse)
    return result._replace(log_likelihood=float(total))


def _circle(
    machine: Machine,
    codes: NDArray[np.unsignedinteger],
    window: tuple[int, int],
    result: ExactPass,
    head: NDArray[np.float64],
) -> float:
    """Add a pass for each state at the cut; return the circle's log-likelihood in nats."""
    ends = [np.where(np.arange(machine.states) == i, 0.0, -np.inf) for i in range(machine.states)]
    logs = [
        float(log_likelihood(machine.transitions, machine.emissions, codes, end, end))
        for end in ends
    ]
    best = max(logs)
    if best == -np.inf:
        return best
    weights = [exp(value - best) for value in logs]
    total = sum(weights)
    for weight, end in zip(weights, ends, strict=True):
        if weight > 0:
            log_pass(
                machine.transitions, machine.emissions, codes, end, end, weight / total, *window,
                result.posterior, result.transitions, result.emissions, head,
            )  # fmt: skip
    norm = log_trace_of_power(machine.transitions, len(codes))
    return best + float(log_array(np.array([total]))[0]) - float(norm)


def impossible(
    machine: Machine,
    contig: Contig,
    codes: NDArray[np.unsignedinteger],
    reverse: bool = False,
) -> SequenceError:
    """Return the error for a sequence that the model cannot have made.

    Parameters
    ----------
    machine, contig, codes, reverse
        As for :func:`exact_pass`.
    """
    if contig.closed:
        starts = [
            np.where(np.arange(machine.states) == i, 0.0, -np.inf) for i in range(machine.states)
        ]
        found = [first_impossible(machine.transitions, machine.emissions, codes, s) for s in starts]
        position = max(found)
        position = 0 if position == len(codes) else position
    else:
        first = log_array(machine.start_probabilities * machine.emissions[:, codes[0]])
        dead = first.max() == -np.inf
        rest = codes[1:]
        position = (
            0 if dead else 1 + first_impossible(machine.transitions, machine.emissions, rest, first)
        )
    at = len(codes) - 1 - position if reverse else position
    at = (contig.start + at) % contig.record_length
    return SequenceError(
        f"record {contig.record}, base {at + 1}: impossible under the model, which gives it "
        "probability 0; train with a pseudo-count, or use a model without zeros"
    )
