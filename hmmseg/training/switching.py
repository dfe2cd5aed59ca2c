"""The maximisation step of transitions.

They are taken apart into the chance ``stay`` to stay in a stage, and the *flow* between states:
how often one is left for another. Every symmetric flow, with any chances to stay, has reversible
transitions, and so has every mixture of two.
"""

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.expectation import Counts
from hmmseg.kernels.scan import log_trace_of_power
from hmmseg.model import Model
from hmmseg.model.machine import unfolded_transitions
from hmmseg.model.parameters import FREE, staged_shares
from hmmseg.model.stationary import closed_classes
from hmmseg.training.backing_off import going_back, weighted_logs, without_traces
from hmmseg.training.constraints import Fixed, Prior

__all__ = ["better_transitions"]

_Matrix = NDArray[np.float64]


class _Objective:
    """The part of the expected complete log-likelihood, and of the prior, in the transitions."""

    def __init__(
        self, model: Model, counts: Counts, closed_lengths: list[int], prior: Prior
    ) -> None:
        self._model = model
        self.steps = without_traces(counts.transitions)
        self.advances = without_traces(counts.advances)
        if prior.steps is not None:
            self.steps = self.steps + prior.steps
        stationary = model.start_kind != FREE
        self._first = counts.start if stationary else np.zeros(model.states)
        self._lengths = sorted(closed_lengths)

    def __call__(self, transitions: _Matrix) -> float:
        stages = self._model.stages
        leaving = np.where(np.eye(len(transitions), dtype=bool), 0.0, transitions).sum(axis=1)
        value = weighted_logs(self.steps, transitions) + weighted_logs(self.advances, leaving)
        if self._first.any():
            if len(closed_classes(transitions)) > 1:
                return -np.inf
            value += weighted_logs(self._first, staged_shares(transitions, stages))
        if self._lengths:
            unfolded = np.ascontiguousarray(unfolded_transitions(transitions, stages))
            for length in self._lengths:
                value -= float(log_trace_of_power(unfolded, length))
        return value


def better_transitions(
    model: Model, counts: Counts, closed_lengths: list[int], prior: Prior, fixed: Fixed
) -> _Matrix:
    """Return transitions that explain the expected counts no worse.

    Parameters
    ----------
    model, counts, closed_lengths, prior, fixed
        As for :func:`~hmmseg.training.maximisation.maximise`.

    Returns
    -------
    float64[state, state]
    """
    objective = _Objective(model, counts, closed_lengths, prior)
    old = model.transitions
    off_diagonal = ~np.eye(model.states, dtype=bool)
    old_stay, stay = np.diag(old), _aimed_stay(model, objective, fixed)
    old_flow = np.where(off_diagonal, model.shares[:, None] * old, 0.0)
    flow = np.where(off_diagonal, objective.steps, 0.0)
    if model.symmetric:
        old_flow, flow = old_flow + old_flow.T, flow + flow.T
    old_flow, flow = _shared_out(old_flow), _shared_out(flow)
    if fixed.leaving:
        flow = old_flow

    def point(share: float) -> _Matrix:
        if share == 1.0:
            return _assembled(stay, flow, old)
        if not model.symmetric:
            return old + share * (_assembled(stay, flow, old) - old)
        return _assembled(
            old_stay + share * (stay - old_stay), old_flow + share * (flow - old_flow), old
        )

    return going_back(objective, objective(old), old, point)


def _aimed_stay(model: Model, objective: _Objective, fixed: Fixed) -> _Matrix:
    """Return float64[state] chances to stay; a state that nothing was counted for keeps its own."""
    stays, old = np.diag(objective.steps), np.diag(model.transitions)
    leaves = objective.steps.sum(axis=1) - stays
    if model.symmetric:
        # What leaves a state on one strand enters it on the other.
        leaves = (leaves + (objective.steps.sum(axis=0) - stays)) / 2
    total = stays + leaves + objective.advances
    stay = np.where(total > 0, stays / np.where(total > 0, total, 1.0), old)
    kept = np.isin(np.arange(model.states), list(fixed.lengths))
    return np.where(kept, old, stay)


def _shared_out(flow: _Matrix) -> _Matrix:
    total = flow.sum()
    return flow / total if total > 0 else flow


def _assembled(stay: _Matrix, flow: _Matrix, old: _Matrix) -> _Matrix:
    """Return the transitions of chances to stay and a flow.

    A state without flow goes where it went before, if it goes at all.
    """
    result = np.diag(stay)
    for state, chance in enumerate(stay):
        leaving = flow[state] if flow[state].any() else old[state]
        leaving = np.where(np.arange(len(stay)) == state, 0.0, leaving)
        if leaving.any():
            result[state] += (1 - chance) * leaving / leaving.sum()
        else:
            result[state, state] = 1.0
    return result
