"""Identity of sequences, whichever strand was written down."""

import hashlib
from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from hmmseg.sequence.alphabet import CHUNK, reverse_complement

__all__ = ["strand_digest"]

Bases = npt.NDArray[np.uint8]


def strand_digest(bases: Bases) -> bytes:
    """SHA-256 of the codes of the strand that comes first in lexicographic order.

    A sequence and its reverse complement have the same digest. Missing bases count as one
    letter, so sequences that differ in IUPAC letters only are the same here; circular
    sequences cut at different points are not.

    Parameters
    ----------
    bases : uint8[position]
    """
    digest = hashlib.sha256()
    for piece in _pieces(bases, _other_is_first(bases)):
        digest.update(piece.tobytes())
    return digest.digest()


def _pieces(bases: Bases, other: bool) -> Iterator[Bases]:
    """Walk along one strand in pieces, so that a long record is never copied whole."""
    for offset in range(0, len(bases), CHUNK):
        if other:
            last = len(bases) - offset
            yield reverse_complement(bases[max(0, last - CHUNK) : last])
        else:
            yield bases[offset : offset + CHUNK]


def _other_is_first(bases: Bases) -> bool:
    """Whether the reverse complement comes before the sequence in lexicographic order."""
    for given, other in zip(_pieces(bases, False), _pieces(bases, True), strict=True):
        differs = given != other
        if differs.any():
            first = int(differs.argmax())
            return bool(other[first] < given[first])
    return False
