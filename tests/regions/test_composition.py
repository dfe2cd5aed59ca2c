"""Composition of regions, against counting letter by letter and worked examples."""

import itertools
import math
from collections import Counter
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hmmseg.kernels.pairs import count_pairs
from hmmseg.regions import composition
from hmmseg.regions.composition import (
    MEASURES,
    WORDS,
    Counts,
    counts_of_record,
    counts_together,
    measures,
)
from hmmseg.sequence.alphabet import reverse_complement
from hmmseg.sequence.reading import Record, record_from_text
from tests.reference_regions import plain_pairs

SHOWN = 1e-9
"""Far below the four decimals that are written."""


def record_of(text: str, circular: bool = False) -> Record:
    return record_from_text("r", text, circular=circular)


def plain_counts(letters: str) -> dict[str, int]:
    """Count bases and dinucleotides one by one."""
    letters = letters.upper()
    found = Counter(letters) + Counter(a + b for a, b in itertools.pairwise(letters))
    return {word: found[word] for word in WORDS}


def plain_measures(letters: str, genome: str, genome_circular: bool) -> list[float]:
    """Compute the measures from the formulas, in fractions and letters."""
    n = plain_counts(letters)
    bases = sum(n[x] for x in "ACGT")

    def ratio(above: int, below: int) -> float:
        return float(Fraction(above, below)) if below else math.nan

    pairs = [n[x + y] for x in "ACGT" for y in "ACGT" if n[x + y]]
    total = sum(pairs)
    return [
        ratio(n["C"] + n["G"], bases),
        ratio(n["CG"] * bases, n["C"] * n["G"]),
        ratio(n["G"] - n["C"], n["G"] + n["C"]),
        ratio(n["A"] - n["T"], n["A"] + n["T"]),
        -sum(p / total * math.log2(p / total) for p in pairs) if total else math.nan,
        plain_distance(letters, False, genome, genome_circular),
    ]


def plain_distance(one: str, one_circular: bool, other: str, other_circular: bool) -> float:
    """Karlin & Burge 1995: (1/16) sum |rho*(f) - rho*(g)|, each with its reverse complement."""
    both = zip(plain_rho(one, one_circular), plain_rho(other, other_circular), strict=True)
    return sum(abs(a - b) for a, b in both) / 16


def plain_rho(letters: str, circular: bool) -> list[float]:
    letters = letters.upper()
    other = letters.translate(str.maketrans("ACGT", "TGCA"))[::-1]
    single = Counter(x for x in letters + other if x in "ACGT")
    double: Counter[str] = Counter()
    for strand in (letters, other):
        around = strand + strand[0] if circular else strand
        double += Counter(a + b for a, b in itertools.pairwise(around) if {a, b} <= set("ACGT"))
    bases, pairs = sum(single.values()), sum(double.values())
    if any(single[x] == 0 for x in "ACGT") or pairs == 0:
        return [math.nan] * 16
    return [
        float(Fraction(double[x + y] * bases * bases, pairs * single[x] * single[y]))
        for x in "ACGT"
        for y in "ACGT"
    ]


@given(bases=st.lists(st.integers(0, 4), min_size=1, max_size=40), data=st.data())
def test_pairs_are_those_of_the_twin(bases: list[int], data: st.DataObject) -> None:
    start = data.draw(st.integers(0, len(bases) - 1))
    end = data.draw(st.integers(start + 1, start + len(bases)))
    counts = np.full((1, 25), 7)
    count_pairs(np.array(bases, np.uint8), np.array([start]), np.array([end]), counts)
    assert counts.reshape(5, 5).tolist() == plain_pairs(bases, start, end)


@given(
    text=st.text("ACGTNacgtn", min_size=1, max_size=120),
    circular=st.booleans(),
    data=st.data(),
)
@settings(max_examples=150, deadline=None)
def test_as_letter_by_letter(text: str, circular: bool, data: st.DataObject) -> None:
    spans = []
    for _ in range(data.draw(st.integers(0, 4))):
        start = data.draw(st.integers(0, len(text) - 1))
        stop = start + len(text) if circular else len(text)
        spans.append((start, data.draw(st.integers(start + 1, stop))))
    starts, ends = np.array(spans, np.int64).reshape(-1, 2).T
    counts = counts_of_record(record_of(text, circular), starts, ends)
    around = text + text[0] if circular else text
    whole = plain_counts(text)
    whole |= {word: n for word, n in plain_counts(around).items() if len(word) == 2}
    assert counts.genome.tolist() == list(whole.values())
    letters = [(text + text)[start:end] for start, end in spans]
    assert counts.regions.tolist() == [list(plain_counts(one).values()) for one in letters]
    table = measures(counts)
    assert tuple(table.columns) == MEASURES
    for row, one in zip(table.to_numpy(), letters, strict=True):
        np.testing.assert_allclose(row, plain_measures(one, text, circular), 0, SHOWN)


