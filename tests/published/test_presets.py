"""Presets find what they are for, without a hand-written starting value.

Sources of the annotation are in ``tests/data/README.md``.
"""

from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from hmmseg.inference.path import best_path
from hmmseg.inference.posterior import posterior
from hmmseg.inference.streams import Corpus
from hmmseg.model import Model
from hmmseg.model.anchoring import anchored
from hmmseg.model.presets import load_preset
from hmmseg.regions.calling import Caller
from hmmseg.regions.intervals import Filters
from hmmseg.sequence.contigs import Contig, split
from hmmseg.sequence.intervals import BedLine, read_bed
from hmmseg.sequence.reading import read_records
from hmmseg.training.baum_welch import fit
from hmmseg.training.constraints import Prior
from hmmseg.training.starts import word_counts

ROOT = Path(__file__).resolve().parents[2]
DATA = ROOT / "tests" / "data"
DEMO = ROOT / "demo_data"


def contigs_of(path: Path) -> list[Contig]:
    return [contig for record in read_records([path]) for contig in split(record)]


def fitted(name: str, contigs: list[Contig]) -> Model:
    wanted = load_preset(name)
    start = anchored(wanted, word_counts(contigs, wanted.order))
    corpus = Corpus(contigs, wanted.order, start.both_strands)
    found = fit(start, corpus, prior=Prior.even(start, wanted.pseudocount))
    assert found.converged
    return found.model


def truth_on(contig: Contig, lines: list[BedLine]) -> NDArray[np.bool_]:
    on_record = np.zeros(contig.record_length, bool)
    for line in lines:
        if line.record == contig.record:
            on_record[line.start : line.end] = True
    return on_record[(contig.start + np.arange(len(contig))) % contig.record_length]


def recall_and_precision(
    model: Model, state: str, contigs: list[Contig], lines: list[BedLine]
) -> tuple[float, float]:
    index = model.names.index(state)
    called = np.concatenate([best_path(model, contig) == index for contig in contigs])
    truth = np.concatenate([truth_on(contig, lines) for contig in contigs])
    both = np.count_nonzero(called & truth)
    return both / np.count_nonzero(truth), both / np.count_nonzero(called)


def test_gc_island_finds_the_rrna_operons_of_a_chloroplast() -> None:
    """Sato et al. 1999, DNA Research 6: 283-290: an operon in each inverted repeat."""
    (contig,) = contigs_of(DATA / "NC_000932.fa.gz")
    model = fitted("gc-island", [contig])
    operons = list(read_bed(DATA / "NC_000932.operon.bed"))
    recall, precision = recall_and_precision(model, "gc-island", [contig], operons)
    assert recall >= 0.99
    assert precision >= 0.90
    called = best_path(model, contig) == model.names.index("gc-island")
    edges = np.flatnonzero(np.diff(called.astype(int))) + 1
    for operon in operons:
        for edge in (operon.start, operon.end):
            assert np.abs(edges - edge).min() <= 50
    one, other = [
        (line.start, line.end)
        for line in read_bed(DATA / "NC_000932.regions.bed")
        if line.name in ("IRb", "IRa")
    ]
    assert np.array_equal(called[slice(*one)], called[slice(*other)][::-1])


def test_gc_island_finds_the_rna_genes_of_an_archaeon() -> None:
    """Klein, Misulovin & Eddy 2002, PNAS 99: 7542-7547; Schattner 2002, NAR 30: 2076-2082."""
    (contig,) = contigs_of(DATA / "NC_005791.fa.gz")
    model = fitted("gc-island", [contig])
    genes = list(read_bed(DATA / "NC_005791.rna.bed"))
    recall, precision = recall_and_precision(model, "gc-island", [contig], genes)
    assert recall >= 0.85
    assert precision >= 0.85
    state = model.names.index("gc-island")
    called = best_path(model, contig) == state
    likely = posterior(model, contig)[:, state] > 0.5

    def found(kind: str, by: NDArray[np.bool_]) -> int:
        chosen = [gene for gene in genes if kind in gene.name]
        return sum(by[gene.start : gene.end].mean() >= 0.5 for gene in chosen)

    assert found("rRNA", called) >= 9
    assert found("tRNA", called) >= 22
    assert found("tRNA", likely) >= 28


