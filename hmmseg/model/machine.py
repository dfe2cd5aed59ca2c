"""A model as the hidden chain that inference runs: stages unfolded, labels as copies of codes.

A state with ``n`` stages is ``n`` hidden states in series that share emissions and the chance
to stay. Its visits then last a sum of ``n`` geometric lengths (a negative binomial), which has
a most likely value, where a single stage favours the shortest visit.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Machine", "unfolded_transitions"]


@dataclass(frozen=True, eq=False)
class Machine:
    """Parameters of a hidden chain.

    Attributes
    ----------
    order : int
        Context length in bases.
    both_strands : bool
        Whether results are means over the strands.
    transitions : float64[stage, stage]
    emissions : float64[stage, code]
        With labels, the codes stand once for each label, 0 (none) first.
    start_probabilities : float64[stage]
    owners : int64[stage]
        The state that each stage belongs to.
    """

    order: int
    both_strands: bool
    transitions: NDArray[np.float64]
    emissions: NDArray[np.float64]
    start_probabilities: NDArray[np.float64]
    owners: NDArray[np.int64]

    @property
    def states(self) -> int:
        """Number of stages of all states together."""
        return len(self.owners)

    def clamped(self) -> "Machine":
        """Return the machine for labelled codes.

        The codes behind label ``s + 1`` are emitted by the stages of state ``s`` alone.
        """
        labels = int(self.owners.max()) + 1
        allowed = [self.owners >= 0, *(self.owners == label for label in range(labels))]
        copies = [np.where(owned[:, None], self.emissions, 0.0) for owned in allowed]
        return Machine(
            self.order,
            self.both_strands,
            self.transitions,
            np.concatenate(copies, axis=1),
            self.start_probabilities,
            self.owners,
        )

    def pooled(self, values: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return float64[..., state] sums over the stages of float64[..., stage]."""
        if self.states == int(self.owners.max()) + 1:
            return values
        sums = np.zeros((*values.shape[:-1], int(self.owners.max()) + 1))
        for stage, owner in enumerate(self.owners):
            sums[..., owner] += values[..., stage]
        return sums


def unfolded_transitions(
    transitions: NDArray[np.float64], stages: tuple[int, ...]
) -> NDArray[np.float64]:
    """Return the transitions between all stages.

    Parameters
    ----------
    transitions
        float64[state, state]: the diagonal is the chance to stay in a stage, the rest the
        chances to leave from the last one.
    stages
        Stages of each state.

    Returns
    -------
    float64[stage, stage]
    """
    if max(stages) == 1:
        return transitions
    first = np.concatenate(([0], np.cumsum(stages)))
    result = np.zeros((first[-1], first[-1]))
    for state, count in enumerate(stages):
        leaving = np.where(np.arange(len(stages)) == state, 0.0, transitions[state])
        for stage in range(first[state], first[state + 1]):
            result[stage, stage] = transitions[state, state]
            if stage < first[state] + count - 1:
                result[stage, stage + 1] = leaving.sum()
            else:
                result[stage, first[:-1]] += leaving
    return result
