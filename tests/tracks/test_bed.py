"""BED, against the rules of the Browser Extensible Data (BED) format, version 1.0 (GA4GH 2022).

The parser here knows the specification and nothing of the writer.
"""

import gzip
import re
from collections import defaultdict
from decimal import ROUND_HALF_UP, Decimal
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from hmmseg.errors import LabelError, OutputError
from hmmseg.tracks.bed import invalid_bed_names, read_bed, score_of, write_regions_bed
from tests.tracks.regions import LENGTHS, Row, table_of, tables

Line = tuple[str, int, int, str, int, str]


def parse_bed6(path: Path) -> list[Line]:
    """Read a BED6 file by sections 1.3 to 1.7; chrom may be any text without whitespace."""
    lines: list[Line] = []
    content = path.read_bytes().decode("utf-8")
    assert content == "" or content.endswith("\n")
    assert "\r" not in content
    for line in content.split("\n")[:-1]:
        # 1.4: data, comment (#) and blank lines, and no other. There is no reason for the latter.
        fields = line.split("\t")
        assert len(fields) == 6
        chrom, start, end, name, score, strand = fields
        assert re.fullmatch(r"\S+", chrom)
        # 1.5, table 2.
        assert re.fullmatch(r"[0-9]+", start)
        assert re.fullmatch(r"[0-9]+", end)
        assert re.fullmatch(r"[\x20-\x7e]{1,255}", name)
        assert re.fullmatch(r"[0-9]+", score)
        assert re.fullmatch(r"[-+.]", strand)
        # 1.6: 0-based, half-open, within the chromosome; here also never empty.
        assert 0 <= int(start) < int(end) <= LENGTHS[chrom]
        assert 0 <= int(score) <= 1000
        lines.append((chrom, int(start), int(end), name, int(score), strand))
    return lines


@given(table=tables())
@settings(max_examples=60)
def test_lines_cover_the_regions(
    table: pd.DataFrame, tmp_path_factory: pytest.TempPathFactory
) -> None:
    path = tmp_path_factory.mktemp("bed") / "regions.bed"
    write_regions_bed(path, table, LENGTHS)
    lines = parse_bed6(path)
    means = dict(zip(table["region_id"], table["mean_posterior"], strict=True))
    covered: dict[tuple[str, str], NDArray[np.int64]] = defaultdict(
        lambda: np.zeros(max(LENGTHS.values()), dtype=np.int64)
    )
    for chrom, start, end, name, score, strand in lines:
        covered[chrom, name][start:end] += 1
        assert strand == "."
        assert abs(score - 1000 * means[name]) <= 0.5
    for region in table.itertuples():
        positions = np.arange(region.start, region.end) % LENGTHS[region.record]
        expected = np.zeros(max(LENGTHS.values()), dtype=int)
        expected[positions] = 1
        np.testing.assert_array_equal(covered.pop((region.record, region.region_id)), expected)
    assert not covered
    order = list(LENGTHS)
    keys = [(order.index(chrom), start) for chrom, start, *_ in lines]
    assert keys == sorted(keys)


def test_a_region_across_the_origin_is_two_lines_of_one_name(tmp_path: Path) -> None:
    rows: list[Row] = [
        ("a_1", "plasmid", 3, 10, "a", 0.5, 1.0),
        ("a_2", "plasmid", 45, 52, "a", 0.75, 1.0),
    ]
    write_regions_bed(tmp_path / "x.bed", table_of(rows), LENGTHS)
    assert parse_bed6(tmp_path / "x.bed") == [
        ("plasmid", 0, 2, "a_2", 750, "."),
        ("plasmid", 3, 10, "a_1", 500, "."),
        ("plasmid", 45, 50, "a_2", 750, "."),
    ]


def test_a_whole_circular_record_is_one_line(tmp_path: Path) -> None:
    table = table_of([("a_1", "plasmid", 0, 50, "a", 1.0, 1.0)])
    write_regions_bed(tmp_path / "x.bed", table, LENGTHS)
    assert parse_bed6(tmp_path / "x.bed") == [("plasmid", 0, 50, "a_1", 1000, ".")]


def test_no_regions_make_an_empty_file(tmp_path: Path) -> None:
    write_regions_bed(tmp_path / "x.bed", table_of([]), LENGTHS)
    assert (tmp_path / "x.bed").read_bytes() == b""


@given(st.integers(0, 2**20))
def test_score_rounds_a_half_up(k: int) -> None:
    p = k / 2**20  # exact in binary, and 1000 p too
    expected = (1000 * Decimal(p)).quantize(Decimal(1), rounding=ROUND_HALF_UP)
    assert score_of(p) == int(expected)


def test_score_at_the_ends() -> None:
    assert [score_of(p) for p in (0.0, 0.0005, 0.0625, 0.9994, 0.9995, 1.0)] == [
        0,
        1,
        63,
        999,
        1000,
        1000,
    ]


def test_names_that_bed_does_not_allow() -> None:
    # Section 1.5, table 2: [[:alnum:]_]{1,255}, in the C locale.
    lengths = dict.fromkeys(["chr1", "NC_1.1", "a-b", "x" * 255, "x" * 256, "é", "chr_2"], 5)
    assert invalid_bed_names(lengths) == ["NC_1.1", "a-b", "x" * 256, "é"]