def test_cpg_island_finds_the_islands_of_the_demo() -> None:
    contigs = contigs_of(DEMO / "assembly.fa.gz")
    model = fitted("cpg-island", contigs)
    islands = [line for line in read_bed(DEMO / "truth.bed") if line.name == "island"]
    recall, precision = recall_and_precision(model, "island", contigs, islands)
    assert recall >= 0.85
    assert precision >= 0.85


def test_foreign_finds_the_insert_of_the_demo_and_its_plasmid() -> None:
    contigs = contigs_of(DEMO / "assembly.fa.gz")
    model = fitted("foreign", contigs)
    truth = list(read_bed(DEMO / "truth.bed"))
    (insert,) = [line for line in truth if line.name == "insert"]
    plasmid = [c for c in contigs if c.record == "plasmid_1"]
    both = [insert, *(BedLine(c.record, 0, c.record_length, "", "") for c in plasmid)]
    recall, precision = recall_and_precision(model, "foreign", contigs, both)
    assert recall >= 0.85
    assert precision >= 0.95


def test_gc_domain_finds_the_arms_of_phage_lambda() -> None:
    """Its left arm is GC-rich, up to about 22.5 kb (Churchill 1989; Braun & Müller 1998)."""
    (contig,) = contigs_of(DATA / "NC_001416.fa.gz")
    model = fitted("gc-domain", [contig])
    path = best_path(model, contig)
    edges = np.flatnonzero(np.diff(path)) + 1
    # With free strands the best boundary is at 22,499; with both alike it is nearby.
    assert np.abs(edges - 22_499).min() <= 1000
    high = model.names.index("high-gc")
    assert (path[1000:21_500] == high).mean() > 0.95


def at_rich_genome(seed: int, length: int, start: int, end: int) -> Contig:
    random = np.random.Generator(np.random.PCG64(seed))
    gc = np.full(length, 0.19)
    gc[start:end] = 0.03
    strong, second = random.random(length) < gc, random.random(length) < 0.5
    bases = np.where(strong, np.where(second, 1, 2), np.where(second, 0, 3)).astype(np.uint8)
    return Contig("chromosome", 0, bases, False, length)


def end_errors(seed: int, length: int) -> tuple[int, int] | None:
    """Return how far both ends are off, or None if there is not exactly one region."""
    start = length // 3
    contig = at_rich_genome(seed, length, start, start + 2400)
    wanted = load_preset("at-rich")
    assert not wanted.trained
    model = anchored(wanted, word_counts([contig], wanted.order))
    filters = Filters(wanted.min_length, wanted.merge_gap, wanted.end_window)
    calls = Caller(model, wanted.decoder, filters=filters).call(contig, lambda *_: None)
    starts, ends, _ = calls.intervals
    if len(starts) != 1:
        return None
    return abs(int(starts[0]) - start), abs(int(ends[0]) - start - 2400)


def test_at_rich_finds_one_block() -> None:
    """19 % GC and a block of 3 %, as of Plasmodium falciparum: Bowman et al. 1999."""
    for seed in range(3):
        errors = end_errors(seed, 300_000)
        assert errors is not None
        assert max(errors) <= 60


@pytest.mark.slow
def test_at_rich_ends_are_exact() -> None:
    """In every hundred of three hundred chromosomes both ends are close in 85 or more."""
    found = [end_errors(seed, 1_000_000) for seed in range(300)]
    errors = [pair for pair in found if pair is not None]
    assert len(errors) == 300
    for hundred in (errors[:100], errors[100:200], errors[200:]):
        close = sum(max(pair) <= 30 for pair in hundred)
        median = float(np.median(hundred))
        print(f"both ends within 30 bp in {close} of 100, median end error {median} bp")
        assert close >= 85
