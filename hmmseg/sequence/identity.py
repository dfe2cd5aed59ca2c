"""Identity of sequences, whichever strand was written down."""

import hashlib
from collections.abc import Iterator
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from hmmseg.sequence.alphabet import CHUNK, letters, reverse_complement
from hmmseg.sequence.reading import Record

__all__ = ["Checksums", "KnownRecord", "checksums", "record_digest", "strand_digest"]

Bases = npt.NDArray[np.uint8]


class Checksums(NamedTuple):
    """SHA-256 of a sequence in upper-case letters, all but A C G T written N, and of its reverse.

    Attributes
    ----------
    given, reverse : str
        Of the sequence as written, and of its reverse complement, in hexadecimal digits.
    """

    given: str
    reverse: str


class KnownRecord(NamedTuple):
    """What is kept of a record, by which it can be recognised.

    Attributes
    ----------
    name : str
        Its name.
    length : int
        In bases.
    circular : bool
        Whether the position after the last is the first.
    sequence : Checksums
        Checksums of its letters.
    """

    name: str
    length: int
    circular: bool
    sequence: Checksums


def checksums(bases: Bases) -> Checksums:
    """Checksums by which records of two assemblies can be recognised; bases uint8[position]."""
    found = []
    for other in (False, True):
        digest = hashlib.sha256()
        for piece in _pieces(bases, other):
            digest.update(letters(piece))
        found.append(digest.hexdigest())
    return Checksums(*found)


def record_digest(record: Record, given: str, exclude: npt.NDArray[np.int64] | None) -> str:
    """SHA-256 of everything about a record that bears on its calls; its name does not.

    Parameters
    ----------
    record : Record
    given : str
        The checksum of its sequence as written.
    exclude : int64[interval, 2], optional
        Intervals of it that are left out.
    """
    digest = hashlib.sha256(f"{given} {len(record)} {record.circular}".encode())
    for intervals in (record.n_runs, record.soft_mask, exclude):
        listed = [] if intervals is None else intervals.tolist()
        digest.update(f"{listed}".encode())
    return digest.hexdigest()


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
