"""verify: a sound folder passes, and every kind of damage is found and named."""

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from hmmseg.errors import OutputError
from hmmseg.jobs.verify import verify
from hmmseg.outputs import write_json
from hmmseg.provenance import write_provenance
from hmmseg.regions.composition import WORDS
from hmmseg.sequence.identity import Checksums, KnownRecord
from hmmseg.tracks import (
    PosteriorTrack,
    write_chrom_sizes,
    write_regions_bed,
    write_regions_gff3,
    write_regions_table,
)
from hmmseg.tracks.counts import write_counts
from hmmseg.tracks.records import write_record_table
from tests.tracks.regions import CIRCULAR, LENGTHS, table_of

TABLE = table_of(
    [
        ("island_1", "scaffold_2", 10, 60, "island", 0.98765, 31.5),
        ("low-gc_2", "scaffold_2", 100, 130, "low-gc", 0.52, 3.25),
        ("island_3", "gi|7|x;y=1,%~#é", 0, 90, "island", 1.0, 99.0),
        ("island_4", "plasmid", 40, 60, "island", 0.00005, -1.0),
    ]
)
SUMMARY = {
    "records": 4,
    "regions": {
        "island": {"count": 3, "bases": 160},
        "low-gc": {"count": 1, "bases": 30},
        "never": {"count": 0, "bases": 0},
    },
}


def seal(folder: Path) -> None:
    """Write the provenance of all files in the folder."""
    files = sorted(p for p in folder.rglob("*") if p.is_file() and p.name != "provenance.json")
    write_provenance(folder, "decode", {}, None, [], files)


@pytest.fixture
def result(tmp_path: Path) -> Path:
    """Make a folder as decoding leaves it."""
    folder = tmp_path / "result"
    folder.mkdir()
    write_chrom_sizes(folder / "chrom.sizes", LENGTHS)
    write_regions_bed(folder / "regions.bed", TABLE, LENGTHS)
    write_regions_table(folder / "regions.tsv", TABLE)
    write_regions_gff3(folder / "regions.gff3", TABLE, LENGTHS, CIRCULAR)
    with PosteriorTrack(folder / "island.posterior.bw", LENGTHS) as track:
        track.add("scaffold_2", [0, 10], [10, 60], [0.0, 1.0])
        track.add("plasmid", [5], [9], [0.25])
    with PosteriorTrack(folder / "never.posterior.bw", LENGTHS):
        pass
    write_json(folder / "summary.json", SUMMARY)
    seal(folder)
    return folder


def edit(path: Path, old: str, new: str) -> None:
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new), encoding="utf-8")


def test_a_sound_folder_passes(result: Path) -> None:
    assert verify(result) == [
        "7 files have the recorded size and SHA-256, and no others are there",
        "4 regions lie inside their records, sorted, each with a name of its own",
        "regions.bed has the intervals and scores of regions.tsv",
        "regions.gff3 has the features of regions.tsv",
        "2 posterior tracks have the records of chrom.sizes and values in [0, 1]",
        "summary.json counts the regions of regions.tsv",
    ]


def test_checking_changes_nothing(result: Path) -> None:
    before = {p: (p.read_bytes(), p.stat().st_mtime_ns) for p in result.iterdir()}
    verify(result)
    assert {p: (p.read_bytes(), p.stat().st_mtime_ns) for p in result.iterdir()} == before


def test_a_folder_of_other_files_passes_by_its_checksums(tmp_path: Path) -> None:
    (tmp_path / "sequence.fa.gz").write_bytes(b"x")
    (tmp_path / ".snakemake_timestamp").touch()
    seal(tmp_path)
    (tmp_path / ".hidden").mkdir()
    (tmp_path / ".hidden" / "x").touch()
    assert len(verify(tmp_path)) == 1


FILES = [
    ("one byte more", lambda d: edit(d / "regions.bed", "\t.\n", "\t. \n"),
     r"regions\.bed has \d+ bytes, recorded are \d+"),
    ("one byte changed", lambda d: edit(d / "regions.bed", "988", "989"),
     r"regions\.bed has been changed: its SHA-256 is not the recorded one"),
    ("a file gone", lambda d: (d / "never.posterior.bw").unlink(),
     r"never\.posterior\.bw is listed in provenance\.json but missing"),
    ("a file more", lambda d: (d / "notes.txt").write_text("x"),
     r"notes\.txt is not listed in provenance\.json"),
    ("no provenance", lambda d: (d / "provenance.json").unlink(),
     r"provenance\.json does not exist"),
    ("a name that leaves the folder",
     lambda d: edit(d / "provenance.json", '"regions.bed"', '"../result/regions.bed"'),
     r"\.\./result/regions\.bed is listed but lies outside"),
]  # fmt: skip


