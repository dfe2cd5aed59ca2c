"""The parameters of a hidden Markov model; a model with one state is a Markov chain."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hmmseg.errors import ModelError
from hmmseg.model.contexts import backed_off_emissions, joint_levels, reverse_complement_words
from hmmseg.model.machine import Machine, unfolded_transitions
from hmmseg.model.stationary import closed_classes, stationary_distribution

__all__ = ["FREE", "MAX_ORDER", "MAX_STATES", "STATIONARY", "Model", "staged_shares"]

MAX_ORDER = 8
MAX_STATES = 64
STATIONARY = "stationary"
FREE = "free"

_SUM_TOLERANCE = 1e-6
"""How far a hand-written distribution may be from 1; beyond rounding it is scaled to 1."""

_ROUNDING = 1e-12
_DOUBLINGS = 60
_SYMMETRY_TOLERANCE = 1e-6


@dataclass(frozen=True, eq=False)
class Model:
    """An immutable, validated hidden Markov model over bases.

    Parameters
    ----------
    names
        One name a state, distinct.
    reported
        Whether regions of the state are reported; the others are background.
    order
        Context length of the emissions in bases, 0 to 8.
    symmetric
        Strand symmetry: word tables equal their reverse complement, transitions are
        reversible, and the start is stationary.
    start_kind
        ``"stationary"`` or ``"free"``.
    transitions
        float64[state, state]: P(next state | state); rows sum to 1.
    joint
        float64[state, 4**(order + 1)]: each state's probabilities of words of ``order + 1``
        bases in alphabetical order. Emissions are its conditionals.
    start
        float64[state]: probabilities of the first state of a contig. Computed from the
        transitions when the start is stationary.
    stages
        Stages of each state in series, see :mod:`.machine`; one each by default. The diagonal of
        the transitions is the chance to stay in a stage.
    training
        What the model was trained on, kept as it is.

    Raises
    ------
    ModelError
        A parameter is invalid; the message names it and its index.
    """

    names: tuple[str, ...]
    reported: tuple[bool, ...]
    order: int
    symmetric: bool
    start_kind: str
    transitions: NDArray[np.float64]
    joint: NDArray[np.float64]
    start: NDArray[np.float64] | None = None
    stages: tuple[int, ...] = ()
    training: Mapping[str, Any] | None = field(default=None, repr=False)

    def __post_init__(self) -> None:
        """Validate, bring to canonical form and freeze the arrays."""
        self._check_scalars()
        count = len(self.names)
        transitions = _rows("transitions", self.transitions, (count, count))
        joint = _rows("joint", self.joint, (count, 4 ** (self.order + 1)), what="states")
        if self.symmetric:
            joint = _mirrored_tables(joint, self.order)
        if not self.stages:
            object.__setattr__(self, "stages", (1,) * count)
        self._check_stages(transitions)
        if self.start_kind == STATIONARY:
            start = staged_shares(transitions, self.stages)
        elif self.start is None:
            raise ModelError("start: missing; give a list of probabilities or 'stationary'")
        else:
            start = _rows("start", np.asarray(self.start, dtype=float)[None, :], (1, count))[0]
        if self.symmetric:
            _check_reversible(transitions, start / np.array(self.stages))
        for name, array in (("transitions", transitions), ("joint", joint), ("start", start)):
            array.flags.writeable = False
            object.__setattr__(self, name, array)

    def _check_scalars(self) -> None:
        count = len(self.names)
        if not 1 <= count <= MAX_STATES:
            raise ModelError(f"states: {count} given, but 1 to {MAX_STATES} are possible")
        if len(set(self.names)) != count:
            raise ModelError(f"states: names are not distinct: {', '.join(self.names)}")
        if len(self.reported) != count:
            raise ModelError(f"reported: {len(self.reported)} values for {count} states")
        if not 0 <= self.order <= MAX_ORDER:
            raise ModelError(f"order: {self.order} is not between 0 and {MAX_ORDER}")
        if self.start_kind not in (STATIONARY, FREE):
            raise ModelError(f"start: '{self.start_kind}' is neither '{STATIONARY}' nor '{FREE}'")
        if self.symmetric and self.start_kind != STATIONARY:
            raise ModelError("start: a symmetric model starts from its stationary distribution")

    def _check_stages(self, transitions: NDArray[np.float64]) -> None:
        if len(self.stages) != len(self.names):
            raise ModelError(f"stages: {len(self.stages)} values for {len(self.names)} states")
        for state, count in enumerate(self.stages):
            if count < 1:
                raise ModelError(f"states[{state}].stages: {count} is not 1 or more")
            if count > 1 and transitions[state, state] == 1:
                raise ModelError(f"states[{state}].stages: a state that is never left has one")
        if sum(self.stages) > MAX_STATES:
            raise ModelError(f"stages: {sum(self.stages)} in all, but {MAX_STATES} are possible")

    @property
    def states(self) -> int:
        """Number of states."""
        return len(self.names)

    @property
    def start_probabilities(self) -> NDArray[np.float64]:
        """float64[state]: P(first state of a contig)."""
        assert self.start is not None
        return self.start

    @cached_property
    def emissions(self) -> NDArray[np.float64]:
        """float64[state, code]: P(base | known context, state), see :mod:`.contexts`."""
        table = backed_off_emissions(self.joint, self.order)
        table.flags.writeable = False
        return table

    @cached_property
    def machine(self) -> Machine:
        """The hidden chain that inference runs, with a state for every stage."""
        stages = np.array(self.stages)
        owners = np.repeat(np.arange(self.states), stages)
        start = self.start_probabilities[owners]
        if self.start_kind == STATIONARY:
            start = start / stages[owners]
        else:
            entered = np.concatenate(([True], owners[1:] != owners[:-1]))
            start = np.where(entered, start, 0.0)
        return Machine(
            order=self.order,
            both_strands=self.both_strands,
            transitions=unfolded_transitions(self.transitions, self.stages),
            emissions=np.ascontiguousarray(self.emissions[owners]),
            start_probabilities=start,
            owners=owners,
        )

    @cached_property
    def shares(self) -> NDArray[np.float64]:
        """float64[state]: long-run shares of positions.

        Where states never reach each other the long run depends on the start: then it is where
        many steps from the start lead.
        """
        if len(closed_classes(self.transitions)) == 1:
            return staged_shares(self.transitions, self.stages)
        power = self.machine.transitions
        for _ in range(_DOUBLINGS):
            product = (power[:, :, None] * power[None, :, :]).sum(axis=1)
            power = product / product.sum(axis=1, keepdims=True)
        return self.machine.pooled((self.machine.start_probabilities[:, None] * power).sum(axis=0))

    @property
    def expected_lengths(self) -> NDArray[np.float64]:
        """float64[state]: mean length of a visit in bases; infinite if it is never left."""
        leaving = np.array(
            [self.transitions[i].sum() - self.transitions[i, i] for i in range(self.states)]
        )
        with np.errstate(divide="ignore"):
            return np.array(self.stages) / np.where(
                np.diag(self.transitions) == 1, 0.0, np.maximum(leaving, 0.0)
            )

    @cached_property
    def composition(self) -> NDArray[np.float64]:
        """float64[state, symbol]: each state's probabilities of the four bases."""
        return joint_levels(self.joint)[0]

    @property
    def gc(self) -> NDArray[np.float64]:
        """float64[state]: each state's GC fraction."""
        return self.composition[:, 1] + self.composition[:, 2]

    @property
    def both_strands(self) -> bool:
        """Whether results are averaged over the strands: at order 0 the two agree anyway."""
        return self.symmetric and self.order > 0

    @property
    def background(self) -> tuple[int, ...]:
        """Indices of the states that are not reported."""
        return tuple(i for i, reported in enumerate(self.reported) if not reported)


