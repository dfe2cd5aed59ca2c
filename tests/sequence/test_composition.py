"""Composition against Biopython and paper; outliers against simulation and Student's t."""

import math
from itertools import pairwise

import mpmath  # type: ignore[import-untyped, unused-ignore]
import numpy as np
import pytest
from Bio.SeqUtils import gc_fraction as gc_of_biopython
from hypothesis import given, settings
from hypothesis import strategies as st

from hmmseg.sequence import composition
from hmmseg.sequence.alphabet import decode, encode, reverse_complement
from hmmseg.sequence.composition import (
    FEATURES,
    JUDGED_LENGTH,
    JUDGED_RECORDS,
    cpg_ratio,
    gc_fraction,
    pair_counts,
    standing_out,
    z_threshold,
)

texts = st.text(alphabet="ACGTN", min_size=1, max_size=50)


@settings(max_examples=100)
@given(texts, st.booleans(), st.integers(1, 9))
def test_pairs_are_counted_as_on_paper(text: str, circular: bool, chunk: int) -> None:
    expected = np.zeros((5, 5), dtype=int)
    for x, y in pairwise(text + (text[0] if circular else "N")):
        expected["ACGTN".index(x), "ACGTN".index(y)] += 1
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(composition, "CHUNK", chunk)
        assert pair_counts(encode(text), circular).tolist() == expected.tolist()


@given(texts)
def test_gc_is_that_of_biopython(text: str) -> None:
    found = gc_fraction(pair_counts(encode(text), False))
    if set(text) == {"N"}:
        assert math.isnan(found)
    else:
        assert found == gc_of_biopython(text, ambiguous="remove")


@given(texts)
def test_cpg_ratio_is_the_published_formula(text: str) -> None:
    # Gardiner-Garden & Frommer 1987: number of CpG x N / (number of C x number of G).
    known = len(text) - text.count("N")
    found = cpg_ratio(pair_counts(encode(text), False))
    if "C" in text and "G" in text:
        assert found == text.count("CG") * known / (text.count("C") * text.count("G"))
    else:
        assert math.isnan(found)


def test_cpg_over_the_origin_of_a_circle() -> None:
    assert cpg_ratio(pair_counts(encode("GAATC"), True)) == 1 * 5 / (1 * 1)
    assert cpg_ratio(pair_counts(encode("GAATC"), False)) == 0


def test_features_are_gc_and_ten_dinucleotides() -> None:
    assert FEATURES == (
        "G+C", "AA/TT", "AC/GT", "AG/CT", "AT", "CA/TG", "CC/GG", "CG", "GA/TC", "GC", "TA",
    )  # fmt: skip


def abundance_by_hand(text: str, pair: str) -> float:
    """Strand-symmetric dinucleotide relative abundance of Karlin & Burge 1995."""
    other = decode(reverse_complement(encode(text)))
    pairs = [x + y for strand in (text, other) for x, y in pairwise(strand)]
    both = text + other
    share = pairs.count(pair) / len(pairs)
    return share / (both.count(pair[0]) / len(both) * both.count(pair[1]) / len(both))


@settings(max_examples=50)
@given(st.integers(0, 2**32 - 1))
def test_features_are_the_published_abundances(seed: int) -> None:
    rng = np.random.default_rng(seed)
    text = decode(rng.choice(4, size=200, p=rng.dirichlet([5] * 4)).astype(np.uint8))
    values, _ = composition._features(pair_counts(encode(text), False)[None])
    assert values[0, 0] == gc_of_biopython(text)
    for value, name in zip(values[0, 1:], FEATURES[1:], strict=True):
        assert value == pytest.approx(abundance_by_hand(text, name[:2]), rel=1e-12)


@pytest.mark.parametrize("records", [8, 12, 24, 100, 1000, 100_000])
def test_threshold_shares_out_one_in_twenty_over_all_features(records: int) -> None:
    freedom, z = (records - 1) / 2, z_threshold(records)
    # Both tails of Student's t distribution, by the incomplete beta function.
    tails = mpmath.betainc(freedom / 2, 0.5, 0, freedom / (freedom + z * z), regularized=True)
    # Wallace's approximation errs to the safe side, the more so the fewer records there are.
    assert (0.035 if records < 20 else 0.048) < 11 * records * tails < 0.0502


