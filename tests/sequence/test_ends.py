"""Telomere-like repeats: published motifs are found, ordinary sequence is not one."""

import numpy as np
import pytest
from Bio.Seq import Seq
from hypothesis import given
from hypothesis import strategies as st

from hmmseg.sequence.alphabet import encode, reverse_complement
from hmmseg.sequence.ends import canonical_unit, end_repeats, tandem_repeat

# Telomere repeats as published, with the organism and the paper (from memory).
TELOMERES = {
    "TTGGGG": "Tetrahymena thermophila, Blackburn & Gall 1978",
    "TTAGGG": "human, Moyzis et al. 1988",
    "TTTAGGG": "Arabidopsis thaliana, Richards & Ausubel 1988",
    "TTAGG": "Bombyx mori, Okazaki et al. 1993",
    "TTTTAGGG": "Chlamydomonas reinhardtii, Petracek et al. 1990",
}


def random_text(seed: int, length: int, gc: float = 0.5) -> str:
    shares = [(1 - gc) / 2, gc / 2, gc / 2, (1 - gc) / 2]
    return "".join(np.random.default_rng(seed).choice(list("ACGT"), size=length, p=shares))


@pytest.mark.parametrize("unit", TELOMERES)
def test_published_telomeres_at_both_ends(unit: str) -> None:
    inner = random_text(1, 2000)
    other = str(Seq(unit).reverse_complement())
    bases = encode(other * 20 + inner + unit * 15)
    start, end = end_repeats(bases)
    assert start is not None
    assert end is not None
    assert start.unit == end.unit == canonical_unit(unit)
    # What follows may carry the repeat on by chance, for less than a unit.
    assert 20 <= start.copies < 21
    assert 15 <= end.copies < 16


def test_canonical_units_by_hand() -> None:
    assert canonical_unit("TTAGGG") == canonical_unit("CCCTAA") == "AACCCT"
    assert canonical_unit("TTTAGGG") == "AAACCCT"
    # The other strand is TGTAATC; of all fourteen rotations only one begins with AA.
    assert canonical_unit("GATTACA") == "AATCTGT"


@given(st.text(alphabet="ACGT", min_size=5, max_size=8), st.integers(0, 7))
def test_canonical_unit_ignores_rotation_and_strand(unit: str, turn: int) -> None:
    turned = unit[turn % len(unit) :] + unit[: turn % len(unit)]
    assert canonical_unit(turned) == canonical_unit(unit)
    assert canonical_unit(str(Seq(turned).reverse_complement())) == canonical_unit(unit)
    assert canonical_unit(unit) in unit * 2 or canonical_unit(unit) in str(
        Seq(unit * 2).reverse_complement()
    )


@given(st.sampled_from(sorted(TELOMERES)), st.integers(0, 2**32 - 1))
def test_other_strand_has_the_same_repeat(unit: str, seed: int) -> None:
    text = random_text(seed, 100) + unit * 10 + random_text(seed + 1, 60)
    assert tandem_repeat(encode(text)) == tandem_repeat(reverse_complement(encode(text)))


@pytest.mark.parametrize("gc", [0.15, 0.3, 0.5, 0.7])
def test_random_sequence_has_none(gc: float) -> None:
    found = [tandem_repeat(encode(random_text(seed, 300, gc))) for seed in range(500)]
    assert found == [None] * 500


@pytest.mark.parametrize("unit", ["A", "AT", "CAG", "GATA", "N"])
def test_shorter_units_are_not_reported(unit: str) -> None:
    assert tandem_repeat(encode(unit * 300)) is None


def test_six_copies_of_six_are_the_least() -> None:
    flank = "CATGCAGT"
    assert tandem_repeat(encode(flank + "TTAGGG" * 6 + flank)) is not None
    assert tandem_repeat(encode(flank + ("TTAGGG" * 6)[:-1] + flank)) is None


def test_errors_and_missing_bases_are_bridged() -> None:
    text = "TTAGGG" * 10 + "TTACGG" + "TTAGGG" * 10 + "TTNGGG" + "TTAGGG" * 10
    repeat = tandem_repeat(encode(text))
    assert repeat == ("AACCCT", 32.0)


def test_repeat_inside_is_not_at_an_end() -> None:
    text = random_text(3, 400) + "TTAGGG" * 20 + random_text(4, 400)
    assert end_repeats(encode(text)) == (None, None)


@pytest.mark.parametrize("length", range(10))
def test_shortest_records(length: int) -> None:
    assert end_repeats(encode("ACGTTGCAAC"[:length])) == (None, None)
