"""The maximisation step: from expected counts to better parameters, never worse ones.

With a stationary start, circles, back-off tables or two strands, the parameters that maximise
the expected complete log-likelihood have no closed form. The step therefore aims at the
closed form of the nearest simple case and goes back towards the old parameters (halving the
way, word tables in joint space) until that expectation does not fall. It needs the counts only.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.expectation import Counts
from hmmseg.kernels.elementary import log_array
from hmmseg.kernels.scan import log_trace_of_power
from hmmseg.model import Model
from hmmseg.model.contexts import (
    backed_off_emissions,
    code_offset,
    missing_code,
    reverse_complement_words,
)
from hmmseg.model.parameters import FREE
from hmmseg.model.stationary import closed_classes, stationary_distribution

__all__ = ["Prior", "log_prior", "maximise"]

_HALVINGS = 40
_NEGLIGIBLE = 1e-60
"""An expected count below this changes the likelihood by less than rounding does. Transitions and
emissions drop it, so that parameters that vanish do not slow down everything else; a start
keeps as much, because what seems impossible at first may be the best start in the end."""


@dataclass(frozen=True)
class Prior:
    """Dirichlet pseudo-counts.

    Parameters
    ----------
    emission
        Pseudo-counts of each state's word table in all, in single-strand bases, spread evenly
        over its words.
    """

    emission: float = 0.0


def _weighted_logs(weights: NDArray[np.float64], values: NDArray[np.float64]) -> float:
    """Return the sum of weights times log values, where a weight of 0 makes any term 0."""
    used = weights > 0
    return float((weights[used] * log_array(values[used])).sum())


def log_prior(model: Model, prior: Prior) -> float:
    """Return the log prior density of a model's emissions in nats, up to a constant."""
    if prior.emission == 0:
        return 0.0
    return sum(_table_objective(joint, model.order, None, prior) for joint in model.joint)


def maximise(
    model: Model, counts: Counts, closed_lengths: list[int], prior: Prior | None = None
) -> Model:
    """Return the model with parameters that explain the expected counts no worse.

    Parameters
    ----------
    model
        The model under which the counts were taken.
    counts
        Expected counts.
    closed_lengths
        Lengths of the circles among the contigs, in bases.
    prior
        Pseudo-counts; none by default.

    References
    ----------
    Baum, Petrie, Soules & Weiss 1970, Annals of Mathematical Statistics 41: 164-171. Going part
    of the way makes it a generalised EM step: Dempster, Laird & Rubin 1977, JRSS B 39: 1-38.
    """
    prior = prior or Prior()
    transitions, start = _better_transitions(model, counts, closed_lengths)
    joint = np.array(
        [
            _better_table(model, counts.emissions[state], model.joint[state], prior)
            for state in range(model.states)
        ]
    )
    return Model(
        names=model.names,
        reported=model.reported,
        order=model.order,
        symmetric=model.symmetric,
        start_kind=model.start_kind,
        transitions=transitions,
        joint=joint,
        start=start,
    )


def _back_off(
    old: NDArray[np.float64],
    aim: NDArray[np.float64],
    objective: Callable[[NDArray[np.float64]], float],
) -> NDArray[np.float64]:
    """Return the point nearest the aim, between it and the old, that is no worse than the old."""
    floor = objective(old)
    share = 1.0
    for _ in range(_HALVINGS):
        point = aim if share == 1.0 else old + share * (aim - old)
        if objective(point) >= floor:
            return point
        share /= 2
    return old


def _without_traces(counts: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.where(counts < _NEGLIGIBLE, 0.0, counts)


def _normalised(counts: NDArray[np.float64], old: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return rows that sum to 1; a row that nothing was counted for stays as it was."""
    totals = counts.sum(axis=1, keepdims=True)
    return np.where(totals > 0, counts / np.where(totals > 0, totals, 1.0), old)


def _better_transitions(
    model: Model, counts: Counts, closed_lengths: list[int]
) -> tuple[NDArray[np.float64], NDArray[np.float64] | None]:
    """Return better transitions, and the start if it is free."""
    observed = _without_traces(counts.transitions)
    first = np.where(counts.start > 0, np.maximum(counts.start, _NEGLIGIBLE), 0.0)
    lengths = sorted(closed_lengths)

    def objective(transitions: NDArray[np.float64]) -> float:
        value = _weighted_logs(observed, transitions)
        if model.start_kind != FREE and first.any():
            if len(closed_classes(transitions)) > 1:
                return -np.inf
            value += _weighted_logs(first, stationary_distribution(transitions))
        for length in lengths:
            value -= float(log_trace_of_power(transitions, length))
        return value

    if model.symmetric:
        return _better_reversible(model, observed, objective), None
    transitions = _back_off(model.transitions, _normalised(observed, model.transitions), objective)
    if model.start_kind != FREE:
        return transitions, None
    start = first / first.sum() if first.sum() > 0 else model.start_probabilities
    return transitions, start


def _better_reversible(
    model: Model,
    observed: NDArray[np.float64],
    objective: Callable[[NDArray[np.float64]], float],
) -> NDArray[np.float64]:
    """Return better reversible transitions, by way of the flow between states.

    A symmetric flow, pi_i T_ij, has reversible transitions, and so has every mixture of two.
    """
    total = observed.sum()
    if total == 0:
        return model.transitions
    old_flow = model.start_probabilities[:, None] * model.transitions
    old_flow = (old_flow + old_flow.T) / 2
    aim = (observed + observed.T) / (2 * total)

    def of_flow(flow: NDArray[np.float64]) -> NDArray[np.float64]:
        return _normalised(flow, model.transitions)

    floor = objective(model.transitions)
    share = 1.0
    for _ in range(_HALVINGS):
        transitions = of_flow(aim if share == 1.0 else old_flow + share * (aim - old_flow))
        if objective(transitions) >= floor:
            return transitions
        share /= 2
    return model.transitions


def _table_objective(
    joint: NDArray[np.float64],
    order: int,
    observed: NDArray[np.float64] | None,
    prior: Prior,
) -> float:
    """Return one state's share of the expected complete log-likelihood, and of the prior."""
    emissions = backed_off_emissions(joint[None, :], order)[0]
    value = 0.0 if observed is None else _weighted_logs(observed, emissions)
    if prior.emission > 0:
        longest = emissions[code_offset(order) : missing_code(order)]
        weights = np.full(longest.size, prior.emission / longest.size)
        value += _weighted_logs(weights, longest)
    return value


def _better_table(
    model: Model, counted: NDArray[np.float64], old: NDArray[np.float64], prior: Prior
) -> NDArray[np.float64]:
    """Return a better joint word table of one state, from float64[code] expected counts."""
    order = model.order
    observed = _without_traces(counted)
    observed[missing_code(order)] = 0.0
    words = observed[code_offset(order) : missing_code(order)].copy()
    if order > 0 and not words.any():
        # Contigs too short for one full context: spread what is known over the old table.
        words = observed.sum() * old
    words += prior.emission / words.size
    if model.symmetric:
        words = (words + words[reverse_complement_words(order + 1)]) / 2
    total = words.sum()
    if total == 0:
        return old
    return _back_off(
        old, words / total, lambda joint: _table_objective(joint, order, observed, prior)
    )
