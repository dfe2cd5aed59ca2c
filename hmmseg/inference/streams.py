"""Contigs as streams of tokens, cut into blocks of fixed geometry.

Block edges depend on the contig alone, never on threads, so that sums are always taken in the
same order and results have the same bits on any number of threads.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from threading import Lock

import numpy as np
from numpy.typing import NDArray

from hmmseg.inference.threads import in_threads
from hmmseg.kernels.tokens import base_codes, code_total, token_count, tokenise
from hmmseg.model.contexts import code_dtype
from hmmseg.sequence.alphabet import MISSING, count_known, reverse_complement
from hmmseg.sequence.contigs import Contig

__all__ = ["BLOCK", "Corpus", "Stream", "block_edges", "build_stream"]

BLOCK = 8192
"""Bases in a block."""


def block_edges(
    length: int, closed: bool, reverse: bool = False, block: int = BLOCK
) -> NDArray[np.int64]:
    """Return the positions at which a contig is cut.

    An open contig's first base has no predecessor and belongs to no block, so its edges begin
    at 1. Edges of the reverse strand mirror those of the forward strand.

    Parameters
    ----------
    length
        Of the contig in bases.
    closed
        Whether it is a circle.
    reverse
        Whether the reverse strand is read.
    block
        Bases in a block.
    """
    first = 0 if closed else 1
    inner = np.arange(length % block if reverse else block, length, block, dtype=np.int64)
    edges = np.concatenate(([first], inner[inner > first], [length]))
    return edges[:1] if first == length else edges


@dataclass(frozen=True, eq=False)
class Stream:
    """Tokens of one strand of some contigs.

    Attributes
    ----------
    strands : list of uint8[position]
        The bases of each contig as this strand reads them.
    closed : bool[contig]
        Whether the contig is a circle.
    order, word : int
        Context length, and bases in a word.
    tokens : uint16[token] or uint32[token]
        All contigs' tokens, one after the other.
    bounds : int64[block + 1]
        Token offsets of the blocks.
    edges : list of int64[block + 1]
        Base positions of the blocks of each contig.
    contig_blocks : int64[contig + 1]
        Block offsets of the contigs.
    heads : int64[contig]
        Code of the first base of an open contig.
    labels : list of uint8[position], or None
        Labels of each contig as this strand reads them: 0 for none, ``s + 1`` for state ``s``.
        A labelled base's code is that of the base in the label's own copy of the codes.
    """

    strands: list[NDArray[np.uint8]]
    closed: NDArray[np.bool_]
    order: int
    word: int
    tokens: NDArray[np.unsignedinteger]
    bounds: NDArray[np.int64]
    edges: list[NDArray[np.int64]]
    contig_blocks: NDArray[np.int64]
    heads: NDArray[np.int64]
    labels: list[NDArray[np.uint8]] | None = None

    def codes(self, contig: int) -> NDArray[np.unsignedinteger]:
        """Return the codes of all bases of one contig."""
        bases = self.strands[contig]
        codes = np.empty(bases.size, code_dtype(self.order))
        base_codes(bases, self.order, bool(self.closed[contig]), 0, bases.size, codes)
        if self.labels is None:
            return codes
        return codes + self.labels[contig].astype(np.uint32) * np.uint32(code_total(self.order))

    def labelled(self, labels: list[NDArray[np.uint8]]) -> "Stream":
        """Return the stream with labels, in the direction in which it reads; words must be 1."""
        if self.word != 1:
            raise ValueError("labels need tokens of one base")
        codes = code_total(self.order)
        behind = [own[int(cuts[0]) :] for own, cuts in zip(labels, self.edges, strict=True)]
        firsts = np.array([own[0] for own in labels], dtype=np.int64)
        return replace(
            self,
            tokens=self.tokens + np.concatenate(behind).astype(np.uint32) * np.uint32(codes),
            heads=self.heads + firsts * codes,
            labels=labels,
        )


def build_stream(
    contigs: Sequence[Contig],
    order: int,
    word: int,
    reverse: bool = False,
    threads: int = 1,
    block: int = BLOCK,
) -> Stream:
    """Cut contigs into blocks and their bases into tokens.

    Parameters
    ----------
    contigs
        At least one base each.
    order
        Context length in bases.
    word
        Bases in a word token; 1 for none.
    reverse
        Read the reverse complement.
    threads
        Threads to use.
    block
        Bases in a block; another than the default only in tests.
    """
    strands = [reverse_complement(c.bases) if reverse else c.bases for c in contigs]
    edges = [block_edges(len(c), c.closed, reverse, block) for c in contigs]
    blocks = [
        (strand, contig.closed, begin, stop)
        for strand, contig, cuts in zip(strands, contigs, edges, strict=True)
        for begin, stop in pairwise(cuts.tolist())
    ]

    def count(piece: slice) -> list[int]:
        return [token_count(s, order, word, c, b, e) for s, c, b, e in blocks[piece]]

    pieces = [slice(at, at + 64) for at in range(0, len(blocks), 64)]
    counts = [n for some in in_threads(count, pieces, threads) for n in some]
    bounds = np.concatenate(([0], np.cumsum(np.array(counts, dtype=np.int64))))
    kinds = code_total(order) + (4 ** (order + word) if word > 1 else 0)
    small = kinds <= np.iinfo(np.uint16).max + 1
    tokens = np.empty(bounds[-1], np.uint16 if small else np.uint32)

    def fill(piece: slice) -> None:
        offsets = bounds[:-1][piece]
        for offset, (strand, closed, begin, stop) in zip(offsets, blocks[piece], strict=True):
            tokenise(strand, order, word, closed, begin, stop, tokens[offset:])

    in_threads(fill, pieces, threads)
    first_bases = np.array([strand[0] for strand in strands], dtype=np.int64)
    return Stream(
        strands=strands,
        closed=np.array([c.closed for c in contigs], dtype=bool),
        order=order,
        word=word,
        tokens=tokens,
        bounds=bounds,
        edges=edges,
        contig_blocks=np.cumsum([0] + [len(cuts) - 1 for cuts in edges]),
        heads=np.where(first_bases == MISSING, code_total(order) - 1, first_bases),
    )


class Corpus:
    """Contigs prepared for inference under models of one order, strands and word length kept.

    Parameters
    ----------
    contigs
        The sequence.
    order
        Context length in bases.
    both_strands
        Whether the reverse strand is read, too.
    threads
        Threads to use when tokens are made.
    block
        Bases in a block; another than the default only in tests.
    labels
        uint8[position] of each contig: 0, or ``s + 1`` where the state must be ``s``.
    """

    def __init__(
        self,
        contigs: Sequence[Contig],
        order: int,
        both_strands: bool,
        threads: int = 1,
        block: int = BLOCK,
        labels: Sequence[NDArray[np.uint8]] | None = None,
    ) -> None:
        self.contigs = list(contigs)
        self.labels = None if labels is None else list(labels)
        self.order = order
        self.both_strands = both_strands
        self.block = block
        self._threads = threads
        self._lock = Lock()
        self._streams: dict[int, list[Stream]] = {}
        self.known = [count_known(c.bases) for c in self.contigs]

    @property
    def bases(self) -> int:
        """Known bases, on one strand."""
        return sum(self.known)

    @property
    def closed_lengths(self) -> list[int]:
        """Lengths of the circles, in bases."""
        return [len(c) for c in self.contigs if c.closed]

    def streams(self, word: int) -> list[Stream]:
        """Return the forward stream, and the reverse one where it is read; made once.

        Several fits may ask at once.
        """
        with self._lock:
            if word not in self._streams:
                self._streams[word] = [
                    self._stream(word, reverse)
                    for reverse in ((False, True) if self.both_strands else (False,))
                ]
            return self._streams[word]

    def _stream(self, word: int, reverse: bool) -> Stream:
        stream = build_stream(self.contigs, self.order, word, reverse, self._threads, self.block)
        if self.labels is None:
            return stream
        return stream.labelled([own[::-1] if reverse else own for own in self.labels])