def staged_shares(transitions: NDArray[np.float64], stages: tuple[int, ...]) -> NDArray[np.float64]:
    """Return float64[state] stationary shares: a state is as long again for every stage.

    Raises
    ------
    ModelError
        There is no single stationary distribution.
    """
    weights = stationary_distribution(transitions)
    if max(stages) == 1:
        return weights
    weights = weights * np.array(stages)
    return weights / weights.sum()


def _rows(
    key: str, values: ArrayLike, shape: tuple[int, int], what: str | None = None
) -> NDArray[np.float64]:
    """Return a checked copy whose rows are probability distributions."""
    array = np.array(values, dtype=np.float64)
    if array.shape != shape:
        raise ModelError(f"{key}: shape {array.shape} where {shape} is needed")
    for row in range(shape[0]):
        where = f"{what}[{row}].{key}" if what else f"{key}[{row}]"
        where = key if shape[0] == 1 and what is None else where
        bad = np.flatnonzero(~np.isfinite(array[row]) | (array[row] < 0))
        if bad.size:
            value = array[row, bad[0]]
            raise ModelError(f"{where}[{bad[0]}]: {value} is not a probability")
        total = array[row].sum()
        if abs(total - 1) > _SUM_TOLERANCE:
            raise ModelError(f"{where}: sums to {total:.9g}, not to 1")
        if abs(total - 1) > _ROUNDING:
            array[row] /= total
    return array


def _mirrored_tables(joint: NDArray[np.float64], order: int) -> NDArray[np.float64]:
    """Return the tables made exactly equal to their reverse complement, if they nearly are."""
    mirror = joint[:, reverse_complement_words(order + 1)]
    off = np.abs(joint - mirror).max(axis=1)
    for state in np.flatnonzero(off > _SYMMETRY_TOLERANCE):
        raise ModelError(
            f"states[{state}].joint: differs from its reverse complement by {off[state]:.3g}, but "
            "the model is marked symmetric; mirror the table or set 'symmetric' to false"
        )
    return (joint + mirror) / 2


def _check_reversible(transitions: NDArray[np.float64], start: NDArray[np.float64]) -> None:
    flow = start[:, None] * transitions
    off = np.abs(flow - flow.T)
    if off.max() > _SYMMETRY_TOLERANCE:
        i, j = np.unravel_index(int(off.argmax()), off.shape)
        raise ModelError(
            f"transitions[{i}][{j}]: not reversible (detailed balance is off by {off.max():.3g}), "
            "but the model is marked symmetric; balance the rows or set 'symmetric' to false"
        )
