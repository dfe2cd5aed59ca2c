"""Records in blocks: what a model says of each, and its words; and sums of blocks in a row.

Memory is that of one record's bases and a few sums, whatever the assembly.
"""

import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.surprise import surprise_of_pieces
from hmmseg.kernels.tokens import base_codes
from hmmseg.model import Model
from hmmseg.model.contexts import (
    code_count,
    code_dtype,
    code_offset,
    missing_code,
    reverse_complement_words,
)
from hmmseg.sequence.alphabet import SYMBOLS
from hmmseg.sequence.contigs import Contig

__all__ = ["BLOCK", "LEVELS", "Ladder", "Stretch", "Words", "stretches_of"]

BLOCK = 5_000
"""Positions in the shortest block."""

LEVELS = 4
"""Blocks of one length, of two, of four, of eight of them."""

_LONGEST_WORD = 6
_CHUNK = 1 << 18
_NO_VARIANCE = 1e-9
"""Of a base, in square nats: all bases are as good as equally probable."""


@dataclass(frozen=True, eq=False)
class Words:
    """Words two bases longer than a model's contexts, at most six bases.

    Attributes
    ----------
    length : int
        Bases in a word.
    classes : int64[word]
        The class of each: a word and its reverse complement are one where strands are alike.
    count : int
        Number of classes.
    """

    length: int
    classes: NDArray[np.int64]
    count: int

    @classmethod
    def of(cls, model: Model) -> "Words":
        """Return the words that suit a model."""
        length = min(model.order + 2, _LONGEST_WORD)
        words = np.arange(4**length)
        if model.symmetric:
            words = np.minimum(words, reverse_complement_words(length))
        kept, classes = np.unique(words, return_inverse=True)
        return cls(length, classes.astype(np.int64), len(kept))

    def name(self, number: int) -> str:
        """Return a class's words as letters, such as ``CA/TG``."""
        alike = np.flatnonzero(self.classes == number).tolist()
        return "/".join(
            "".join(SYMBOLS[(word >> (2 * place)) & 3] for place in reversed(range(self.length)))
            for word in alike
        )

    def counts(self, contig: Contig, begin: int, stop: int) -> NDArray[np.int64]:
        """Return int64[class]: the words that end within a stretch of a contig.

        Parameters
        ----------
        contig
            The sequence.
        begin, stop
            Positions, half-open.
        """
        order = self.length - 1
        counts = np.zeros(code_count(order), np.int64)
        for first in range(begin, stop, _CHUNK):
            last = min(first + _CHUNK, stop)
            codes = np.empty(last - first, code_dtype(order))
            base_codes(contig.bases, order, contig.closed, first, last, codes)
            counts += np.bincount(codes, minlength=len(counts))
        whole = counts[code_offset(order) : missing_code(order)]
        return np.bincount(self.classes, weights=whole, minlength=self.count).astype(np.int64)


@dataclass(frozen=True, eq=False)
class Stretch:
    """Sums over some bases.

    Attributes
    ----------
    excess, variance : float
        Surprise beyond what was to be expected, and its variance, in nats.
    known : int
        Known bases.
    states : float64[state]
        Of P(state | all bases so far).
    words : int64[class]
        How often each class of words occurs.
    """

    excess: float
    variance: float
    known: int
    states: NDArray[np.float64]
    words: NDArray[np.int64]

    def plus(self, other: "Stretch | None") -> "Stretch":
        """Return the sums over both."""
        if other is None:
            return self
        return Stretch(
            self.excess + other.excess,
            self.variance + other.variance,
            self.known + other.known,
            self.states + other.states,
            self.words + other.words,
        )

    @property
    def z(self) -> float:
        """Excess in units of its standard deviation; 0 where nothing can surprise."""
        if self.variance <= _NO_VARIANCE * self.known:
            return 0.0
        return self.excess / math.sqrt(self.variance)

    @property
    def state_shares(self) -> NDArray[np.float64]:
        """float64[state]: shares of the known bases."""
        return self.states / max(self.known, 1)

    @property
    def word_shares(self) -> NDArray[np.float64]:
        """float64[class]: shares of all words."""
        return self.words / max(int(self.words.sum()), 1)


def stretches_of(
    model: Model, words: Words, contigs: Iterable[Contig], threads: int = 1
) -> Iterator[tuple[int, Stretch]]:
    """Yield the positions and sums of a record's blocks; the last one may be short.

    Parameters
    ----------
    model
        The model.
    words
        The words to count.
    contigs
        Of one record; a block may reach over several.
    threads
        Threads to use; the result does not depend on it.
    """
    filled, sums = 0, None
    for contig in contigs:
        inner = np.arange(BLOCK - filled, len(contig), BLOCK, dtype=np.int64)
        edges = np.concatenate(([0], inner, [len(contig)]))
        found = surprise_of_pieces(model, contig, edges, threads)
        for piece, (begin, stop) in enumerate(pairwise(edges.tolist())):
            own = Stretch(
                float(found.excess[piece]),
                float(found.variance[piece]),
                int(found.known[piece]),
                found.states[piece],
                words.counts(contig, begin, stop),
            )
            sums = own.plus(sums)
            filled += stop - begin
            if filled == BLOCK:
                yield filled, sums
                filled, sums = 0, None
    if sums is not None:
        yield filled, sums


class Ladder:
    """Sums of a record's blocks, and of two, four and eight of them in a row."""

    def __init__(self) -> None:
        self._sums: list[Stretch | None] = [None] * LEVELS
        self._full = 0

    def climb(self, block: Stretch) -> Iterator[tuple[int, Stretch]]:
        """Take in a whole block; yield each level that it completes, and the sums there."""
        self._full += 1
        for level in range(LEVELS):
            sums = block.plus(self._sums[level])
            full = self._full % (1 << level) == 0
            self._sums[level] = None if full else sums
            if full:
                yield level, sums
