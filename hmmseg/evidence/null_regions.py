"""Scores of the regions that are called in null sequence, or of the boundaries between them."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import SequenceError
from hmmseg.evidence.nulls import Null, Piece
from hmmseg.inference.threads import in_threads
from hmmseg.model import Model
from hmmseg.regions.calling import Caller
from hmmseg.sequence.contigs import Contig

__all__ = [
    "Found",
    "Replicates",
    "Scoring",
    "boundary_scores",
    "call_nulls",
    "replicates_of",
]

_EVERY = -1
_BITS_DECIMALS = 3
"""As in the table of regions, so that equal scores are equal."""

Refit = Callable[[Sequence[Contig]], Model]


def boundary_scores(
    states: NDArray[np.int64], bits: NDArray[np.float64], closed: bool
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Return the boundaries between regions of one contig, and what each buys.

    Without a boundary, one of the two regions beside it would be explained by the other's
    state, and the cheaper way costs the log-odds of the weaker of the two.

    Parameters
    ----------
    states
        int64[region], in order along the contig.
    bits
        float64[region]: log-odds against the other states.
    closed
        Whether the contig is a circle.

    Returns
    -------
    int64[boundary, 2], float64[boundary]
        The regions on its left and right, and bits.
    """
    left = np.arange(len(states))
    right = np.roll(left, -1)
    if not closed or len(states) < 2:
        left, right = left[:-1], right[:-1]
    apart = states[left] != states[right]
    left, right = left[apart], right[apart]
    return np.column_stack((left, right)), np.minimum(bits[left], bits[right])


@dataclass(frozen=True)
class Scoring:
    """What is counted.

    Parameters
    ----------
    boundaries
        Boundaries between regions instead of regions: every state is reported.
    pooled
        All states together, because which of them is reported was chosen by training.
    """

    boundaries: bool
    pooled: bool

    def of(
        self, states: NDArray[np.int64], bits: NDArray[np.float64], closed: bool
    ) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
        """Return the class and the score of everything that counts among one contig's regions."""
        if self.boundaries:
            _, bits = boundary_scores(states, bits, closed)
        classes = np.zeros(len(bits), np.int64)
        if not self.boundaries and not self.pooled:
            classes = states
        return classes, np.round(bits, _BITS_DECIMALS)


@dataclass(frozen=True, eq=False)
class Replicates:
    """What is drawn: replicates of the pieces of an assembly.

    There may be millions of pieces, so what there is to do stands in arrays.

    Attributes
    ----------
    pieces : sequence of Piece
        All of them.
    numbers : int64[task]
        Number of the replicate.
    places : int64[task]
        Number of the piece that is drawn and called; -1 for all of them, because a model is
        trained on them.
    bases : int64[task]
        To draw.
    """

    pieces: Sequence[Piece]
    numbers: NDArray[np.int64]
    places: NDArray[np.int64]
    bases: NDArray[np.int64]

    @property
    def count(self) -> int:
        """How many replicates there are."""
        return 1 + int(self.numbers.max(initial=-1))

    def taken(self, chosen: NDArray[np.bool_]) -> "Replicates":
        """Return the same with some of the tasks."""
        return replace(
            self,
            numbers=self.numbers[chosen],
            places=self.places[chosen],
            bases=self.bases[chosen],
        )

    def pieces_of(self, task: int) -> Sequence[int]:
        """Return the numbers of the pieces in a task."""
        place = int(self.places[task])
        return range(len(self.pieces)) if place == _EVERY else [place]


def replicates_of(
    pieces: Sequence[Piece], bases: int, seed: int, whole: bool = False
) -> Replicates:
    """Return replicates that hold about so many bases.

    Parameters
    ----------
    pieces
        Of the assembly.
    bases
        To draw. An assembly that has more is drawn in part, pieces by chance; one that has less
        is drawn whole, as often as it takes to reach them.
    seed
        Of that chance.
    whole
        Draw every piece even if that makes more bases, all of a replicate as one task.
    """
    lengths = np.array([piece.length for piece in pieces], np.int64)
    total = int(lengths.sum())
    times = max(1, -(-bases // total))
    if whole:
        everything = np.full(times, _EVERY)
        return Replicates(pieces, np.arange(times), everything, np.full(times, total))
    chosen = np.arange(len(pieces))
    if total > bases:
        random = np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, 2])))
        order = np.argsort(random.random(len(pieces)), kind="stable")
        enough = int(np.searchsorted(np.cumsum(lengths[order]), bases)) + 1
        chosen = np.sort(order[:enough])
    numbers = np.repeat(np.arange(times), len(chosen))
    return Replicates(pieces, numbers, np.tile(chosen, times), np.tile(lengths[chosen], times))


@dataclass(frozen=True, eq=False)
class Found:
    """What was found in null sequence.

    Attributes
    ----------
    bases : int
        Drawn and decoded.
    classes : int64[one]
        State of each region, or 0 where states are not kept apart.
    scores : float64[one]
        In bits.
    """

    bases: int
    classes: NDArray[np.int64]
    scores: NDArray[np.float64]

    def of(self, kind: int) -> NDArray[np.float64]:
        """Return the scores of one class."""
        return self.scores[self.classes == kind]

    @classmethod
    def together(cls, parts: Sequence["Found"]) -> "Found":
        """Return what was found in several stretches, which may be none."""
        return cls(
            sum(one.bases for one in parts),
            np.concatenate([np.empty(0, np.int64), *(one.classes for one in parts)]),
            np.concatenate([np.empty(0), *(one.scores for one in parts)]),
        )


def call_nulls(
    null: Null,
    replicates: Replicates,
    caller: Caller,
    scoring: Scoring,
    seed: Sequence[int],
    *,
    refit: Refit | None = None,
    threads: int = 1,
    watch: Callable[[int], None] | None = None,
) -> Found:
    """Draw null sequence and call regions in it.

    Every piece has random numbers of its own, so nothing depends on what is done side by side.

    Parameters
    ----------
    null
        How pieces are drawn.
    replicates
        What is drawn; a task for each of them, if models are trained anew.
    caller
        How regions are called; its model is replaced where it is trained anew.
    scoring
        What is counted.
    seed
        Of the draws; the replicate's and the piece's numbers are added.
    refit
        Trains on a replicate; None to keep the model.
    threads
        Threads to use; the result does not depend on it.
    watch
        Called with the bases that are done.
    """

    def drawn(number: int, at: int) -> Contig:
        seeds = np.random.SeedSequence([*seed, number, at])
        return null.drawn(replicates.pieces[at], np.random.Generator(np.random.PCG64(seeds)))

    def call(own: Caller, contig: Contig) -> Found:
        try:
            intervals, bits = own.scores(contig)
        except SequenceError:
            # The chain drew what the model holds for impossible; that piece tells nothing.
            return Found(0, np.empty(0, np.int64), np.empty(0))
        finally:
            if watch is not None:
                watch(len(contig))
        return Found(len(contig), *scoring.of(intervals.states, bits, contig.closed))

    def done(task: int) -> list[Found]:
        number = int(replicates.numbers[task])
        contigs = (drawn(number, at) for at in replicates.pieces_of(task))
        if refit is None:
            return [call(caller, contig) for contig in contigs]
        replicate = list(contigs)
        own = Caller(refit(replicate), caller.decoder, caller.threshold, caller.filters)
        return [call(own, contig) for contig in replicate]

    parts = in_threads(done, range(len(replicates.numbers)), threads)
    return Found.together([one for some in parts for one in some])