def test_parts_together_are_the_whole() -> None:
    texts = ["ACGTTGCAACGGT", "N", "GGGCATCGATCGAACGTT"]
    spans = [[(0, 5), (4, 13)], [], [(2, 18)]]
    parts = [
        counts_of_record(record_of(text), *np.array(span, np.int64).reshape(-1, 2).T)
        for text, span in zip(texts, spans, strict=True)
    ]
    whole = counts_together(parts)
    assert whole.genome.tolist() == np.sum([part.genome for part in parts], axis=0).tolist()
    assert len(whole.regions) == 3
    assert counts_together([counts_together(parts[:2]), parts[2]]).regions.tolist() == (
        whole.regions.tolist()
    )
    together = measures(whole)
    assert not np.allclose(
        together["dinucleotide_distance"][:2], measures(parts[0])["dinucleotide_distance"]
    )


def test_many_regions_are_measured_piece_by_piece(monkeypatch: pytest.MonkeyPatch) -> None:
    random = np.random.default_rng(1)
    text = "".join(random.choice(list("ACGT"), 500))
    starts = random.integers(0, 400, 23)
    counts = counts_of_record(record_of(text), starts, starts + 90)
    whole = measures(counts)
    monkeypatch.setattr(composition, "_AT_ONCE", 5)
    assert measures(counts).equals(whole)
    assert len(whole) == 23


def test_a_worked_example() -> None:
    # ACGACG and its reverse complement CGTCGT, by hand: A C G T = 2 4 4 2 of 12; the ten pairs are
    # AC CG GA AC CG and CG GT TC CG GT: AC 2, CG 4, GA 1, GT 2, TC 1.
    # rho*(CG) = 0.4 / (1/3 x 1/3) = 3.6, rho*(AC) = rho*(GT) = 0.2 / (1/6 x 1/3) = 3.6,
    # rho*(GA) = rho*(TC) = 0.1 / (1/18) = 1.8, and 0 for the other eleven.
    # In a genome of all 16 pairs alike every rho* is 1: (3 x 2.6 + 2 x 0.8 + 11 x 1) / 16 = 1.275.
    own = counts_of_record(record_of("ACGACG"), np.array([0]), np.array([6]))
    even = np.array([4] * 4 + [1] * 16)
    row = measures(Counts(even, own.regions)).iloc[0]
    assert row["dinucleotide_distance"] == pytest.approx(1.275, abs=SHOWN)
    assert row["gc"] == pytest.approx(2 / 3, abs=SHOWN)
    assert row["cpg_ratio"] == pytest.approx(2 * 6 / (2 * 2), abs=SHOWN)
    assert (row["gc_skew"], row["at_skew"]) == (0.0, 1.0)
    # AC CG GA AC CG: shares 2/5, 2/5, 1/5.
    expected = 2 * 0.4 * math.log2(2.5) + 0.2 * math.log2(5)
    assert row["dinucleotide_entropy"] == pytest.approx(expected, abs=SHOWN)


@given(text=st.text("ACGT", min_size=8, max_size=60))
@settings(deadline=None)
def test_the_other_strand_has_the_same_composition(text: str) -> None:
    record = record_of(text)
    other = Record(**{**vars(record), "bases": reverse_complement(record.bases)})
    span = np.array([0]), np.array([len(text)])
    one, two = (measures(counts_of_record(r, *span)) for r in (record, other))
    for name in ("gc", "cpg_ratio", "dinucleotide_distance", "dinucleotide_entropy"):
        np.testing.assert_allclose(one[name], two[name], 0, SHOWN)
    for name in ("gc_skew", "at_skew"):
        np.testing.assert_allclose(one[name], -two[name], 0, SHOWN)


def test_undefined_measures_are_not_numbers() -> None:
    spans = np.array([[0, 4], [4, 8], [8, 9]]).T
    table = measures(counts_of_record(record_of("AAAACCCCN"), *spans))
    assert table["gc"].tolist()[:2] == [0.0, 1.0]
    assert table["dinucleotide_entropy"].tolist()[:2] == [0.0, 0.0]
    undefined = {(name, i) for name in MEASURES for i in range(3) if math.isnan(table[name][i])}
    always = {(name, i) for name in ("cpg_ratio", "dinucleotide_distance") for i in range(3)}
    assert undefined == always | {(name, 2) for name in MEASURES} | {
        ("gc_skew", 0),
        ("at_skew", 1),
    }
