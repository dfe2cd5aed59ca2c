"""Selection: what is kept, and what is told when a file does not fit the sequence."""

import re
from pathlib import Path

import numpy as np
import pytest

from hmmseg.errors import LabelError, SequenceError, UsageError
from hmmseg.sequence.reading import Record, record_from_text
from hmmseg.sequence.selection import Selection


def assembly() -> list[Record]:
    return [record_from_text(name, "ACGT" * size) for name, size in (("a", 1), ("b", 2), ("c", 3))]


def names(selection: Selection) -> list[str]:
    return [record.name for record in selection.apply(assembly())]


def write(path: Path, text: str) -> Path:
    path.write_text(text)
    return path


def test_everything_by_default() -> None:
    assert names(Selection()) == names(Selection.from_options()) == ["a", "b", "c"]


def test_by_name_in_the_order_of_the_sequence(tmp_path: Path) -> None:
    listed = write(tmp_path / "names.txt", "# wanted\n\n c \r\na\nc\n")
    assert names(Selection.from_options(records_file=listed)) == ["a", "c"]


def test_by_length() -> None:
    assert names(Selection.from_options(min_record=8)) == ["b", "c"]


def test_circular_by_name() -> None:
    selection = Selection.from_options(circular_names=["b"])
    given = assembly()
    kept = list(selection.apply(given))
    assert [record.circular for record in kept] == [False, True, False]
    assert kept[1].bases is given[1].bases


def test_exclusions_are_merged(tmp_path: Path) -> None:
    bed = write(tmp_path / "x.bed", "c\t5\t9\nb\t0\t8\nc\t0\t6\nc\t10\t12\n")
    selection = Selection.from_options(exclude_bed=bed)
    assert {name: spans.tolist() for name, spans in selection.exclude.items()} == {
        "b": [[0, 8]],
        "c": [[0, 9], [10, 12]],
    }
    assert all(spans.dtype == np.int64 for spans in selection.exclude.values())
    assert names(selection) == ["a", "b", "c"]


def test_records_dropped_on_other_grounds_are_not_missing(tmp_path: Path) -> None:
    selection = Selection.from_options(
        records_file=write(tmp_path / "names.txt", "a\nc\n"),
        min_record=5,
        exclude_bed=write(tmp_path / "x.bed", "b\t0\t1\n"),
        circular_names=["a"],
    )
    assert names(selection) == ["c"]


def failure(selection: Selection) -> str:
    with pytest.raises(LabelError) as caught:
        names(selection)
    return str(caught.value)


def test_unknown_names_are_told(tmp_path: Path) -> None:
    listed = write(tmp_path / "names.txt", "a\nnone\n")
    message = failure(Selection.from_options(records_file=listed))
    assert message.startswith(f"{listed}:2: record none is not in the sequence")
    bed = write(tmp_path / "x.bed", "a\t0\t1\nnone\t0\t1\n")
    message = failure(Selection.from_options(exclude_bed=bed))
    assert message.startswith(f"{bed}:2: record none is not in the sequence")
    message = failure(Selection(circular=frozenset(["none"])))
    assert message.startswith("--circular: record none is not in the sequence")
    assert failure(Selection(names=frozenset(["x"]))).startswith("--records: record x")
    spans = np.array([[0, 1]])
    assert failure(Selection(exclude={"x": spans})).startswith("--exclude: record x")


@pytest.mark.parametrize("line", ["b\t2\t9", "b\t9\t9"])
def test_exclusion_outside_its_record(tmp_path: Path, line: str) -> None:
    bed = write(tmp_path / "x.bed", f"b\t0\t3\n{line}\nb\t1\t2\n")
    message = failure(Selection.from_options(exclude_bed=bed))
    assert message.startswith(f"{bed}:2: interval ends at 9 but record b is 8 bases long")
    message = failure(Selection(exclude={"b": np.array([[0, 9]])}))
    assert message.startswith("--exclude: interval ends at 9")


def test_malformed_exclusion(tmp_path: Path) -> None:
    bed = write(tmp_path / "x.bed", "b\t0\n")
    with pytest.raises(LabelError, match=re.escape(f"{bed}:1: ")):
        Selection.from_options(exclude_bed=bed)


@pytest.mark.parametrize(
    ("text", "problem"),
    [
        ("a\nb c\n", ":2: one record name per line"),
        ("# only this\n\n", ": no record name in it"),
        ("", ": the file is empty"),
    ],
)
def test_bad_list_of_names(tmp_path: Path, text: str, problem: str) -> None:
    listed = write(tmp_path / "names.txt", text)
    with pytest.raises(LabelError, match=re.escape(f"{listed}{problem}")):
        Selection.from_options(records_file=listed)


def test_missing_files(tmp_path: Path) -> None:
    with pytest.raises(LabelError, match="no such file"):
        Selection.from_options(records_file=tmp_path / "none")
    with pytest.raises(LabelError, match="no such file"):
        Selection.from_options(exclude_bed=tmp_path / "none")


def test_nothing_left() -> None:
    with pytest.raises(SequenceError, match="none of 3 records is selected"):
        names(Selection(min_length=100))


def test_negative_length() -> None:
    with pytest.raises(UsageError, match="--min-record"):
        Selection.from_options(min_record=-1)
