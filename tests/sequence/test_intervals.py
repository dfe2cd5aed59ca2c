"""Interval arithmetic against sets of positions, and BED lines."""

import gzip
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hmmseg.errors import LabelError
from hmmseg.sequence.intervals import complement, flag_runs, merge, read_bed

LENGTH = 40
pairs = st.lists(st.tuples(st.integers(0, LENGTH), st.integers(0, LENGTH)).map(sorted), max_size=8)


def as_intervals(spans: list[list[int]]) -> np.ndarray:
    return np.array(spans, dtype=np.int64).reshape(-1, 2)


def positions(intervals: np.ndarray) -> set[int]:
    return {p for start, end in intervals.tolist() for p in range(start, end)}


@given(pairs)
def test_merge_keeps_positions_and_leaves_space_between(spans: list[list[int]]) -> None:
    merged = merge(as_intervals(spans))
    assert merged.dtype == np.int64
    assert positions(merged) == positions(as_intervals(spans))
    assert (merged[:, 1] > merged[:, 0]).all()
    assert (merged[1:, 0] > merged[:-1, 1]).all()


@given(pairs)
def test_complement_has_the_other_positions(spans: list[list[int]]) -> None:
    merged = merge(as_intervals(spans))
    left = complement(merged, LENGTH)
    assert positions(left) == set(range(LENGTH)) - positions(merged)
    assert (left[:, 1] > left[:, 0]).all()


@given(st.lists(st.booleans(), max_size=LENGTH), st.integers(0, 1000))
def test_flag_runs_are_the_flagged_positions(flags: list[bool], offset: int) -> None:
    runs = flag_runs(np.array(flags, dtype=bool), offset)
    assert positions(runs) == {offset + i for i, flag in enumerate(flags) if flag}
    assert (runs[1:, 0] > runs[:-1, 1]).all()


def test_bed_lines(tmp_path: Path) -> None:
    path = tmp_path / "a.bed"
    path.write_bytes(
        b"track name=x\nbrowser position chr1\n#note\n\nchr1\t0\t5\r\nchr2 3 9 island\n"
        b"chr1\t7\t7\tname with space\t5\t+\n"
    )
    lines = list(read_bed(path))
    assert [line[:4] for line in lines] == [
        ("chr1", 0, 5, ""),
        ("chr2", 3, 9, "island"),
        ("chr1", 7, 7, "name with space"),
    ]
    assert [line.where for line in lines] == [f"{path}:{n}" for n in (5, 6, 7)]


def test_bed_may_be_compressed(tmp_path: Path) -> None:
    path = tmp_path / "a.bed.gz"
    path.write_bytes(gzip.compress(b"chr1\t0\t5\n"))
    assert [line.record for line in read_bed(path)] == ["chr1"]


def test_bed_without_lines_is_in_order(tmp_path: Path) -> None:
    path = tmp_path / "a.bed"
    path.write_bytes(b"")
    assert list(read_bed(path)) == []


@pytest.mark.parametrize(
    ("line", "problem"),
    [
        ("chr1\t5", "needs record, start and end"),
        ("\t1\t5", "the record's name, is empty"),
        ("chr1\t-1\t5", "must be whole numbers from 0 up, not '-1'"),
        ("chr1\t1.5\t5", "must be whole numbers"),
        ("chr1\t1\tend", "must be whole numbers"),
        ("chr1\t1\t" + "9" * 19, "must be whole numbers"),
        ("chr1\t\u0663\t\u0665", "must be whole numbers"),
        ("chr1\t6\t5", "start 6 lies behind end 5"),
    ],
)
def test_bad_bed_lines_are_named(tmp_path: Path, line: str, problem: str) -> None:
    path = tmp_path / "a.bed"
    path.write_text(f"chr1\t0\t5\n{line}\n")
    with pytest.raises(LabelError) as caught:
        list(read_bed(path))
    assert str(caught.value).startswith(f"{path}:2: ")
    assert problem in str(caught.value)


def test_bed_cut_short_is_a_label_error(tmp_path: Path) -> None:
    path = tmp_path / "a.bed.gz"
    lines = "".join(f"chr1\t{n * n}\t{n * n + n % 17}\n" for n in range(9000))
    path.write_bytes(gzip.compress(lines.encode())[:-9])
    with pytest.raises(LabelError, match=r"a\.bed\.gz: .* ends too early"):
        list(read_bed(path))


def test_missing_bed_is_a_label_error(tmp_path: Path) -> None:
    with pytest.raises(LabelError, match=r"none\.bed: no such file"):
        list(read_bed(tmp_path / "none.bed"))
