"""GFF3, against the Generic Feature Format Version 3 specification (1.26, L. Stein).

The parser here knows the specification and nothing of the writer.
"""

import re
from pathlib import Path
from typing import NamedTuple
from urllib.parse import unquote

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings

from hmmseg.errors import OutputError
from hmmseg.tracks.gff3 import write_regions_gff3
from tests.tracks.regions import CIRCULAR, LENGTHS, Row, table_of, tables


class Feature(NamedTuple):
    seqid: str
    type: str
    start: int
    end: int
    score: float | None
    attributes: dict[str, str]


def parse_gff3(text: str) -> tuple[dict[str, tuple[int, int]], list[Feature]]:
    """Read sequence regions and features, with the rules of the specification as assertions."""
    lines = text.split("\n")
    assert lines.pop() == ""
    # "This directive must be present, must be the topmost line of the file."
    assert re.fullmatch(r"##gff-version 3(\.\d+(\.\d+)?)?", lines[0])
    regions: dict[str, tuple[int, int]] = {}
    features: list[Feature] = []
    for line in lines[1:]:
        if line.startswith("##sequence-region "):
            _, seqid, start, end = line.split(" ")
            # "Only one ##sequence-region directive may be given for any given seqid."
            assert seqid_of(seqid) not in regions
            regions[seqid_of(seqid)] = (int(start), int(end))
        else:
            features.append(parse_feature(line))
    check_boundaries(regions, features)
    ids = [feature.attributes["ID"] for feature in features]
    # "IDs for each feature must be unique within the scope of the GFF file."
    assert len(set(ids)) == len(ids)
    return regions, features


def seqid_of(field: str) -> str:
    """Undo the escapes of column 1."""
    # "Must escape any characters not in the set [a-zA-Z0-9.:^*$@!+_?-|]."
    assert re.fullmatch(r"([a-zA-Z0-9.:^*$@!+_?|-]|%[0-9A-F]{2})+", field)
    return unquote(field, errors="strict")


def parse_feature(line: str) -> Feature:
    """Read one feature line."""
    fields = line.split("\t")
    assert len(fields) == 9
    seqid, source, kind, start, end, score, strand, phase, last = fields
    assert source == "hmmseg"
    assert (strand, phase) == (".", ".")
    # "Positive 1-based integer coordinates. Start is always less than or equal to end."
    assert 1 <= int(start) <= int(end)
    attributes: dict[str, str] = {}
    for item in last.split(";"):
        # Tags and values hold none of ",=;&" unescaped, nor control characters.
        match = re.fullmatch(r"([^,=;&\x00-\x1f\x7f]+)=([^,=;&\x00-\x1f\x7f]+)", item)
        assert match
        tag, value = match.groups()
        # "No other characters may be encoded."
        for escape in re.findall(r"%..", value):
            assert re.fullmatch(r"%(0[0-9A-F]|1[0-9A-F]|7F|25|3B|3D|26|2C)", escape)
        # "All attributes that begin with an uppercase letter are reserved."
        assert tag in ("ID", "Is_circular") or tag[0].islower()
        assert tag not in attributes
        attributes[tag] = unquote(value)
    number = None if score == "." else float(score)
    return Feature(seqid_of(seqid), kind, int(start), int(end), number, attributes)


def check_boundaries(regions: dict[str, tuple[int, int]], features: list[Feature]) -> None:
    """Features lie in their sequence-region, or their landmark is marked as circular."""
    circular = {f.seqid for f in features if f.attributes.get("Is_circular") == "true"}
    for feature in features:
        start, end = regions[feature.seqid]
        if feature.attributes.get("Is_circular") == "true":
            assert (feature.attributes["ID"], feature.start) == (feature.seqid, start)
            assert feature.end == end
        assert start <= feature.start <= end
        assert feature.end <= end or feature.seqid in circular


def write(path: Path, table: pd.DataFrame, lengths: dict[str, int], circular: set[str]) -> str:
    write_regions_gff3(path, table, lengths, circular)
    return path.read_bytes().decode("utf-8")


@given(table=tables())
@settings(max_examples=60)
def test_features_are_the_regions(
    table: pd.DataFrame, tmp_path_factory: pytest.TempPathFactory
) -> None:
    path = tmp_path_factory.mktemp("gff") / "regions.gff3"
    regions, features = parse_gff3(write(path, table, LENGTHS, CIRCULAR))
    assert list(regions.items()) == [(name, (1, length)) for name, length in LENGTHS.items()]
    landmarks = [f for f in features if "Is_circular" in f.attributes]
    crossing = table[table["end"] > table["record"].map(LENGTHS)]
    assert [f.seqid for f in landmarks] == list(dict.fromkeys(crossing["record"]))
    features = [f for f in features if "Is_circular" not in f.attributes]
    assert len(features) == len(table)
    for feature, region in zip(features, table.itertuples(), strict=True):
        assert feature.seqid == region.record
        assert feature.type == "region"  # SO:0000001
        assert (feature.start - 1, feature.end) == (region.start, region.end)
        assert feature.score == pytest.approx(region.log_odds_bits, abs=0.0005001)
        assert set(feature.attributes) == {"ID", "state", "mean_posterior"}
        assert feature.attributes["ID"] == region.region_id
        assert feature.attributes["state"] == region.state
        mean = float(feature.attributes["mean_posterior"])
        assert mean == pytest.approx(region.mean_posterior, abs=0.00005001)