def random_assembly(rng: np.random.Generator, records: int, spread: float) -> list[np.ndarray]:
    """Pair counts of records of 20 kb, whose composition varies between them."""
    mean = np.outer([0.3, 0.2, 0.2, 0.3], [0.3, 0.2, 0.2, 0.3]).ravel()
    tables = []
    for _ in range(records):
        shares = rng.dirichlet(mean / spread)
        table = np.zeros((5, 5), dtype=np.int64)
        table[:4, :4] = rng.multinomial(20_000, shares).reshape(4, 4)
        tables.append(table)
    return tables


@pytest.mark.parametrize("spread", [1e-7, 1e-4])
@pytest.mark.parametrize("records", [8, 24, 100])
def test_homogeneous_assemblies_rarely_have_an_outlier(records: int, spread: float) -> None:
    rng = np.random.default_rng([records, round(-math.log10(spread))])
    calls = sum(
        bool(standing_out(random_assembly(rng, records, spread)).stands_out.any())
        for _ in range(200)
    )
    # One in twenty is promised; 20 of 200 has a probability of 0.0027 at that rate.
    assert calls <= 20


def test_foreign_record_stands_out_by_its_oddest_feature() -> None:
    rng = np.random.default_rng(2)
    tables = random_assembly(rng, 23, 1e-5)
    foreign = tables[7].copy()
    foreign[1, 2] *= 2  # twice the CpG
    contrast = standing_out([*tables, foreign])
    assert contrast.judged == 24
    assert contrast.threshold == z_threshold(24)
    assert np.flatnonzero(contrast.stands_out).tolist() == [23]
    assert contrast.feature[23] == "CG"
    assert contrast.z[23] > contrast.threshold


def test_z_by_hand() -> None:
    # Nine records, G+C 0.40 to 0.48 in steps of 0.01: median 0.44, MAD 0.02. The last has
    # 0.48: sampling variance 0.44 x 0.56 / 10,000.
    tables = []
    for step in range(9):
        gc = 4000 + 100 * step
        singles = np.array([10_000 - gc, gc, gc, 10_000 - gc]) // 2
        table = np.zeros((5, 5), dtype=np.int64)
        # Independent neighbours: all abundances are one, so that G+C decides.
        table[:4, :4] = np.outer(singles, singles) // 10_000
        tables.append(table)
    contrast = standing_out(tables)
    scale = math.sqrt((1.4826 * 0.02) ** 2 + 0.44 * 0.56 / 10_000)
    assert contrast.feature[8] == "G+C"
    assert contrast.z[8] == pytest.approx(0.04 / scale, rel=1e-3)
    assert contrast.z[0] == pytest.approx(-0.04 / scale, rel=1e-3)


def test_too_few_or_too_short_records_are_not_judged() -> None:
    rng = np.random.default_rng(3)
    tables = random_assembly(rng, JUDGED_RECORDS, 1e-5)
    assert standing_out(tables).judged == JUDGED_RECORDS
    for few in (tables[1:], [*tables[1:], tables[0] // 20]):
        contrast = standing_out(few)
        assert contrast.judged == 0
        assert np.isnan(contrast.z).all()
        assert not contrast.stands_out.any()
        assert math.isnan(contrast.threshold)


def test_short_records_do_not_change_the_others() -> None:
    rng = np.random.default_rng(4)
    tables = random_assembly(rng, 12, 1e-5)
    short = pair_counts(encode("G" * (JUDGED_LENGTH - 1)), False)
    contrast = standing_out([short, *tables])
    assert math.isnan(contrast.z[0])
    assert contrast.feature[0] == ""
    assert contrast.z[1:].tolist() == standing_out(tables).z.tolist()


def test_records_of_one_letter_are_judged_by_gc() -> None:
    tables = [pair_counts(encode("ACGT" * 2000), True)] * 9
    tables.append(pair_counts(encode("A" * 8000), True))
    contrast = standing_out(tables)
    assert np.flatnonzero(contrast.stands_out).tolist() == [9]
    assert contrast.feature[9] == "G+C"
    alike = standing_out([pair_counts(encode("A" * 8000), True)] * 9)
    assert not alike.stands_out.any()
    assert alike.z.tolist() == [0.0] * 9


def test_strand_does_not_matter() -> None:
    rng = np.random.default_rng(5)
    bases = [rng.integers(0, 4, size=6000, dtype=np.uint8) for _ in range(9)]
    given = standing_out([pair_counts(b, True) for b in bases])
    other = standing_out([pair_counts(reverse_complement(b), True) for b in bases])
    assert given.z.tolist() == other.z.tolist()
