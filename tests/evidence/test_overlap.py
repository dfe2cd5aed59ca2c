"""Overlap of features and regions against counting base by base, and cases worked by hand."""

from hypothesis import given
from hypothesis import strategies as st

from hmmseg.evidence.overlap import Overlap, overlap

LENGTH = 60
Spans = list[tuple[int, int]]


def bases(span: tuple[int, int]) -> set[int]:
    return {position % LENGTH for position in range(*span)}


def counted(features: Spans, regions: Spans) -> Overlap:
    called = set().union(*(bases(span) for span in regions))
    known = set().union(*(bases(span) for span in features))
    hits = [(len(bases(span) & called), span[1] - span[0]) for span in features]
    return Overlap(
        len(features),
        sum(hit > 0 for hit, _ in hits),
        sum(2 * hit >= length for hit, length in hits),
        len(known),
        len(known & called),
        len(called),
    )


spans = st.lists(
    st.tuples(st.integers(0, LENGTH - 1), st.integers(1, LENGTH)).map(
        lambda s: (s[0], s[0] + s[1])
    ),
    max_size=6,
)


@given(spans, spans)
def test_counts_are_those_of_single_bases(features: Spans, regions: Spans) -> None:
    found = overlap({"one": features}, {"one": regions}, {"one": LENGTH})
    assert found == counted(features, regions)


def test_by_hand() -> None:
    """Two features of ten bases; a region covers five of the first, another lies elsewhere."""
    found = overlap(
        {"one": [(0, 10), (20, 30)]}, {"one": [(5, 15)], "two": [(0, 10)]}, {"one": 60, "two": 40}
    )
    assert found == Overlap(2, 1, 1, 20, 5, 20)
    # 20 x 20 / 100 bases would be shared by chance.
    assert found.times_expected(100) == 5 / 4
    assert overlap({}, {"one": [(5, 15)]}, {"one": 60}).times_expected(60) is None