def test_a_circular_genome_as_the_specification_shows_it(tmp_path: Path) -> None:
    # Section "Circular Genomes", from memory: phage f1, J02448, of 6,407 bases, has a landmark
    # line "region 1 6407 ... ID=J02448;Name=J02448;Is_circular=true" and its gene II, from 6006
    # across the origin to 831, as "CDS 6006 7238".
    table = table_of([("geneII", "J02448", 6005, 7238, "x", 0.5, 1.5)])
    text = write(tmp_path / "x.gff3", table, {"J02448": 6407}, {"J02448"})
    landmark, gene = parse_gff3(text)[1]
    assert landmark == ("J02448", "region", 1, 6407, None, {"ID": "J02448", "Is_circular": "true"})
    assert (gene.start, gene.end, gene.end - 6407) == (6006, 7238, 831)


def test_the_bytes(tmp_path: Path) -> None:
    rows: list[Row] = [
        ("a_1", "NC_0001.1", 0, 10, "a", 0.98765, 12.3456),
        ("a_2", "gi|7|x;y=1,%~#é", 5, 6, "a", 1.0, -0.0001),
    ]
    assert write(tmp_path / "x", table_of(rows), LENGTHS, CIRCULAR) == (
        "##gff-version 3\n"
        "##sequence-region scaffold_2 1 300\n"
        "##sequence-region NC_0001.1 1 120\n"
        "##sequence-region gi|7|x%3By%3D1%2C%25%7E%23%C3%A9 1 90\n"
        "##sequence-region plasmid 1 50\n"
        "NC_0001.1\thmmseg\tregion\t1\t10\t12.346\t.\t.\tID=a_1;state=a;mean_posterior=0.9877\n"
        "gi|7|x%3By%3D1%2C%25%7E%23%C3%A9\thmmseg\tregion\t6\t6\t0.000\t.\t.\t"
        "ID=a_2;state=a;mean_posterior=1.0000\n"
    )


def test_infinite_log_odds_are_no_score(tmp_path: Path) -> None:
    table = table_of([("a_1", "plasmid", 0, 5, "a", 0.5, np.inf)])
    text = write(tmp_path / "x", table, LENGTHS, CIRCULAR)
    assert parse_gff3(text)[1][0].score is None


def test_islands_have_their_own_type(tmp_path: Path) -> None:
    # Sequence Ontology, from memory: SO:0000307 CpG_island, SO:0000001 region.
    rows: list[Row] = [
        ("a_1", "plasmid", 0, 5, "a", 0.5, 1.0),
        ("b_1", "plasmid", 45, 55, "b", 0.5, 1.0),
    ]
    table = table_of(rows)
    table["gardiner_garden_1987"] = ["no", "yes"]
    features = parse_gff3(write(tmp_path / "x", table, LENGTHS, CIRCULAR))[1]
    types = [(feature.attributes["ID"], feature.type) for feature in features]
    assert types == [("plasmid", "region"), ("a_1", "region"), ("b_1", "CpG_island")]


def test_refuses_to_cross_the_end_of_a_linear_record(tmp_path: Path) -> None:
    table = table_of([("a_1", "plasmid", 45, 55, "a", 0.5, 1.0)])
    with pytest.raises(OutputError, match="crosses the end of a record that is not circular"):
        write_regions_gff3(tmp_path / "x", table, LENGTHS, set())
    assert not (tmp_path / "x").exists()


def test_refuses_a_landmark_with_the_name_of_a_region(tmp_path: Path) -> None:
    table = table_of([("plasmid", "plasmid", 45, 55, "a", 0.5, 1.0)])
    with pytest.raises(OutputError, match="rename the record"):
        write_regions_gff3(tmp_path / "x", table, LENGTHS, CIRCULAR)


@pytest.mark.parametrize("name", [">x", "a b", "x\ty", "%41", "x&y"])
def test_seqids_come_back(tmp_path: Path, name: str) -> None:
    table = table_of([("a_1", name, 0, 5, "a", 0.5, 1.0)])
    regions, features = parse_gff3(write(tmp_path / "x", table, {name: 9}, set()))
    assert list(regions) == [name] == [feature.seqid for feature in features]
