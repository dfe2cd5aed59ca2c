"""Survey: each column by hand on small records, N50 on published examples."""

import json
import math

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hmmseg.errors import SequenceError
from hmmseg.sequence.alphabet import decode, reverse_complement
from hmmseg.sequence.reading import record_from_text
from hmmseg.sequence.survey import Survey, formats_refusing, n50, survey, to_dict, to_tsv

INNER = decode(np.random.default_rng(8).integers(0, 4, size=700, dtype=np.uint8))
TELOMERE = "CCCTAA" * 30 + INNER + "TTAGGG" * 25


def example() -> Survey:
    records = [
        record_from_text("chr1", "ACGT" + "N" * 25 + "ggccRYNN" + "n" * 30 + "AT"),
        record_from_text("chr2", TELOMERE),
        record_from_text("p.1", "NN" + "CGCG" * 4 + "N" * 24, circular=True),
        record_from_text("chr|3;x", decode(reverse_complement(record_codes(TELOMERE)))),
        record_from_text("gap", "N" * 30),
        record_from_text("gap2", "N" * 30),
    ]
    return survey(iter(records))


def record_codes(text: str) -> np.ndarray:
    return record_from_text("r", text).bases


def row(result: Survey, name: str) -> dict[str, object]:
    table = result.records.set_index("record")
    return {str(key): value for key, value in table.loc[name].items()}


def test_columns_of_a_linear_record() -> None:
    found = row(example(), "chr1")
    length = 4 + 25 + 8 + 30 + 2
    expected = {
        "length": length,
        "topology": "linear",
        "contigs": 3,
        "gaps": 2,
        "gap_bases": 25 + 32,
        "n_bases": 25 + 2 + 30,
        "n_fraction": 57 / length,
        "soft_masked_fraction": 34 / length,
        "ambiguous_bases": 2,
        "gc": 6 / 10,
        "cpg_observed_expected": 1 * 10 / (3 * 3),
        "start_repeat": "",
        "end_repeat": "",
        "duplicate_of": "",
        "composition_feature": "",
        "stands_out": False,
        "formats_refusing_name": "",
    }
    assert {key: found[key] for key in expected} == expected
    for key in ("start_copies", "end_copies", "composition_z"):
        assert math.isnan(found[key])  # type: ignore[arg-type]


def test_ends_and_duplicates_on_either_strand() -> None:
    result = example()
    one, other = row(result, "chr2"), row(result, "chr|3;x")
    assert one["start_repeat"] == one["end_repeat"] == other["start_repeat"] == "AACCCT"
    assert (one["start_copies"], one["end_copies"]) == (other["end_copies"], other["start_copies"])
    assert 30 <= float(str(one["start_copies"])) < 31
    assert 25 <= float(str(one["end_copies"])) < 26
    assert (one["duplicate_of"], other["duplicate_of"]) == ("", "chr2")


def test_gap_over_the_origin_counts_once_and_a_circle_has_no_ends() -> None:
    found = row(example(), "p.1")
    assert (found["topology"], found["gaps"], found["gap_bases"], found["contigs"]) == (
        "circular", 1, 26, 1,
    )  # fmt: skip
    ring = survey([record_from_text("ring", "TTAGGG" * 200, circular=True)])
    assert (ring.records["start_repeat"][0], ring.records["end_repeat"][0]) == ("", "")


def test_record_of_gaps_only() -> None:
    found = row(example(), "gap")
    assert (found["contigs"], found["gaps"], found["gap_bases"]) == (0, 1, 30)
    assert math.isnan(found["gc"])  # type: ignore[arg-type]
    # Two stretches of N are not known to be the same sequence.
    assert row(example(), "gap2")["duplicate_of"] == ""


def test_assembly() -> None:
    result = example()
    assembly = result.assembly
    lengths = result.records["length"].tolist()
    assert assembly["records"] == 6
    assert assembly["bases"] == sum(lengths)
    assert assembly["known_bases"] == 10 + 2 * len(TELOMERE) + 16
    assert assembly["circular_records"] == 1
    assert assembly["records_without_contig"] == 2
    assert (assembly["shortest_record"], assembly["longest_record"]) == (30, len(TELOMERE))
    assert (assembly["scaffold_n50"], assembly["scaffold_l50"]) == (len(TELOMERE), 2)
    assert (assembly["contig_n50"], assembly["contig_l50"]) == (len(TELOMERE), 2)
    assert assembly["contigs"] == 3 + 1 + 1 + 1
    assert (assembly["gap_min"], assembly["gaps"]) == (25, 2 + 1 + 1 + 1)
    assert assembly["gap_bases"] == 57 + 26 + 30 + 30
    assert assembly["n_bases"] == 57 + 26 + 30 + 30
    assert assembly["n_fraction"] == assembly["n_bases"] / sum(lengths)
    assert assembly["soft_masked_fraction"] == 34 / sum(lengths)
    assert assembly["ambiguous_bases"] == 2
    known = "ACGTGGCCAT" + "CGCG" * 4 + TELOMERE * 2
    assert assembly["gc"] == (known.count("G") + known.count("C")) / len(known)
    assert assembly["end_repeat"] == "AACCCT"
    assert (assembly["ends_with_repeat"], assembly["records_with_repeat_at_both_ends"]) == (4, 2)
    assert assembly["duplicate_records"] == 1
    assert assembly["composition_judged_records"] == 0
    assert assembly["composition_z_threshold"] is None
    assert assembly["records_standing_out"] == 0
    assert (assembly["names_refused_by_bed"], assembly["names_refused_by_gff3"]) == (2, 1)


