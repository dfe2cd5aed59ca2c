"""What ``decode`` says of each region, on the demo, in one piece and gathered from batches."""

import gzip
from pathlib import Path

import pandas as pd
import pytest

from hmmseg.cli import main
from hmmseg.regions.composition import WORDS
from hmmseg.tracks.table import read_regions_table, write_regions_table

DEMO = Path(__file__).resolve().parents[2] / "demo_data"
FASTA, MODEL = str(DEMO / "assembly.fa.gz"), str(DEMO / "model.json")


@pytest.fixture(scope="module")
def calls(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The regions of the demo."""
    folder = tmp_path_factory.mktemp("demo") / "calls"
    assert main(["decode", FASTA, "--model", MODEL, "--output", str(folder)]) == 0
    return folder


@pytest.fixture(scope="module")
def records() -> dict[str, str]:
    """The demo's sequence, letter by letter."""
    found: dict[str, list[str]] = {}
    with gzip.open(FASTA, "rt") as file:
        for line in file:
            if line.startswith(">"):
                parts = found.setdefault(line[1:].split()[0], [])
            else:
                parts.append(line.strip())
    return {name: "".join(parts) for name, parts in found.items()}


def test_columns_in_their_order(calls: Path) -> None:
    header = (calls / "regions.tsv").read_text().splitlines()[0].split("\t")
    assert header == [
        "region_id", "record", "start", "end", "length", "state", "mean_posterior",
        "log_odds_bits", "soft_masked_fraction", "expected_wrong_bases", "start_low", "start_high",
        "end_low", "end_high", "gc", "cpg_ratio", "gc_skew", "at_skew", "dinucleotide_entropy",
        "dinucleotide_distance", "gardiner_garden_1987", "takai_jones_2002",
    ]  # fmt: skip


def test_composition_is_that_of_the_letters(calls: Path, records: dict[str, str]) -> None:
    table = read_regions_table(calls / "regions.tsv")
    words = pd.read_csv(calls / "composition.tsv", sep="\t")
    assert words["region_id"].tolist() == ["genome", *table["region_id"]]
    assert list(words.columns[1:]) == list(WORDS)
    for base in "ACGT":
        assert words[base][0] == sum(text.upper().count(base) for text in records.values())
    crossing = 0
    for region, row in zip(table.itertuples(), words.iloc[1:].itertuples(), strict=True):
        text = records[region.record]
        crossing += region.end > len(text)
        letters = (text + text)[region.start : region.end]
        assert letters.upper().count("C") == row.C
        assert letters.upper().count("CG") == row.CG
        assert letters.upper().count("TG") == row.TG
        masked = sum(letter.islower() for letter in letters) / len(letters)
        assert region.soft_masked_fraction == pytest.approx(masked, abs=0.000051)
        wrong = region.length * (1 - region.mean_posterior)
        assert region.expected_wrong_bases == pytest.approx(wrong, abs=0.0051 + region.length / 2e4)
    assert crossing


def test_limits_of_ends(calls: Path, records: dict[str, str]) -> None:
    table = read_regions_table(calls / "regions.tsv")
    assert all(table[name].dtype == "int64" for name in ("start_low", "end_high"))
    assert (table["start_low"] <= table["start_high"]).all()
    assert (table["end_low"] <= table["end_high"]).all()
    holds = table["start"].between(table["start_low"], table["start_high"])
    holds &= table["end"].between(table["end_low"], table["end_high"])
    assert holds.mean() > 0.9
    # A record's ends stop them, but for the circular one's.
    crossing = table["end"] > table["record"].map(lambda name: len(records[name]))
    limits = table[~crossing & (table["record"] != table["record"][crossing].iloc[0])]
    assert (limits["start_low"] >= 0).all()
    assert (limits["end_high"] <= limits["record"].map(lambda name: len(records[name]))).all()


def test_islands_and_only_they_are_islands_in_gff3(calls: Path) -> None:
    table = read_regions_table(calls / "regions.tsv").set_index("region_id")
    lines = [line.split("\t") for line in (calls / "regions.gff3").read_text().splitlines()]
    types = {line[8].split(";")[0][3:]: line[2] for line in lines if len(line) > 8}
    assert set(table["gardiner_garden_1987"]) == {"yes", "no"}
    for name, verdict in table["gardiner_garden_1987"].items():
        assert types[str(name)] == ("CpG_island" if verdict == "yes" else "region")


@pytest.mark.parametrize("decoder", ["path", "posterior"])
def test_batches_gathered_have_the_bytes_of_the_whole(decoder: str, tmp_path: Path) -> None:
    how = ["--model", MODEL, "--decoder", decoder, "--min-length", "50"]
    assert main(["decode", FASTA, *how, "--output", str(tmp_path / "whole")]) == 0
    batches, parts, pieces = (str(tmp_path / name) for name in ("batches", "parts", "pieces"))
    plan = ["--batch-bases", "300000", "--parts", parts, "--output", batches]
    assert main(["batches", FASTA, *how, *plan]) == 0
    assert main(["cut", FASTA, "--batches", batches, "--output", pieces]) == 0
    keys = sorted(path.stem for path in Path(pieces).glob("*.fa"))
    assert len(keys) > 2
    for key in keys:
        piece = [f"{pieces}/{key}.fa", "--exclude", f"{pieces}/{key}.bed"]
        assert main(["decode", *piece, *how, "--output", f"{parts}/{key}"]) == 0
    gathered = ["--parts", parts, "--output", str(tmp_path / "gathered")]
    assert main(["gather", batches, *gathered]) == 0
    for path in sorted((tmp_path / "whole").iterdir()):
        if path.name != "provenance.json":
            assert (tmp_path / "gathered" / path.name).read_bytes() == path.read_bytes(), path.name


def test_a_table_read_and_written_again_is_the_same(calls: Path, tmp_path: Path) -> None:
    table = read_regions_table(calls / "regions.tsv")
    write_regions_table(tmp_path / "again.tsv", table)
    assert (tmp_path / "again.tsv").read_bytes() == (calls / "regions.tsv").read_bytes()
