"""Records are found again by their sequence, regions by the bases that they share."""

from collections.abc import Sequence

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hmmseg.evidence.revision import Placed, RecordPair, match_regions, pair_records
from hmmseg.sequence.alphabet import encode
from hmmseg.sequence.identity import KnownRecord, checksums


def record(name: str, letters: str, circular: bool = False) -> KnownRecord:
    return KnownRecord(name, len(letters), circular, checksums(encode(letters)))


def statuses(pairs: Sequence[RecordPair]) -> list[tuple[str, str | None, str | None]]:
    return [(pair.status, pair.old and pair.old.name, pair.new and pair.new.name) for pair in pairs]


def test_each_kind_of_change_of_a_record() -> None:
    old = [
        record("a", "AACCT"),
        record("b", "GGATT"),
        record("c", "TTTAC"),
        record("d", "CCCCA"),
        record("e", "AGAGA"),
        record("f", "ATTTG"),
    ]
    new = [
        record("g", "GTGTG"),
        record("bb", "GGATT"),
        record("a", "AACCT"),
        record("c", "GTAAA"),
        record("d", "CCCCAA"),
        record("e", "AGAGA", circular=True),
    ]
    assert statuses(pair_records(old, new)) == [
        ("added", None, "g"),
        ("renamed", "b", "bb"),
        ("same", "a", "a"),
        ("reversed", "c", "c"),
        ("changed", "d", "d"),
        ("changed", "e", "e"),
        ("removed", "f", None),
    ]


def test_of_equal_sequences_that_of_the_same_name_belongs_to_it() -> None:
    old = [record("a", "ACGTC"), record("b", "ACGTC")]
    new = [record("b", "ACGTC"), record("c", "ACGTC")]
    assert statuses(pair_records(old, new)) == [("same", "b", "b"), ("renamed", "a", "c")]


def pair(status: str, old: int, new: int, circular: bool = False) -> RecordPair:
    """Two records of these lengths."""
    return RecordPair(status, record("a", "A" * old, circular), record("a", "C" * new, circular))


def found(records: RecordPair, old: Sequence[Placed], new: Sequence[Placed]) -> list[object]:
    return [
        (one.status, one.old and one.old.name, one.new and one.new.name, one.shared)
        for one in match_regions(records, old, new)
    ]


OLD = [Placed("r1", "rich", 10, 20), Placed("r2", "rich", 40, 60), Placed("p1", "poor", 70, 80)]


def test_regions_of_one_sequence() -> None:
    new = [
        Placed("r1", "rich", 10, 20),
        Placed("r2", "rich", 45, 62),
        Placed("r3", "rich", 70, 80),
        Placed("r4", "rich", 90, 95),
    ]
    assert found(pair("same", 100, 100), OLD, new) == [
        ("kept", "r1", "r1", 10),
        ("moved", "r2", "r2", 15),
        ("gained", None, "r3", 0),
        ("gained", None, "r4", 0),
        ("lost", "p1", None, 0),
    ]


def test_of_two_pieces_the_longer_is_the_region() -> None:
    new = [Placed("r1", "rich", 40, 45), Placed("r2", "rich", 46, 60)]
    assert found(pair("renamed", 100, 100), OLD[1:2], new) == [
        ("gained", None, "r1", 0),
        ("moved", "r2", "r2", 14),
    ]


def test_a_reversed_record_has_its_regions_from_the_other_end() -> None:
    new = [Placed("p1", "poor", 20, 30), Placed("r1", "rich", 40, 60), Placed("r2", "rich", 80, 90)]
    assert [one.status for one in match_regions(pair("reversed", 100, 100), OLD, new)] == [
        "kept"
    ] * 3


def test_behind_an_insertion_regions_are_kept() -> None:
    new = [Placed("r1", "rich", 10, 20), Placed("r2", "rich", 47, 67), Placed("p1", "poor", 77, 87)]
    assert [one.status for one in match_regions(pair("changed", 100, 107), OLD, new)] == [
        "kept"
    ] * 3


def test_a_region_across_the_origin_of_a_circle() -> None:
    old, new = [Placed("r1", "rich", 95, 105)], [Placed("r1", "rich", 98, 107)]
    assert found(pair("same", 100, 100, circular=True), old, new) == [("moved", "r1", "r1", 7)]
    turned = [Placed("r1", "rich", 95, 105)]
    assert found(pair("reversed", 100, 100, circular=True), old, turned) == [
        ("kept", "r1", "r1", 10)
    ]


@st.composite
def regions(draw: st.DrawFn, length: int = 40) -> list[Placed]:
    """Regions of two states that do not overlap within a state."""
    made = []
    for state in ("rich", "poor"):
        edges = sorted(draw(st.sets(st.integers(0, length), max_size=10)))
        for number, (start, end) in enumerate(zip(edges[::2], edges[1::2], strict=False)):
            made.append(Placed(f"{state}_{number}", state, start, end))
    return sorted(made, key=lambda region: (region.start, region.end))


@given(regions(), regions())
def test_every_region_is_told_once_and_shared_bases_are_counted(
    old: list[Placed], new: list[Placed]
) -> None:
    told = match_regions(pair("same", 40, 40), old, new)
    assert sorted(one.old.name for one in told if one.old) == sorted(one.name for one in old)
    assert sorted(one.new.name for one in told if one.new) == sorted(one.name for one in new)
    for one in told:
        if one.old and one.new:
            both = set(range(one.old.start, one.old.end)) & set(range(one.new.start, one.new.end))
            assert one.shared == len(both) > 0
            assert one.old.state == one.new.state
            assert (one.status == "kept") == (one.old[2:] == one.new[2:])
    # What is lost shares bases only with regions that belong to another.
    gained = [one.new for one in told if one.status == "gained"]
    for lost in (one.old for one in told if one.status == "lost"):
        for other in gained:
            assert lost is not None
            assert other is not None
            assert lost.state != other.state or lost.end <= other.start or other.end <= lost.start


@given(regions(), st.sampled_from(["same", "renamed", "changed"]))
def test_nothing_changes_between_a_result_and_itself(own: list[Placed], status: str) -> None:
    assert {one.status for one in match_regions(pair(status, 40, 40), own, own)} <= {"kept"}


@pytest.mark.parametrize("side", [0, 1])
def test_regions_of_a_record_without_counterpart(side: int) -> None:
    records = RecordPair("removed", record("a", "A"), None)
    if side:
        records = RecordPair("added", None, record("a", "A"))
    own: tuple[list[Placed], list[Placed]] = ([], [])
    own[side].extend(OLD)
    told = match_regions(records, *own)
    assert [one.status for one in told] == [("lost", "gained")[side]] * 3