@pytest.mark.parametrize(("do", "message"), [c[1:] for c in FILES], ids=[c[0] for c in FILES])
def test_a_changed_folder(result: Path, do: Callable[[Path], object], message: str) -> None:
    do(result)
    with pytest.raises(OutputError, match=message) as caught:
        verify(result)
    assert "\n" not in str(caught.value)


def set_track(folder: Path, value: float, lengths: dict[str, int] = LENGTHS) -> None:
    with PosteriorTrack(folder / "island.posterior.bw", lengths) as track:
        track.add("plasmid", [5], [9], [value])


# What a wrong program could have written: the checksums are right, the content is not.
CONTENT = [
    ("a record that is not there", lambda d: edit(d / "chrom.sizes", "plasmid", "plasmix"),
     r"regions\.tsv: region island_4 \(plasmid:40-60\): its record is not known"),
    ("a region beyond its record", lambda d: edit(d / "chrom.sizes", "\t300", "\t120"),
     r"regions\.bed: .*regions\.bed:2: interval 100-130 ends beyond the 120 bases"),
    ("a region longer than its record", lambda d: edit(d / "chrom.sizes", "\t90", "\t89"),
     r"regions\.tsv: region island_3 .*: its length is not between 1 and that of the record"),
    ("a name twice", lambda d: edit(d / "regions.tsv", "island_3", "island_1"),
     r"region island_1 .*: its name is not unique"),
    ("another order", lambda d: edit(d / "regions.tsv", "\t10\t60\t50", "\t110\t160\t50"),
     r"region low-gc_2 .*: it is out of order"),
    ("a line cut short", lambda d: edit(d / "regions.tsv", "\t99.000", ""),
     r"regions\.tsv: .*regions\.tsv:4: 7 columns, the header 8"),
    ("a score above 1000", lambda d: edit(d / "regions.bed", "\t988\t", "\t1001\t"),
     r"regions\.bed:1: score '1001' is not 0 to 1000"),
    ("a score that is no integer", lambda d: edit(d / "regions.bed", "\t988\t", "\t9.8\t"),
     r"regions\.bed:1: score '9\.8' is not 0 to 1000"),
    ("another score", lambda d: edit(d / "regions.bed", "\t988\t", "\t986\t"),
     r"regions\.bed:1: the score is not 1000 x the mean posterior"),
    ("a strand", lambda d: edit(d / "regions.bed", "988\t.", "988\t+"),
     r"regions\.bed:1: the strand is '\+'"),
    ("another interval in BED", lambda d: edit(d / "regions.bed", "\t10\t60", "\t10\t61"),
     r"regions\.bed: its intervals are not those of regions\.tsv"),
    ("a track line in BED", lambda d: edit(d / "regions.bed", "scaffold_2\t10", "track x\n#\t10"),
     r"track lines do not belong"),
    ("another interval in GFF3", lambda d: edit(d / "regions.gff3", "\t11\t60", "\t10\t60"),
     r"regions\.gff3: its features are not those of regions\.tsv"),
    ("a GFF3 line cut short", lambda d: edit(d / "regions.gff3", "\t11\t60", "\t1160"),
     r"regions\.gff3: line 6: 8 columns, not 9"),
    ("a posterior above 1", lambda d: set_track(d, 1.5),
     r"island\.posterior\.bw: posteriors from 1\.5 to 1\.5, not between 0 and 1"),
    ("a posterior below 0", lambda d: set_track(d, -0.5),
     r"island\.posterior\.bw: posteriors from -0\.5 to"),
    ("a track of other records", lambda d: set_track(d, 0.5, {"plasmid": 50}),
     r"island\.posterior\.bw: its records are not those of chrom\.sizes"),
    ("a track in another order", lambda d: set_track(d, 0.5, dict(reversed(LENGTHS.items()))),
     r"island\.posterior\.bw: its records are not those of chrom\.sizes"),
    ("a track that is none", lambda d: (d / "island.posterior.bw").write_bytes(b"x" * 99),
     r"posterior tracks: .*island\.posterior\.bw: not a readable bigWig"),
    ("another count", lambda d: edit(d / "summary.json", '"count": 3', '"count": 4'),
     r"summary\.json: island has \{'count': 4, 'bases': 160\}, regions\.tsv has \{'count': 3"),
    ("other bases", lambda d: edit(d / "summary.json", '"bases": 30', '"bases": 31'),
     r"summary\.json: low-gc has"),
    ("a state left out", lambda d: edit(d / "summary.json", '"low-gc"', '"lo-gc"'),
     r"summary\.json: state low-gc is not counted"),
    ("no counts", lambda d: edit(d / "summary.json", '"regions"', '"region"'),
     r'summary\.json: it has no counts under "regions"'),
    ("a summary that is no JSON", lambda d: (d / "summary.json").write_text("{"),
     r"summary\.json: Expecting"),
    ("a table that is no text", lambda d: (d / "regions.tsv").write_bytes(b"\xff\xfe"),
     r"regions\.tsv: 'utf-8' codec"),
]  # fmt: skip


