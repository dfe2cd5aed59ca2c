"""Sequence with regions of another GC, drawn base by base, not from a model of hmmseg."""

from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hmmseg.evidence.pieces import Piece, cut
from hmmseg.sequence.alphabet import decode
from hmmseg.sequence.contigs import Contig

__all__ = ["drawn_contigs", "drawn_pieces", "plain_pieces", "write_drawn"]


def drawn_contigs(
    seed: int, bases: int, region: int, spacing: int, gc: tuple[float, float], contigs: int = 50
) -> tuple[list[Contig], list[NDArray[np.int64]]]:
    """Return contigs and the regions on them.

    Every region has the same length; the stretches between them are exponential.
    """
    random = np.random.default_rng(seed)
    length = bases // contigs
    found, truth = [], []
    for number in range(contigs):
        strong = np.full(length, gc[0])
        spans = []
        at = int(random.exponential(spacing)) + 1
        while at + region < length:
            spans.append((at, at + region))
            strong[at : at + region] = gc[1]
            at += region + int(random.exponential(spacing)) + 1
        is_strong = random.random(length) < strong
        letters = random.integers(0, 2, length)
        sequence = np.where(is_strong, 1 + letters, 3 * letters).astype(np.uint8)
        found.append(Contig(f"c{number}", 0, sequence, False, length))
        truth.append(np.array(spans, np.int64).reshape(-1, 2))
    return found, truth


def drawn_pieces(
    seed: int, bases: int, region: int, spacing: int, gc: tuple[float, float], contigs: int = 50
) -> list[Piece]:
    """Return whole contigs as pieces with their regions."""
    found, truth = drawn_contigs(seed, bases, region, spacing, gc, contigs)
    return cut(found, bases // contigs, truth)


def plain_pieces(seed: int, bases: int, pieces: int = 100) -> list[Piece]:
    """Return pieces of independent bases with a GC of 40 % and no regions."""
    contigs, _ = drawn_contigs(seed, bases, bases, 10 * bases, (0.4, 0.4), pieces)
    return cut(contigs, bases // pieces)


def write_drawn(folder: Path, drawn: tuple[Sequence[Contig], Sequence[NDArray[np.int64]]]) -> None:
    """Write contigs to ``s.fa``, and the regions on them, named ``rich``, to ``truth.bed``."""
    with (folder / "s.fa").open("w") as fasta, (folder / "truth.bed").open("w") as bed:
        for contig, spans in zip(*drawn, strict=True):
            fasta.write(f">{contig.record}\n{decode(contig.bases)}\n")
            bed.writelines(f"{contig.record}\t{start}\t{end}\trich\n" for start, end in spans)
