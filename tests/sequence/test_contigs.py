"""Contigs and gaps partition a record; circles close over their origin."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hmmseg.sequence import contigs
from hmmseg.sequence.alphabet import MISSING, decode
from hmmseg.sequence.contigs import Contig, gaps, split
from hmmseg.sequence.reading import record_from_text

# Few short pieces, so that gaps of all lengths, at ends and within, are common.
pieces = st.lists(st.sampled_from(["A", "CG", "GATTACA", "N", "NN", "NNN", "NNNNN", "R", "acn"]))
texts = pieces.map("".join).filter(bool)


def positions(contig: Contig) -> list[int]:
    return [(contig.start + i) % contig.record_length for i in range(len(contig))]


def pieces_of(contigs: list[Contig]) -> list[tuple[int, str]]:
    return [(contig.start, decode(contig.bases)) for contig in contigs]


@settings(max_examples=100)
@given(
    text=texts,
    gap_min=st.integers(1, 6),
    circular=st.booleans(),
    cuts=st.lists(st.tuples(st.integers(0, 12), st.integers(0, 12)).map(sorted), max_size=2),
)
def test_contigs_gaps_and_exclusions_partition_the_record(
    text: str, gap_min: int, circular: bool, cuts: list[list[int]]
) -> None:
    record = record_from_text("r", text, circular=circular)
    exclude = np.minimum(np.array(cuts, dtype=np.int64).reshape(-1, 2), len(record))
    contigs = split(record, gap_min, exclude)
    covered = [p for contig in contigs for p in positions(contig)]
    cut = {p for s, e in gaps(record, gap_min).tolist() for p in range(s, e)}
    cut |= {p for s, e in exclude.tolist() for p in range(s, e)}
    assert len(covered) == len(set(covered))
    assert not cut & set(covered)
    # Whatever is neither covered nor cut lies in stretches without a known base.
    assert all(record.bases[p] == MISSING for p in set(range(len(text))) - cut - set(covered))
    for contig in contigs:
        assert contig.bases.tolist() == [record.bases[p] for p in positions(contig)]
        assert (contig.record, contig.record_length) == ("r", len(record))
        assert (contig.bases != MISSING).any()
        assert contig.closed == (circular and not cut)
    assert [c.start for c in contigs] == sorted(c.start for c in contigs)


@settings(max_examples=100)
@given(text=texts, gap_min=st.integers(1, 6), turn=st.integers(0, 30))
def test_origin_of_a_circle_does_not_matter(text: str, gap_min: int, turn: int) -> None:
    turned = text[turn % len(text) :] + text[: turn % len(text)]
    one = split(record_from_text("r", text, circular=True), gap_min)
    other = split(record_from_text("r", turned, circular=True), gap_min)
    if one and one[0].closed:
        assert [c.closed for c in other] == [True]
        assert decode(other[0].bases) in decode(one[0].bases) * 2
    else:
        assert sorted(decode(c.bases) for c in one) == sorted(decode(c.bases) for c in other)


def test_gap_is_at_least_gap_min() -> None:
    record = record_from_text("r", "ACGT" + "N" * 24 + "ACGT" + "n" * 25 + "GG")
    assert gaps(record).tolist() == [[32, 57]]
    assert pieces_of(split(record)) == [(0, "ACGT" + "N" * 24 + "ACGT"), (57, "GG")]


def test_other_ambiguous_letters_make_no_gap() -> None:
    assert pieces_of(split(record_from_text("r", "AC" + "R" * 30 + "GT"))) == [
        (0, "AC" + "N" * 30 + "GT")
    ]


def test_linear_record_is_not_joined() -> None:
    assert pieces_of(split(record_from_text("r", "ACNNNGT"), 3)) == [(0, "AC"), (5, "GT")]


def test_contig_across_the_origin() -> None:
    record = record_from_text("r", "ACNNNGGNNNTT", circular=True)
    (inner, outer) = split(record, 3)
    assert (inner.start, decode(inner.bases), inner.closed) == (5, "GG", False)
    assert (outer.start, decode(outer.bases), outer.closed) == (10, "TTAC", False)
    assert outer.start + len(outer) > outer.record_length == 12


def test_gap_across_the_origin_is_measured_as_one() -> None:
    record = record_from_text("r", "NNACGTNNN", circular=True)
    assert gaps(record, 5).tolist() == [[0, 2], [6, 9]]
    assert pieces_of(split(record, 5)) == [(2, "ACGT")]
    assert [c.closed for c in split(record, 6)] == [True]
    assert gaps(record_from_text("r", "NNACGTNNN"), 5).tolist() == []


def test_exclusion_opens_a_circle() -> None:
    record = record_from_text("r", "ACGTACGT", circular=True)
    (contig,) = split(record, exclude=np.array([[2, 4]]))
    assert (contig.start, decode(contig.bases), contig.closed) == (4, "ACGTAC", False)
    (contig,) = split(record, exclude=np.array([[0, 2]]))
    assert (contig.start, decode(contig.bases), contig.closed) == (2, "GTACGT", False)


def test_nothing_known_gives_no_contig() -> None:
    for circular in (False, True):
        assert split(record_from_text("r", "N" * 30, circular=circular)) == []
        assert split(record_from_text("r", "RYRY", circular=circular)) == []


def test_bases_are_views_unless_joined(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(contigs, "CHUNK", 2)
    record = record_from_text("r", "NACGNNNGT")
    assert all(contig.bases.base is record.bases for contig in split(record, 3))


def test_what_callers_must_not_ask() -> None:
    record = record_from_text("r", "ACGT")
    with pytest.raises(ValueError, match="gap_min"):
        split(record, 0)
    with pytest.raises(ValueError, match="outside record r"):
        split(record, exclude=np.array([[2, 5]]))
