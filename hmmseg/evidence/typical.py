"""What blocks are like that a model draws: a parametric bootstrap of their composition."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.evidence.stretches import BLOCK, LEVELS, Ladder, Stretch, Words, stretches_of
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig

__all__ = ["DRAWN_LENGTHS", "Seen", "Typical", "chi_square_of_shares", "typical_blocks"]

DRAWN_LENGTHS = (BLOCK << (LEVELS - 1),) * 250
"""Sequences to draw from the model: blocks of the longest kind."""

_RIDGE = 1e-9


@dataclass(frozen=True, eq=False)
class Typical:
    """What blocks of one length are like that the model draws.

    Attributes
    ----------
    words : float64[class]
        Mean share of each class of words.
    states : float64[state]
        Mean share of each state.
    slopes : float64[state, class]
        By how much shares of words go with those of states, by least squares.
    word_spread : float64[class]
        Standard deviation of what the states leave unexplained.
    state_spread : float64[state]
        Standard deviation of each state's share.
    distances : float64[block]
        Of each block, from their mean.
    noise : float
        What chance alone makes of :func:`chi_square_of_shares`.
    """

    words: NDArray[np.float64]
    states: NDArray[np.float64]
    slopes: NDArray[np.float64]
    word_spread: NDArray[np.float64]
    state_spread: NDArray[np.float64]
    distances: NDArray[np.float64]
    noise: float

    @classmethod
    def of(cls, blocks: Sequence[Stretch], length: int) -> "Typical":
        """Return what some blocks are like, all of one length in positions."""
        words = np.array([block.word_shares for block in blocks])
        states = np.array([block.state_shares for block in blocks])
        word_mean, state_mean = words.mean(axis=0), states.mean(axis=0)
        slopes = _slopes(states - state_mean, words - word_mean)
        rest = words - word_mean - _explained(states - state_mean, slopes)
        # A word that hardly ever occurs is no stranger than one occurrence can make it.
        word_spread = np.maximum(rest.std(axis=0), 1 / length)
        state_spread = np.maximum(states.std(axis=0), 1 / length)
        distances = ((rest / word_spread) ** 2).mean(axis=1)
        distances += (((states - state_mean) / state_spread) ** 2).mean(axis=1)
        noise = float(np.mean([chi_square_of_shares(one, word_mean) for one in words]))
        return cls(word_mean, state_mean, slopes, word_spread, state_spread, distances, noise)

    def seen(self, block: Stretch, centre: NDArray[np.float64]) -> "Seen":
        """Return what a distance needs of a block.

        Parameters
        ----------
        block
            Of about the length of these.
        centre
            float64[class]: the shares of words from which the block's are taken.
        """
        away = block.word_shares - centre
        weighted = away / self.word_spread**2
        along = [float((weighted * slope).mean()) for slope in self.slopes]
        return Seen(block.z, block.state_shares, float((weighted * away).mean()), np.array(along))

    def distance(self, seen: "Seen", states: NDArray[np.float64]) -> float:
        """Return how far a block is from the centre, in squared standard deviations.

        Parameters
        ----------
        seen
            Of the block.
        states
            float64[state]: the shares of states that go with the centre.

        Returns
        -------
        float
            The mean square over words, of what the block's states leave unexplained, and the
            mean square over states, added.
        """
        away = seen.states - states
        explained = _explained(away[None], self.slopes)[0]
        by_word = seen.square - 2 * float((away * seen.along).sum())
        by_word += float(((explained / self.word_spread) ** 2).mean())
        return max(by_word, 0.0) + float(((away / self.state_spread) ** 2).mean())


class Seen(NamedTuple):
    """What is kept of a block.

    Attributes
    ----------
    z : float
        Its surprise.
    states : float64[state]
        Its shares of states.
    square : float
        Mean square of its words less the centre, in units of their spread.
    along : float64[state]
        Mean product of these with each state's slopes.
    """

    z: float
    states: NDArray[np.float64]
    square: float
    along: NDArray[np.float64]


def typical_blocks(
    model: Model, drawn: Iterable[NDArray[np.uint8]], threads: int = 1
) -> tuple[Typical, ...]:
    """Return what blocks drawn from the model are like, for each of the ladder's lengths.

    Parameters
    ----------
    model
        The model.
    drawn
        uint8[position]: sequences of ``DRAWN_LENGTHS``.
    threads
        Threads to use; the result does not depend on it.
    """
    words = Words.of(model)
    found: list[list[Stretch]] = [[] for _ in range(LEVELS)]
    for bases in drawn:
        ladder = Ladder()
        contig = Contig("drawn", 0, bases, False, len(bases))
        for _, block in stretches_of(model, words, [contig], threads):
            for level, sums in ladder.climb(block):
                found[level].append(sums)
    return tuple(Typical.of(blocks, BLOCK << level) for level, blocks in enumerate(found))


def chi_square_of_shares(shares: NDArray[np.float64], centre: NDArray[np.float64]) -> float:
    """Return the sum over classes of (share - centre)**2 / centre, where centre is not 0."""
    used = centre > 0
    return float(((shares - centre)[used] ** 2 / centre[used]).sum())


def _explained(states: NDArray[np.float64], slopes: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return float64[block, class]: states times slopes, without a library whose bits vary."""
    total = np.zeros((len(states), slopes.shape[1]))
    for state, slope in enumerate(slopes):
        total += states[:, state, None] * slope
    return total


def _slopes(states: NDArray[np.float64], words: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return float64[state, class] of least squares, by elimination.

    Shares of states add up to 1, so the last of them is left with next to nothing to explain;
    a small ridge gives it nothing.
    """
    count = states.shape[1]
    square = np.array(
        [[(states[:, i] * states[:, j]).sum() for j in range(count)] for i in range(count)]
    )
    right = np.array([(states[:, i, None] * words).sum(axis=0) for i in range(count)])
    square[np.diag_indices(count)] += _RIDGE * max(float(np.trace(square)), _RIDGE)
    for i in range(count):
        for j in range(i + 1, count):
            factor = square[j, i] / square[i, i]
            square[j] -= factor * square[i]
            right[j] -= factor * right[i]
    for i in range(count - 1, -1, -1):
        for j in range(i + 1, count):
            right[i] -= square[i, j] * right[j]
        right[i] /= square[i, i]
    return right
