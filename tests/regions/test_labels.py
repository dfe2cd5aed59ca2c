"""Labels on records and on contigs."""

from pathlib import Path

import numpy as np
import pytest

from hmmseg.errors import LabelError
from hmmseg.regions.labels import Labels, inside
from hmmseg.sequence.contigs import Contig


def read(tmp_path: Path, text: str, name: str | None = None) -> Labels:
    (tmp_path / "x.bed").write_text(text)
    return Labels.read(tmp_path / "x.bed", name)


def test_labels_on_a_contig_across_the_origin(tmp_path: Path) -> None:
    labels = read(tmp_path, "r\t10\t20\nr\t85\t100\nr\t40\t50\n")
    # Positions 80 to 99, then 0 to 29 of a circle of 100.
    contig = Contig("r", 80, np.zeros(50, np.uint8), False, 100)
    assert labels.on(contig).tolist() == [[5, 20], [30, 40]]
    assert labels.on(Contig("other", 0, np.zeros(9, np.uint8), False, 9)).tolist() == []


def test_names_with_and_without_a_number(tmp_path: Path) -> None:
    text = "r\t0\t1\tisland_12\nr\t2\t3\tisland\nr\t4\t5\tother\n"
    assert read(tmp_path, text, "island").intervals["r"].tolist() == [[0, 1], [2, 3]]
    with pytest.raises(LabelError, match="no interval named lake"):
        read(tmp_path, text, "lake")


def test_labels_outside_the_sequence(tmp_path: Path) -> None:
    labels = read(tmp_path, "r\t0\t5\nr\t2\t30\n")
    with pytest.raises(LabelError, match=r"x\.bed:2: the interval ends at 30"):
        labels.check({"r": 20})
    with pytest.raises(LabelError, match=r"x\.bed:2: record r is not in the sequence"):
        labels.check({"s": 20})


def test_inside_marks_positions() -> None:
    intervals = np.array([[2, 5], [6, 9]])
    wanted = [position in {2, 3, 4, 6, 7, 8} for position in range(12)]
    for begin in range(12):
        for stop in range(begin, 13):
            assert inside(intervals, begin, stop).tolist() == wanted[begin:stop]