def test_gap_min_is_passed_on() -> None:
    record = record_from_text("r", "ACGT" + "N" * 10 + "ACGT")
    assert survey([record], gap_min=10).assembly["gaps"] == 1
    assert survey([record], gap_min=11).assembly["gaps"] == 0
    with pytest.raises(ValueError, match="gap_min"):
        survey([record], gap_min=0)


def test_outlier_among_many_records() -> None:
    rng = np.random.default_rng(6)
    records = [
        record_from_text(f"s{n}", decode(rng.integers(0, 4, size=8000, dtype=np.uint8)))
        for n in range(12)
    ]
    shares = [0.35, 0.15, 0.15, 0.35]
    foreign = decode(rng.choice(4, size=8000, p=shares).astype(np.uint8))
    result = survey([*records, record_from_text("foreign", foreign)])
    table = result.records
    assert table.loc[table["stands_out"], "record"].tolist() == ["foreign"]
    assert table["composition_feature"].iloc[-1] == "G+C"
    assert table["composition_z"].iloc[-1] < 0
    assert result.assembly["composition_judged_records"] == 13
    assert result.assembly["records_standing_out"] == 1


def test_no_record() -> None:
    with pytest.raises(SequenceError, match="no record to survey"):
        survey([])


@pytest.mark.parametrize(
    ("name", "formats"),
    [
        ("chr1", []),
        ("scaffold_12", []),
        ("NC_000932.1", ["BED"]),
        ("lcl|a:1-5", ["BED"]),
        ("a;b", ["BED", "GFF3"]),
        ("a=b", ["BED", "GFF3"]),
        ("a%20b", ["BED", "GFF3"]),
        (">a", ["BED", "GFF3"]),
        ("naïve", ["BED", "GFF3"]),
        ("x" * 255, []),
        ("x" * 256, ["BED"]),
        ("a.:^*$@!+_?-|Z9", ["BED"]),
    ],
)
def test_names_that_formats_refuse(name: str, formats: list[str]) -> None:
    assert formats_refusing(name) == formats


@pytest.mark.parametrize(
    ("lengths", "expected"),
    [
        # Two assemblies from the encyclopaedia article "N50, L50, and related statistics",
        # quoted from memory: short additions to an assembly lower its N50.
        ([80, 70, 50, 40, 30, 20], (70, 2)),
        ([80, 70, 50, 40, 30, 20, 10, 5], (50, 3)),
        # By hand: half of 32 is held by the two longest exactly.
        ([2, 2, 2, 3, 3, 4, 8, 8], (8, 2)),
        ([5], (5, 1)),
        ([1, 1], (1, 1)),
        ([], (0, 0)),
    ],
)
def test_n50_examples(lengths: list[int], expected: tuple[int, int]) -> None:
    assert n50(lengths) == expected


@given(st.lists(st.integers(1, 50), min_size=1, max_size=30))
def test_n50_by_its_definition(lengths: list[int]) -> None:
    length, count = n50(lengths)
    longest = sorted(lengths, reverse=True)[:count]
    assert 2 * sum(longest) >= sum(lengths) > 2 * sum(longest[:-1])
    assert length == longest[-1]


def test_tsv_reads_back() -> None:
    result = example()
    text = to_tsv(result)
    lines = text.splitlines()
    assert lines[0].split("\t") == list(result.records.columns)
    assert len(lines) == 1 + len(result.records)
    assert text.endswith("\n")
    assert "\r" not in text
    cells = dict(zip(lines[0].split("\t"), lines[1].split("\t"), strict=True))
    assert (cells["stands_out"], cells["start_copies"], cells["gc"]) == ("no", "NA", "0.6")
    assert cells["n_fraction"] == f"{57 / 69:.6g}"
    # The frame itself keeps its truth values.
    assert pd.api.types.is_bool_dtype(result.records["stands_out"])


def test_names_with_quotes_are_written_as_they_are() -> None:
    assert "\na\"b'c\t" in to_tsv(survey([record_from_text("a\"b'c", "ACGT")]))


def test_dict_is_json_without_nan() -> None:
    result = example()
    back = json.loads(json.dumps(to_dict(result), allow_nan=False))
    assert back["assembly"] == result.assembly
    assert [entry["record"] for entry in back["records"]] == result.records["record"].tolist()
    assert back["records"][4]["gc"] is None
    assert back["records"][0]["gc"] == 0.6
    assert back["records"][0]["stands_out"] is False
