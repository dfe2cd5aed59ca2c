"""The maximisation step: from expected counts to better parameters, never worse ones.

With a stationary start, circles, back-off tables or two strands, the parameters that maximise
the expected complete log-likelihood have no closed form. The step therefore aims at the
closed form of the nearest simple case and goes back towards the old parameters (halving the
way, word tables in joint space) until that expectation does not fall. It needs the counts only.
"""

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.expectation import Counts
from hmmseg.model import Model
from hmmseg.model.contexts import (
    backed_off_emissions,
    code_offset,
    missing_code,
    reverse_complement_words,
)
from hmmseg.model.parameters import FREE
from hmmseg.training.backing_off import NEGLIGIBLE, going_back, weighted_logs, without_traces
from hmmseg.training.constraints import NO_PRIOR, NOTHING_FIXED, Fixed, Prior
from hmmseg.training.switching import better_transitions

__all__ = ["log_prior", "maximise"]


def log_prior(model: Model, prior: Prior) -> float:
    """Return the log prior density of a model's parameters in nats, up to a constant."""
    value = 0.0
    if prior.words is not None:
        for state in range(model.states):
            value += _table_objective(model.joint[state], model.order, None, prior.words[state])
    if prior.steps is not None:
        value += weighted_logs(prior.steps, model.transitions)
    return value


def maximise(
    model: Model,
    counts: Counts,
    closed_lengths: list[int],
    prior: Prior = NO_PRIOR,
    fixed: Fixed = NOTHING_FIXED,
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
    fixed
        Parameters that stay; none by default.

    References
    ----------
    Baum, Petrie, Soules & Weiss 1970, Annals of Mathematical Statistics 41: 164-171. Going part
    of the way makes it a generalised EM step: Dempster, Laird & Rubin 1977, JRSS B 39: 1-38.
    """
    joint = [
        model.joint[state]
        if state in fixed.tables
        else _better_table(
            model,
            counts.emissions[state],
            model.joint[state],
            None if prior.words is None else prior.words[state],
        )
        for state in range(model.states)
    ]
    return Model(
        names=model.names,
        reported=model.reported,
        order=model.order,
        symmetric=model.symmetric,
        start_kind=model.start_kind,
        transitions=better_transitions(model, counts, closed_lengths, prior, fixed),
        joint=np.array(joint),
        start=_better_start(model, counts, fixed),
        stages=model.stages,
    )


def _better_start(model: Model, counts: Counts, fixed: Fixed) -> NDArray[np.float64] | None:
    """Return a better free start, None if the start is stationary."""
    if model.start_kind != FREE:
        return None
    first = np.where(counts.start > 0, np.maximum(counts.start, NEGLIGIBLE), 0.0)
    if fixed.start or first.sum() == 0:
        return model.start_probabilities
    return first / first.sum()


def _table_objective(
    joint: NDArray[np.float64],
    order: int,
    observed: NDArray[np.float64] | None,
    pseudo: NDArray[np.float64] | None,
) -> float:
    """Return one state's share of the expected complete log-likelihood, and of the prior."""
    emissions = backed_off_emissions(joint[None, :], order)[0]
    value = 0.0 if observed is None else weighted_logs(observed, emissions)
    if pseudo is not None:
        value += weighted_logs(pseudo, emissions[code_offset(order) : missing_code(order)])
    return value


def _better_table(
    model: Model,
    counted: NDArray[np.float64],
    old: NDArray[np.float64],
    pseudo: NDArray[np.float64] | None,
) -> NDArray[np.float64]:
    """Return a better joint word table of one state, from float64[code] expected counts."""
    order = model.order
    observed = without_traces(counted)
    observed[missing_code(order)] = 0.0
    words = observed[code_offset(order) : missing_code(order)].copy()
    if order > 0 and not words.any():
        # Contigs too short for one full context: spread what is known over the old table.
        words = observed.sum() * old
    if pseudo is not None:
        words += pseudo
    if model.symmetric:
        words = (words + words[reverse_complement_words(order + 1)]) / 2
    total = words.sum()
    if total == 0:
        return old

    def objective(joint: NDArray[np.float64]) -> float:
        return _table_objective(joint, order, observed, pseudo)

    return going_back(
        objective, objective(old), old, lambda share: _between(old, words / total, share)
    )


def _between(
    old: NDArray[np.float64], aim: NDArray[np.float64], share: float
) -> NDArray[np.float64]:
    return aim if share == 1.0 else old + share * (aim - old)
