"""Known features beside the regions: BED and GFF3, through the command line."""

import csv
from pathlib import Path

import pytest

from hmmseg.cli import main
from hmmseg.errors import LabelError
from hmmseg.sequence.features import read_features

DATA = Path(__file__).resolve().parents[1] / "data"

GFF3 = (
    "##gff-version 3\n"
    "one\tsource\trRNA\t1\t10\t.\t+\t.\tID=a\n"
    "one%20b\tsource\ttRNA\t5\t5\t.\t-\t.\tID=b\n"
    "##FASTA\n>one\nACGT\n"
)


def test_gff3_is_read_as_half_open_intervals(tmp_path: Path) -> None:
    path = tmp_path / "known.gff3"
    path.write_text(GFF3)
    found = [(line.record, line.start, line.end, line.name) for line in read_features(path)]
    assert found == [("one", 0, 10, "rRNA"), ("one b", 4, 5, "tRNA")]


@pytest.mark.parametrize(
    ("line", "told"),
    [
        ("one\tsource\trRNA\t1\n", "4 columns"),
        ("one\tsource\trRNA\tx\t10\t.\t+\t.\tID=a\n", "whole numbers"),
        ("one\tsource\trRNA\t11\t10\t.\t+\t.\tID=a\n", "no interval"),
        ("one\tsource\trRNA\t0\t10\t.\t+\t.\tID=a\n", "no interval"),
    ],
)
def test_bad_gff3_names_the_line(line: str, told: str, tmp_path: Path) -> None:
    path = tmp_path / "known.gff"
    path.write_text("##gff-version 3\n" + line)
    with pytest.raises(LabelError, match=told) as caught:
        list(read_features(path))
    assert "known.gff:2" in str(caught.value)


def test_rrna_operons_of_the_chloroplast(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """Sato et al. 1999, DNA Research 6: 283-290: an rRNA operon in each inverted repeat."""
    monkeypatch.chdir(tmp_path)
    known = str(DATA / "NC_000932.operon.bed")
    job = ["annotate", str(DATA / "NC_000932.fa.gz"), "--preset", "gc-island", "--output", "own"]
    assert main([*job, "--features", known]) == 0
    with Path("own/features.tsv").open() as file:
        rows = list(csv.DictReader(file, delimiter="\t"))
    assert {row["file"] for row in rows} == {"NC_000932.operon.bed"}
    assert sum(int(row["features"]) for row in rows) == 2
    assert all(row["features"] == row["half_covered"] for row in rows)
    assert all(float(row["share_of_features"]) > 0.99 for row in rows)
    assert all(float(row["times_expected"]) > 5 for row in rows)
    capsys.readouterr()
    Path("far.bed").write_text("NC_000932.1\t10\t999999\tx\n")
    assert main([*job, "--features", "far.bed"]) == 1
    assert "far.bed:1: ends at 999999" in capsys.readouterr().err
