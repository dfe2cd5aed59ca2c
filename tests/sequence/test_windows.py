"""G+C in windows: counted position by position, with gaps in no window."""

from hypothesis import given
from hypothesis import strategies as st

from hmmseg.sequence.contigs import gaps
from hmmseg.sequence.reading import record_from_text
from hmmseg.sequence.windows import gc_windows

pieces = st.lists(st.sampled_from(["A", "CG", "GATTACA", "N", "NNN", "NNNNNNN", "R", "acn"]))


@given(
    text=pieces.map("".join).filter(bool),
    gap_min=st.integers(1, 6),
    width=st.integers(1, 9),
    circular=st.booleans(),
)
def test_each_position_outside_gaps_has_the_value_of_its_window(
    text: str, gap_min: int, width: int, circular: bool
) -> None:
    record = record_from_text("r", text, circular=circular)
    starts, ends, values = gc_windows(record, gap_min, width)
    found = {
        position: value
        for start, end, value in zip(starts.tolist(), ends.tolist(), values.tolist(), strict=True)
        for position in range(start, end)
    }
    assert len(found) == (ends - starts).sum()
    hidden = {p for start, end in gaps(record, gap_min).tolist() for p in range(start, end)}
    expected = {}
    for position in set(range(len(text))) - hidden:
        window = text.upper()[position // width * width :][:width]
        known = sum(letter in "ACGT" for letter in window)
        if known:
            expected[position] = sum(letter in "CG" for letter in window) / known
    assert found == expected
