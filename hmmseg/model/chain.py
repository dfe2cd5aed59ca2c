"""A Markov chain over bases as a machine whose states are the last bases.

A chain of order k is a model with one hidden state. As a machine it stands in one of ``4**k``
*histories*, the last k bases as a number in base four, oldest base first, and a base takes it
to the next one:

    next history = (4 * history + base) mod 4**k

so at most four of the ``4**k`` entries in a row of its transition matrix are not zero.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import ModelError
from hmmseg.model.contexts import code_offset, missing_code
from hmmseg.model.parameters import Model
from hmmseg.model.stationary import stationary_distribution

__all__ = ["ChainMachine", "SparseRows", "chain_machine", "with_stationary_start"]

_DENSE_HISTORIES = 256
"""So many histories are solved by elimination; more of them step by step."""

_MOST_STEPS = 1_000_000
_RESIDUAL = 1e-15


@dataclass(frozen=True, eq=False)
class SparseRows:
    """A matrix in compressed sparse rows.

    Attributes
    ----------
    offsets : int64[history + 1]
        Where each row's entries begin.
    columns : int64[entry]
        The next history of each entry, ascending within a row.
    symbols : uint8[entry]
        The base that leads there.
    values : float64[entry]
        Probabilities, none of them zero.
    """

    offsets: NDArray[np.int64]
    columns: NDArray[np.int64]
    symbols: NDArray[np.uint8]
    values: NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class ChainMachine:
    """A chain as a machine.

    Parameters
    ----------
    order
        Bases in a history.
    table
        float64[history, symbol]: P(next base | history); rows sum to 1.
    guess
        float64[history]: where the search for the stationary distribution begins.
    """

    order: int
    table: NDArray[np.float64]
    guess: NDArray[np.float64]

    @property
    def histories(self) -> int:
        """Number of states of the machine, 4**order."""
        return len(self.table)

    def transitions(self) -> SparseRows:
        """Return the transition matrix over histories.

        At order 0 the machine has one history, to which every base leads back.
        """
        histories, symbols = np.nonzero(self.table)
        columns = (4 * histories + symbols) % self.histories
        offsets = np.searchsorted(histories, np.arange(self.histories + 1))
        return SparseRows(
            offsets.astype(np.int64),
            columns.astype(np.int64),
            symbols.astype(np.uint8),
            self.table[histories, symbols],
        )

    @cached_property
    def stationary(self) -> NDArray[np.float64]:
        """float64[history]: the share of each history in the long run.

        Raises
        ------
        ModelError
            It is not unique, or is not found because the machine mixes too slowly.
        """
        self._check_unique()
        if self.histories <= _DENSE_HISTORIES:
            dense = np.zeros((self.histories, self.histories))
            for symbol in range(4):
                columns = (4 * np.arange(self.histories) + symbol) % self.histories
                dense[np.arange(self.histories), columns] += self.table[:, symbol]
            return stationary_distribution(dense)
        return self._by_steps()

    def step(self, shares: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return float64[history] shares after one more base."""
        flows = (shares[:, None] * self.table).reshape(4, -1)
        moved: NDArray[np.float64] = (flows[0] + flows[1]) + (flows[2] + flows[3])
        return moved

    def _by_steps(self) -> NDArray[np.float64]:
        """Iterate with half a step at a time, which also settles machines that cycle."""
        shares = self.guess / self.guess.sum()
        for _ in range(_MOST_STEPS):
            moved = self.step(shares)
            residual = float(np.abs(moved - shares).sum())
            if residual <= _RESIDUAL:
                return shares
            shares = (shares + moved) / 2
            shares /= shares.sum()
        raise ModelError(
            f"the chain's stationary distribution is not found: after {_MOST_STEPS} steps its "
            f"histories still change by {residual:.2g}; add a pseudo-count or lower the order"
        )

    def _check_unique(self) -> None:
        """Raise if there is more than one set of histories that is never left."""
        at = int(np.argmax(self.guess))
        while True:
            ahead, behind = self._ahead_of(at), self._behind(at)
            lost = np.flatnonzero(ahead & ~behind)
            if not len(lost):
                break
            # From there is no way back, and fewer histories lie ahead of it.
            at = int(lost[0])
        apart = np.flatnonzero(~behind)
        if len(apart):
            raise ModelError(
                f"histories {self.word(int(apart[0]))} and {self.word(at)} never both recur, so "
                "there is no single stationary distribution; add a pseudo-count"
            )

    def _ahead_of(self, history: int) -> NDArray[np.bool_]:
        """Return bool[history]: which can be reached from one."""
        possible = self.table > 0
        reached = np.zeros(self.histories, bool)
        reached[history] = True
        while True:
            words = (reached[:, None] & possible).reshape(4, -1)
            wider: NDArray[np.bool_] = reached | words.any(axis=0)
            if (wider == reached).all():
                return wider
            reached = wider

    def _behind(self, history: int) -> NDArray[np.bool_]:
        """Return bool[history]: from which one can be reached."""
        possible = self.table > 0
        following = (4 * np.arange(self.histories)[:, None] + np.arange(4)) % self.histories
        reaching = np.zeros(self.histories, bool)
        reaching[history] = True
        while True:
            wider: NDArray[np.bool_] = reaching | (possible & reaching[following]).any(axis=1)
            if (wider == reaching).all():
                return wider
            reaching = wider

    def word(self, history: int) -> str:
        """Return a history's bases as letters."""
        places = range(self.order - 1, -1, -1)
        return "".join("ACGT"[(history >> (2 * place)) & 3] for place in places)


def chain_machine(model: Model) -> ChainMachine:
    """Return a chain as a machine.

    Parameters
    ----------
    model
        A model with one state. A history without any mass continues like its longest suffix
        that has some.

    Raises
    ------
    ModelError
        The model has several states.
    """
    if model.states != 1:
        raise ModelError(
            f"the model has {model.states} states, a chain has one; train it with --states 1"
        )
    order = model.order
    rows = model.emissions[0, code_offset(order) : missing_code(order)].reshape(-1, 4)
    counted = model.joint[0].reshape(-1, 4)
    guess = (counted[:, 0] + counted[:, 1]) + (counted[:, 2] + counted[:, 3])
    return ChainMachine(order, rows, guess)


def with_stationary_start(model: Model) -> Model:
    """Return a chain with the same conditionals, whose words are those of its stationary state.

    Its first bases then have the stationary distribution's probabilities exactly. Words
    counted on linear sequence have those up to the ends of the contigs.

    Parameters
    ----------
    model
        A model with one state.
    """
    machine = chain_machine(model)
    joint = machine.stationary[:, None] * machine.table
    return Model(
        names=model.names,
        reported=model.reported,
        order=model.order,
        # The stationary words of a symmetric chain mirror one another only up to rounding.
        symmetric=False,
        start_kind=model.start_kind,
        transitions=model.transitions,
        joint=joint.reshape(1, -1) / joint.sum(),
        start=model.start,
    )
