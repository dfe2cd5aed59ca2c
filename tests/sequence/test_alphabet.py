"""Letters and codes, against Biopython's complement and a table written out by hand."""

import numpy as np
import pytest
from Bio.Seq import Seq
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from hmmseg.errors import SequenceError
from hmmseg.sequence import alphabet
from hmmseg.sequence.alphabet import decode, encode, foreign_letter, reverse_complement

IUPAC = "ACGTUNRYSWKMBDHV"
codes = hnp.arrays(np.uint8, st.integers(0, 60), elements=st.integers(0, 4))


def test_every_iupac_letter_in_both_cases() -> None:
    expected = [0, 1, 2, 3, 3] + [4] * 11
    assert encode(IUPAC).tolist() == expected
    assert encode(IUPAC.lower()).tolist() == expected
    assert encode(IUPAC.encode()).tolist() == expected
    assert encode(IUPAC).dtype == np.uint8


def test_every_other_byte_is_foreign() -> None:
    allowed = set((IUPAC + IUPAC.lower()).encode())
    for byte in range(256):
        found = foreign_letter(b"ACG" + bytes([byte]) + b"T")
        assert found == (None if byte in allowed else 3)


@pytest.mark.parametrize("letter", ["-", ".", "*", "X", "E", " ", "\t", "1", "é", "\ufffd"])
def test_foreign_letter_is_named_with_its_position(letter: str) -> None:
    with pytest.raises(SequenceError, match=r"^position 5: .* is not an IUPAC nucleotide letter;"):
        encode("ACGT" + letter + "A")


def test_position_counts_over_chunks(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(alphabet, "CHUNK", 4)
    assert foreign_letter("ACGTACGTAZ") == 9
    assert encode("ACGTACGTAC").tolist() == [0, 1, 2, 3, 0, 1, 2, 3, 0, 1]


@given(codes)
def test_decode_undoes_encode(bases: np.ndarray) -> None:
    assert encode(decode(bases)).tolist() == bases.tolist()


@given(codes)
def test_reverse_complement_is_an_involution(bases: np.ndarray) -> None:
    other = reverse_complement(bases)
    assert other.dtype == np.uint8
    assert reverse_complement(other).tolist() == bases.tolist()


@given(st.text(alphabet=IUPAC + IUPAC.lower(), max_size=60))
def test_reverse_complement_agrees_with_biopython(text: str) -> None:
    expected = encode(str(Seq(text).reverse_complement()))
    assert reverse_complement(encode(text)).tolist() == expected.tolist()


def test_reverse_complement_leaves_its_input_alone() -> None:
    bases = encode("AACGN")
    reverse_complement(bases)
    assert decode(bases) == "AACGN"
