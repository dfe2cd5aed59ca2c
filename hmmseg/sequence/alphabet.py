"""The alphabet: letters to codes and back, and the other strand.

A C G T are 0 1 2 3, U reads as T, and every other IUPAC nucleotide letter, N among them, is
*missing* (4). Lower case reads like upper case.

References
----------
Nomenclature Committee of the International Union of Biochemistry (1985). Nomenclature for
incompletely specified bases in nucleic acid sequences. Eur. J. Biochem. 150:1-5.
"""

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from hmmseg.errors import SequenceError

__all__ = [
    "AMBIGUOUS",
    "CHUNK",
    "FOREIGN",
    "LETTER_N",
    "LOWER",
    "MISSING",
    "SYMBOLS",
    "count_known",
    "decode",
    "encode",
    "foreign_letter",
    "letter_kinds",
    "letters",
    "reverse_complement",
    "text_chunks",
]

SYMBOLS = "ACGT"
MISSING = 4

# Bits of a letter's kind, as letter_kinds gives them.
LETTER_N = 1
LOWER = 2
AMBIGUOUS = 4
FOREIGN = 8

CHUNK = 1 << 22
"""Positions handled at once: temporary arrays stay at a few megabytes for any record."""

_AMBIGUOUS_LETTERS = "RYSWKMBDHV"
_HINTS = {
    "-": "remove alignment gaps",
    ".": "remove alignment gaps",
    "*": "protein sequence cannot be used",
}


def _tables() -> tuple[bytes, bytes]:
    """Build the 256-entry tables from byte to code and from byte to kind."""
    codes = bytearray([MISSING] * 256)
    kinds = bytearray([FOREIGN] * 256)
    for letter in SYMBOLS + "UN" + _AMBIGUOUS_LETTERS:
        code = "ACGU".find(letter) if letter == "U" else SYMBOLS.find(letter)
        kind = (letter == "N") * LETTER_N + (letter in _AMBIGUOUS_LETTERS) * AMBIGUOUS
        for byte, lower in ((ord(letter), 0), (ord(letter.lower()), LOWER)):
            codes[byte] = MISSING if code < 0 else code
            kinds[byte] = kind | lower
    return bytes(codes), bytes(kinds)


_CODES, _KINDS = _tables()
_LETTERS = b"ACGTN" + b"?" * 251


def text_chunks(text: bytes | str) -> Iterator[tuple[int, bytes]]:
    """Cut a text into pieces of one byte per letter.

    A letter outside ASCII becomes ``?``, which is outside the alphabet too.

    Yields
    ------
    offset : int
        Position of the piece's first letter.
    piece : bytes
    """
    for offset in range(0, len(text), CHUNK):
        piece = text[offset : offset + CHUNK]
        yield offset, piece.encode("ascii", "replace") if isinstance(piece, str) else piece


def letter_kinds(piece: bytes) -> npt.NDArray[np.uint8]:
    """Classify letters.

    Returns
    -------
    uint8[position]
        Sum of `LETTER_N`, `LOWER`, `AMBIGUOUS` (an IUPAC letter other than A C G T U N) and
        `FOREIGN` (not an IUPAC nucleotide letter); 0 for a plain upper-case base.
    """
    return np.frombuffer(piece.translate(_KINDS), dtype=np.uint8)


def foreign_letter(text: bytes | str) -> int | None:
    """Position (0-based) of the first letter that is not an IUPAC nucleotide letter, or None."""
    for offset, piece in text_chunks(text):
        foreign = letter_kinds(piece) == FOREIGN
        if foreign.any():
            return offset + int(foreign.argmax())
    return None


def encode(text: bytes | str) -> npt.NDArray[np.uint8]:
    """Turn letters into codes.

    Parameters
    ----------
    text : bytes or str
        IUPAC nucleotide letters, upper or lower case.

    Returns
    -------
    uint8[position]
        0 to 3 for A C G T (U as T), 4 for a missing base.

    Raises
    ------
    SequenceError
        A letter is not an IUPAC nucleotide letter; the message gives its 1-based position.
    """
    position = foreign_letter(text)
    if position is not None:
        letter = text[position : position + 1]
        shown = letter if isinstance(letter, str) else letter.decode("latin-1")
        hint = _HINTS.get(shown, "only nucleotide sequence can be used")
        raise SequenceError(
            f"position {position + 1}: {shown!r} is not an IUPAC nucleotide letter; {hint}"
        )
    codes = np.empty(len(text), dtype=np.uint8)
    for offset, piece in text_chunks(text):
        translated = np.frombuffer(piece.translate(_CODES), dtype=np.uint8)
        codes[offset : offset + len(piece)] = translated
    return codes


def decode(codes: npt.NDArray[np.uint8]) -> str:
    """Turn codes (uint8[position]) into upper-case letters, missing bases into N."""
    return letters(codes).decode("ascii")


def letters(codes: npt.NDArray[np.uint8]) -> bytes:
    """Do as :func:`decode` does; return ASCII."""
    return codes.tobytes().translate(_LETTERS)


def count_known(codes: npt.NDArray[np.uint8]) -> int:
    """Return how many codes (uint8[position]) are of A C G T."""
    # Piece by piece: a mask of a whole record costs more than the counting.
    return sum(
        int(np.count_nonzero(codes[at : at + CHUNK] != MISSING))
        for at in range(0, len(codes), CHUNK)
    )


def reverse_complement(codes: npt.NDArray[np.uint8]) -> npt.NDArray[np.uint8]:
    """Codes of the other strand, read in its own direction.

    Parameters
    ----------
    codes : uint8[position]

    Returns
    -------
    uint8[position]
        A new array; missing bases stay missing.
    """
    # Exclusive or with 3 swaps 0-3 and 1-2 and makes 7 of 4, which the minimum restores.
    flipped = np.bitwise_xor(codes[::-1], np.uint8(3))
    return np.minimum(flipped, np.uint8(MISSING), out=flipped)