@pytest.mark.parametrize(("do", "message"), [c[1:] for c in CONTENT], ids=[c[0] for c in CONTENT])
def test_wrong_content(result: Path, do: Callable[[Path], object], message: str) -> None:
    do(result)
    seal(result)
    with pytest.raises(OutputError, match=message) as caught:
        verify(result)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("names", "bases", "message"),
    [
        (None, (50, 10), None),
        (["island_1"] * 4, (50, 10), r"composition\.tsv: its regions are not those"),
        (None, (50, 51), r"composition\.tsv: region island_1 has more bases than its length"),
        (None, (999, 10), r"composition\.tsv: the genome has more bases than the records"),
    ],
)
def test_counts_of_bases(
    result: Path, names: list[str] | None, bases: tuple[int, int], message: str | None
) -> None:
    genome, region = (np.array([n] + [0] * (len(WORDS) - 1)) for n in bases)
    names = names or TABLE["region_id"].tolist()
    write_counts(result / "composition.tsv", WORDS, genome, np.tile(region, (4, 1)), names)
    seal(result)
    if message is None:
        assert "composition.tsv counts the regions of regions.tsv" in verify(result)
        return
    with pytest.raises(OutputError, match=message):
        verify(result)


def test_counts_that_are_none(result: Path) -> None:
    (result / "composition.tsv").write_text("region_id\tA\ngenome\tx\n")
    seal(result)
    with pytest.raises(OutputError, match="not the counts that decode writes"):
        verify(result)


def test_all_problems_are_counted(result: Path) -> None:
    (result / "summary.json").unlink()
    (result / "a").touch()
    (result / "b").touch()
    with pytest.raises(OutputError, match=r"summary\.json is listed .* \(and 2 more\); make"):
        verify(result)


@pytest.mark.parametrize("name", ["nowhere", "file"])
def test_what_is_no_folder(tmp_path: Path, name: str) -> None:
    (tmp_path / "file").touch()
    with pytest.raises(OutputError, match="is not a folder; give the folder of a result"):
        verify(tmp_path / name)


def test_provenance_alone_is_not_enough_to_hide_a_change(result: Path) -> None:
    document = json.loads((result / "provenance.json").read_bytes())
    document["outputs"] = []
    (result / "provenance.json").write_text(json.dumps(document))
    with pytest.raises(OutputError, match=r"chrom\.sizes is not listed.*\(and 6 more\)"):
        verify(result)


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("", "", None),
        ("plasmid", "plasmix", r"records\.tsv: its records are not those of chrom\.sizes"),
        ("0f", "xx", r"records\.tsv: '.*xx.*' is no SHA-256"),
        ("topology", "form", r"records\.tsv: .*cannot be read as a table of records"),
    ],
)
def test_table_of_records(result: Path, old: str, new: str, message: str | None) -> None:
    sums = Checksums("0f" * 32, "1e" * 32)
    rows = [KnownRecord(name, length, name in CIRCULAR, sums) for name, length in LENGTHS.items()]
    write_record_table(result / "records.tsv", rows)
    edit(result / "records.tsv", old, new)
    seal(result)
    if message is None:
        assert "records.tsv has the records of chrom.sizes, with checksums" in verify(result)
        return
    with pytest.raises(OutputError, match=message):
        verify(result)
