"""Records are shared out by their content, so that a revision disturbs few batches."""

import hashlib

from hypothesis import given
from hypothesis import strategies as st

from hmmseg.sequence.batching import share_out

records = st.lists(
    st.tuples(st.integers(0, 10**6), st.integers(1, 1_500)), min_size=1, max_size=60, unique=True
)


def digest(content: object) -> str:
    return hashlib.sha256(repr(content).encode()).hexdigest()


def batches(contents: list[tuple[int, int]], most: int) -> list[frozenset[tuple[int, int]]]:
    """Batches as sets of records; a record is a number and its bases."""
    shared = share_out([digest(one) for one in contents], [one[1] for one in contents], most)
    return [frozenset(contents[number] for number in batch) for batch in shared]


@given(records, st.integers(1, 2_000))
def test_every_record_is_in_one_batch_and_none_holds_too_much(
    contents: list[tuple[int, int]], most: int
) -> None:
    found = batches(contents, most)
    assert sorted(one for batch in found for one in batch) == sorted(contents)
    for batch in found:
        assert len(batch) == 1 or sum(bases for _, bases in batch) <= most
        assert len(batch) == 1 or all(bases < most for _, bases in batch)


@given(records, st.integers(1, 2_000), st.randoms(use_true_random=False))
def test_the_order_of_the_assembly_does_not_matter(
    contents: list[tuple[int, int]], most: int, random: object
) -> None:
    shuffled = list(contents)
    random.shuffle(shuffled)  # type: ignore[attr-defined]
    assert batches(contents, most) == batches(shuffled, most)


@given(records, st.integers(1, 2_000), st.tuples(st.integers(2 * 10**6), st.integers(1, 1_500)))
def test_a_new_record_joins_one_batch_or_divides_one(
    contents: list[tuple[int, int]], most: int, new: tuple[int, int]
) -> None:
    before, after = set(batches(contents, most)), set(batches([*contents, new], most))
    gone = before - after
    assert len(gone) <= 1
    disturbed = frozenset().union(*gone) | {new}
    assert frozenset().union(*(after - before)) == disturbed


def test_equal_digests_stay_together_whatever_they_hold() -> None:
    assert share_out(["ab", "ab", "0f"], [6, 6, 6], 10) == [[2], [0, 1]]


def test_many_small_records_make_few_batches() -> None:
    contents = [(number, 2_000) for number in range(12_000)]
    found = batches(contents, 1_000_000)
    assert 24 <= len(found) <= 64
    sizes = sorted(sum(bases for _, bases in batch) for batch in found)
    assert sizes[0] > 250_000
