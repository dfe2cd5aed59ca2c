"""Three published genomes; tests/data/README.md names accessions and papers."""

import gzip
from pathlib import Path

import numpy as np
import pytest
from Bio import SeqIO
from Bio.SeqUtils import gc_fraction

from hmmseg.sequence.alphabet import encode, reverse_complement
from hmmseg.sequence.contigs import split
from hmmseg.sequence.intervals import read_bed
from hmmseg.sequence.reading import Record, read_records
from hmmseg.sequence.selection import Selection
from hmmseg.sequence.survey import survey

DATA = Path(__file__).resolve().parents[1] / "data"
# Length and per cent G+C: Sanger et al. 1982 and the record, Sato et al. 1999, Hendrickson et
# al. 2004.
PUBLISHED = {
    "NC_001416": (48_502, 49.86),
    "NC_000932": (154_478, 36.29),
    "NC_005791": (1_661_137, 33.10),
}


def read(accession: str) -> Record:
    (record,) = read_records([DATA / f"{accession}.fa.gz"])
    return record


@pytest.mark.parametrize("accession", PUBLISHED)
def test_published_length_and_gc(accession: str) -> None:
    length, gc = PUBLISHED[accession]
    result = survey([read(accession)])
    assert result.assembly["bases"] == result.assembly["scaffold_n50"] == length
    assert round(100 * result.assembly["gc"], 2) == gc
    assert result.records["record"].tolist() == [f"{accession}.1"]


@pytest.mark.parametrize("accession", PUBLISHED)
def test_bases_and_gc_are_those_of_biopython(accession: str) -> None:
    with gzip.open(DATA / f"{accession}.fa.gz", "rt") as handle:
        parsed = SeqIO.read(handle, "fasta")
    record = read(accession)
    assert record.bases.tobytes() == encode(str(parsed.seq)).tobytes()
    found = survey([record]).assembly["gc"]
    assert found == pytest.approx(gc_fraction(parsed.seq, "remove"), abs=1e-5)


def test_inverted_repeats_of_the_chloroplast() -> None:
    # Sato et al. 1999: 84,170 + 26,264 + 17,780 + 26,264, the repeats in opposite directions.
    record = read("NC_000932")
    regions = {
        line.name: (line.start, line.end) for line in read_bed(DATA / "NC_000932.regions.bed")
    }
    assert [end - start for start, end in regions.values()] == [84_170, 26_264, 17_780, 26_264]
    first, second = (record.bases[slice(*regions[name])] for name in ("IRb", "IRa"))
    assert reverse_complement(first).tobytes() == second.tobytes()


def test_single_copy_region_and_repeats_as_one_contig_over_the_origin() -> None:
    record = read("NC_000932")
    selection = Selection.from_options(circular_names=["NC_000932.1"])
    (circle,) = selection.apply([record])
    assert [contig.closed for contig in split(circle)] == [True]
    (small,) = [line for line in read_bed(DATA / "NC_000932.regions.bed") if line.name == "SSC"]
    (rest,) = split(circle, exclude=np.array([[small.start, small.end]]))
    assert (rest.start, len(rest)) == (small.end, 154_478 - 17_780)
    assert rest.bases[:26_264].tobytes() == record.bases[small.end :].tobytes()


def test_annotated_genes_lie_inside_their_records() -> None:
    for bed, accession in (
        ("NC_000932.rna.bed", "NC_000932"),
        ("NC_000932.operon.bed", "NC_000932"),
        ("NC_005791.rna.bed", "NC_005791"),
    ):
        selection = Selection.from_options(exclude_bed=DATA / bed)
        (record,) = selection.apply([read(accession)])
        contigs = split(record, exclude=selection.exclude[record.name])
        assert len(contigs) == len(selection.exclude[record.name]) + 1


def test_rna_genes_are_rich_in_gc() -> None:
    # Klein, Misulovin & Eddy 2002: G+C of RNA genes against the rest of the AT-rich genome.
    record = read("NC_005791")
    kinds: dict[str, list[int]] = {"tRNA": [0, 0], "rRNA": [0, 0]}
    for line in read_bed(DATA / "NC_005791.rna.bed"):
        kind = line.name.split(":")[0]
        if kind in kinds:
            bases = record.bases[line.start : line.end]
            kinds[kind][0] += int(((bases == 1) | (bases == 2)).sum())
            kinds[kind][1] += len(bases)
    assert round(100 * kinds["rRNA"][0] / kinds["rRNA"][1], 1) == 54.2
    assert round(100 * kinds["tRNA"][0] / kinds["tRNA"][1], 1) == 60.5