@pytest.mark.parametrize(
    ("row", "message"),
    [
        (("a_1", "other", 0, 5, "a", 0.5, 1.0), "its record is not known"),
        (("a_1", "plasmid", -1, 5, "a", 0.5, 1.0), "its start is outside the record"),
        (("a_1", "plasmid", 50, 55, "a", 0.5, 1.0), "its start is outside the record"),
        (("a_1", "plasmid", 5, 5, "a", 0.5, 1.0), "its length is not between 1 and"),
        (("a_1", "plasmid", 5, 56, "a", 0.5, 1.0), "its length is not between 1 and"),
        (("a_1", "plasmid", 5, 9, "a", 1.5, 1.0), "its mean posterior is not between 0 and 1"),
        (("a_1", "plasmid", 5, 9, "a", np.nan, 1.0), "its mean posterior is not between"),
        (("a_1", "plasmid", 5, 9, "a", 0.5, np.nan), "its log-odds are not a number"),
        (("é_1", "plasmid", 5, 9, "é", 0.5, 1.0), "BED allows no region name 'é_1'"),
        (("a\t1", "plasmid", 5, 9, "a", 0.5, 1.0), r"BED allows no region name 'a\\t1'"),
    ],
)
def test_refuses_what_is_no_region(tmp_path: Path, row: Row, message: str) -> None:
    with pytest.raises(OutputError, match=message):
        write_regions_bed(tmp_path / "x.bed", table_of([row]), LENGTHS)
    assert not (tmp_path / "x.bed").exists()


def test_refuses_a_table_in_another_order(tmp_path: Path) -> None:
    first: Row = ("a_1", "plasmid", 3, 10, "a", 0.5, 1.0)
    second: Row = ("a_2", "scaffold_2", 3, 10, "a", 0.5, 1.0)
    third: Row = ("a_3", "plasmid", 2, 10, "a", 0.5, 1.0)
    for rows in ([first, second], [first, third]):
        with pytest.raises(OutputError, match="out of order"):
            write_regions_bed(tmp_path / "x.bed", table_of(rows), LENGTHS)
    with pytest.raises(OutputError, match="its name is not unique"):
        write_regions_bed(tmp_path / "x.bed", table_of([first, first]), LENGTHS)


class TestReadBed:
    def read(self, tmp_path: Path, content: bytes, known: bool = True) -> pd.DataFrame:
        (tmp_path / "x.bed").write_bytes(content)
        return read_bed(tmp_path / "x.bed", {"chr1": 100, "b c": 9} if known else None)

    def test_of_three_columns_and_more(self, tmp_path: Path) -> None:
        found = self.read(
            tmp_path,
            b"# a comment\n\nchr1\t0\t5\r\n  \t \nchr1\t5\t100\tisland\t7\t+\t5\t9\n",
        )
        assert found.to_dict("list") == {
            "record": ["chr1", "chr1"],
            "start": [0, 5],
            "end": [5, 100],
            "name": ["", "island"],
            "score": ["", "7"],
            "strand": ["", "+"],
            "line": [3, 5],
        }

    def test_of_spaces_between_fields(self, tmp_path: Path) -> None:
        found = self.read(tmp_path, b"chr1 0   5 island\n")
        assert found.iloc[0, :4].to_list() == ["chr1", 0, 5, "island"]

    def test_of_names_with_spaces_between_tabs(self, tmp_path: Path) -> None:
        found = self.read(tmp_path, b"b c\t0\t5\tan island\n")
        assert found.iloc[0, [0, 3]].to_list() == ["b c", "an island"]

    def test_of_other_line_ends_and_a_byte_order_mark(self, tmp_path: Path) -> None:
        assert self.read(tmp_path, b"\xef\xbb\xbfchr1\t0\t5\rchr1\t7\t8")["start"].tolist() == [
            0,
            7,
        ]

    def test_of_gzip(self, tmp_path: Path) -> None:
        assert self.read(tmp_path, gzip.compress(b"chr1\t0\t5\n"))["end"].tolist() == [5]

    def test_of_nothing(self, tmp_path: Path) -> None:
        found = self.read(tmp_path, b"# only a comment\n")
        assert found.empty
        assert found["start"].dtype == np.int64

    @pytest.mark.parametrize(
        ("line", "message"),
        [
            (b"chr1\t5", "expected record, start and end"),
            (b"chr1\t-5\t9", "'-5' is not a position"),
            (b"chr1\t5\t9.0", "'9.0' is not a position"),
            ("chr1\t5\t٣".encode(), "is not a position"),
            (b"chr1\t5\t5", "interval 5-5 is empty"),
            (b"chr1\t9\t5", "interval 9-5 is empty"),
            (b"chr2\t5\t9", "interval 5-9 is on chr2, which is no record"),
            (b"chr1\t99\t101", "interval 99-101 ends beyond the 100 bases of chr1"),
            (b'track name="x y"', "track lines do not belong to BED"),
            (b"browser position chr1:1-9", "browser lines do not belong to BED"),
        ],
    )
    def test_names_file_and_line(self, tmp_path: Path, line: bytes, message: str) -> None:
        with pytest.raises(LabelError, match=message) as caught:
            self.read(tmp_path, b"#x\nchr1\t0\t1\n" + line + b"\n")
        assert str(caught.value).startswith(f"{tmp_path}/x.bed:3: ")
        assert "\n" not in str(caught.value)

    def test_takes_any_record_if_none_are_given(self, tmp_path: Path) -> None:
        found = self.read(tmp_path, b"chr2\t5\t900\n", known=False)
        assert found["record"].tolist() == ["chr2"]

    @pytest.mark.parametrize(
        ("content", "message"),
        [
            (gzip.compress(b"chr1\t0\t5\n" * 999)[:-9], "broken gzip file"),
            (gzip.compress(b"chr1\t0\t5\n")[:2] + b"xx", "broken gzip file"),
            (bytes(range(128, 256)), "not a text file"),
        ],
        ids=["cut", "damaged", "binary"],
    )
    def test_of_broken_files(self, tmp_path: Path, content: bytes, message: str) -> None:
        with pytest.raises(LabelError, match=message):
            self.read(tmp_path, content)
