"""Sequence without regions, made from an assembly: its contigs drawn anew.

Three ways, from the simplest to the most cautious:

``background``
    the model's own unreported states, as if it knew them exactly;
``chain``
    a Markov chain two orders above the model's, counted in the assembly: composition without
    any hidden state;
``drift``
    the same chain, tilted base by base to the slowly changing GC of the assembly's own places,
    because real genomes are not homogeneous.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from hmmseg.evidence.drift import WINDOW, Drift
from hmmseg.kernels.drifting import draw_chain
from hmmseg.kernels.elementary import exp
from hmmseg.model import Model
from hmmseg.model.chain import ChainMachine, chain_machine
from hmmseg.model.parameters import FREE, MAX_ORDER
from hmmseg.sequence.alphabet import MISSING
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import drawn_from

__all__ = [
    "NULLS",
    "BackgroundNull",
    "ChainNull",
    "Null",
    "Piece",
    "background_model",
    "chain_null",
    "drift_null",
    "null_order",
    "pieces_of",
    "tilts",
]

NULLS = ("chain", "drift", "background")

_CHUNK = 1 << 18
_FEWEST_ORDERS = 2
_MORE_ORDERS = 2

_STEPS = 8
"""Tilts to a factor of e in the odds of G+C."""
_STEEPEST = 4 * _STEPS
_LEAST_GC = 1e-6
_SETTLED = 1e-8
_MOST_STEPS = 4096


@dataclass(frozen=True, eq=False)
class Piece:
    """A contig, or a part of one, without its bases.

    Attributes
    ----------
    contig : Contig
        Its place; the bases are not kept.
    length : int
    missing : int64[run, 2]
        Where bases are missing, in positions of the piece.
    record : int
        Number of the record.
    """

    contig: Contig
    length: int
    missing: NDArray[np.int64]
    record: int

    def filled(self, bases: NDArray[np.uint8]) -> Contig:
        """Return the contig with other bases, missing where its own are."""
        for start, end in self.missing:
            bases[start:end] = MISSING
        return replace(self.contig, bases=bases)


def pieces_of(contig: Contig, record: int, longest: int) -> Iterator[Piece]:
    """Cut a contig into pieces, a circle into none.

    Parameters
    ----------
    contig
        The sequence.
    record
        Number of its record.
    longest
        Bases in a piece at most.
    """
    size = len(contig) if contig.closed else longest
    for begin in range(0, len(contig), size):
        bases = contig.bases[begin : begin + size]
        edges = np.diff((bases == MISSING).view(np.int8), prepend=0, append=0)
        place = Contig(
            contig.record,
            (contig.start + begin) % contig.record_length,
            np.empty(0, np.uint8),
            contig.closed,
            contig.record_length,
        )
        missing = np.flatnonzero(edges).reshape(-1, 2).astype(np.int64)
        yield Piece(place, len(bases), missing, record)


class Null(Protocol):
    """Draws pieces anew."""

    def drawn(self, piece: Piece, random: np.random.Generator) -> Contig:
        """Return a piece with bases drawn."""


@dataclass(frozen=True, eq=False)
class ChainNull:
    """A chain, the same everywhere or tilted to what each window has.

    Parameters
    ----------
    order
        Context length.
    table
        float32[row, symbol], as of :func:`~hmmseg.kernels.drifting.draw_chain`.
    factors
        float64[window] of each record, on the odds of G+C; None: 1 everywhere.
    """

    order: int
    table: NDArray[np.float32]
    factors: Sequence[NDArray[np.float64]] | None = None

    def drawn(self, piece: Piece, random: np.random.Generator) -> Contig:
        """Return a piece with bases drawn."""
        bases = np.empty(piece.length, np.uint8)
        factors, place = self._factors(piece)
        memory = np.array([place, 0, 0], np.int64)
        for begin in range(0, piece.length, _CHUNK):
            part = bases[begin : begin + _CHUNK]
            uniforms = random.random(len(part))
            draw_chain(self.table, factors, WINDOW, self.order, memory, uniforms, part)
        return piece.filled(bases)

    def _factors(self, piece: Piece) -> tuple[NDArray[np.float64], int]:
        """Return the factors from the window of the piece's first base on, and its place in it."""
        first, place = divmod(piece.contig.start, WINDOW)
        count = (place + piece.length) // WINDOW + 1
        if self.factors is None:
            return np.ones(count), place
        own = self.factors[piece.record]
        return own[(first + np.arange(count)) % len(own)], place


