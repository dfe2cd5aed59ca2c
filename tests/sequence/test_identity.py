"""Digests tell sequences apart but not their strands."""

import hashlib

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from hmmseg.sequence import identity
from hmmseg.sequence.alphabet import encode, reverse_complement
from hmmseg.sequence.identity import checksums, record_digest, strand_digest
from hmmseg.sequence.reading import record_from_text

codes = hnp.arrays(np.uint8, st.integers(1, 30), elements=st.integers(0, 4))


def plain_digest(bases: np.ndarray) -> bytes:
    """SHA-256 of the smaller of the two strands as Python orders bytes."""
    return hashlib.sha256(min(bases.tobytes(), reverse_complement(bases).tobytes())).digest()


@settings(max_examples=100)
@given(codes, st.integers(1, 12))
def test_digest_is_that_of_the_smaller_strand(bases: np.ndarray, chunk: int) -> None:
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(identity, "CHUNK", chunk)
        assert strand_digest(bases) == plain_digest(bases)
        assert strand_digest(reverse_complement(bases)) == plain_digest(bases)


def test_palindrome_and_neighbours() -> None:
    assert strand_digest(encode("GAATTC")) == plain_digest(encode("GAATTC"))
    texts = ["GAATTC", "GAATTA", "GAATT", "GAATTCN", "CTTAAG"]
    assert len({strand_digest(encode(text)) for text in texts}) == len(texts)


def test_checksums_are_those_of_the_letters() -> None:
    """Against hashlib, on upper-case letters with N for all that is not known."""
    found = checksums(encode("ACGTuRNNca"))
    assert found.given == hashlib.sha256(b"ACGTTNNNCA").hexdigest()
    assert found.reverse == hashlib.sha256(b"TGNNNAACGT").hexdigest()


def test_a_digest_changes_with_all_that_bears_on_calls_and_not_with_the_name() -> None:
    def digest(text: str, name: str = "a", circular: bool = False, exclude: object = None) -> str:
        record = record_from_text(name, text, circular=circular)
        cut = None if exclude is None else np.array(exclude)
        return record_digest(record, checksums(record.bases).given, cut)

    plain = digest("ACGTNACGT")
    assert digest("ACGTNACGT", name="b") == plain
    others = [
        digest("ACGTRACGT"),  # an ambiguous letter is no gap, however many there are
        digest("ACGTNACGA"),
        digest("ACgtNACGT"),
        digest("ACGTNACGT", circular=True),
        digest("ACGTNACGT", exclude=[[1, 3]]),
    ]
    assert len({plain, *others}) == 6