@dataclass(frozen=True, eq=False)
class BackgroundNull:
    """The model's background states alone.

    Parameters
    ----------
    model
        As from :func:`background_model`.
    """

    model: Model

    def drawn(self, piece: Piece, random: np.random.Generator) -> Contig:
        """Return a piece with bases drawn."""
        return piece.filled(drawn_from(self.model, piece.length, random).bases)


def null_order(order: int) -> int:
    """Return the order of the chains that stand against a model of an order."""
    return min(max(order + _MORE_ORDERS, _FEWEST_ORDERS), MAX_ORDER)


def background_model(model: Model) -> Model | None:
    """Return the model without its reported states; None if nothing would be left.

    Transitions are shared out among the states that remain.
    """
    kept = list(model.background)
    if not kept:
        return None
    rows = model.transitions[np.ix_(kept, kept)]
    sums = rows.sum(axis=1, keepdims=True)
    rows = np.where(sums > 0, rows / np.where(sums > 0, sums, 1), np.eye(len(kept)))
    shares = model.shares[kept]
    total = shares.sum()
    start = shares / total if total > 0 else np.full(len(kept), 1 / len(kept))
    return Model(
        names=tuple(model.names[state] for state in kept),
        reported=(False,) * len(kept),
        order=model.order,
        symmetric=False,
        start_kind=FREE,
        transitions=rows,
        joint=model.joint[kept],
        start=start,
        # A state that nothing leaves any more needs no stages to say how long it lasts.
        stages=tuple(1 if rows[i, i] == 1 else model.stages[s] for i, s in enumerate(kept)),
    )


def chain_null(chain: Model) -> ChainNull:
    """Return the null of a chain that is the same everywhere."""
    return ChainNull(chain.order, _rows(chain))


def drift_null(chain: Model, drift: Drift) -> ChainNull:
    """Return the null of a chain that is tilted to the levels of a drift."""
    factors, gc = tilts(chain_machine(chain))
    # Without context the factor is the ratio of the odds, so it is nearly linear in them.
    odds = gc / (1 - gc)
    followed = [np.interp(level / (1 - level), odds, factors) for level in drift.levels]
    return ChainNull(chain.order, _rows(chain), followed)


def tilts(machine: ChainMachine) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return how much GC a chain has in the long run, when it is tilted.

    Parameters
    ----------
    machine
        The chain.

    Returns
    -------
    float64[tilt], float64[tilt]
        Factors on the odds of G+C behind every context, and the GC that they lead to, both
        ascending.
    """
    factors = np.array([exp(at / _STEPS) for at in range(-_STEEPEST, _STEEPEST + 1)])
    gc = np.empty(len(factors))
    for way in (range(_STEEPEST, -1, -1), range(_STEEPEST, len(factors))):
        shares = machine.guess / machine.guess.sum()
        for at in way:
            table = machine.table * np.array([1.0, factors[at], factors[at], 1.0])
            table /= table.sum(axis=1, keepdims=True)
            shares = _settled(ChainMachine(machine.order, table, shares))
            gc[at] = float((shares[:, None] * table[:, 1:3]).sum())
    # Where the chain holds no C or no G at all, the ends may be alike.
    return factors, np.clip(gc, _LEAST_GC, 1 - _LEAST_GC)


def _settled(machine: ChainMachine) -> NDArray[np.float64]:
    """Return the shares of histories after many steps; half steps settle what would cycle."""
    shares = machine.guess
    for _ in range(_MOST_STEPS):
        moved = (machine.step(shares) + shares) / 2
        if float(np.abs(moved - shares).sum()) < _SETTLED:
            break
        shares = moved
    return shares


def _rows(chain: Model) -> NDArray[np.float32]:
    """Return P(base | context) in the order of codes."""
    return chain.emissions[0, :-1].reshape(-1, 4).astype(np.float32)
