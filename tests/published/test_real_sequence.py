"""What is known of three real sequences, found without labels.

Sources of the annotation are in ``tests/data/README.md``. The log-likelihood of phage lambda
was reached from 15 of 15 random starts with a general-purpose library (hmmlearn).
"""

from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from hmmseg.inference.path import best_path, best_runs
from hmmseg.inference.posterior import posterior
from hmmseg.inference.streams import Corpus
from hmmseg.model import Model, load_model
from hmmseg.sequence.contigs import Contig, split
from hmmseg.sequence.intervals import BedLine, read_bed
from hmmseg.sequence.reading import read_records
from hmmseg.training.baum_welch import fit
from hmmseg.training.restarts import Plan, fit_restarts

DATA = Path(__file__).resolve().parents[1] / "data"


def contig_of(name: str, circular: bool = False) -> Contig:
    (record,) = read_records([DATA / f"{name}.fa.gz"])
    (contig,) = split(record)
    return Contig(contig.record, 0, contig.bases, circular, contig.record_length)


def covered(lines: list[BedLine], length: int) -> NDArray[np.bool_]:
    result = np.zeros(length, bool)
    for line in lines:
        result[line.start : line.end] = True
    return result


def recall_and_precision(
    called: NDArray[np.bool_], truth: NDArray[np.bool_]
) -> tuple[float, float]:
    both = np.count_nonzero(called & truth)
    return both / np.count_nonzero(truth), both / np.count_nonzero(called)


def fitted(name: str, contig: Contig) -> Model:
    start = load_model(DATA / "models" / f"{name}.json")
    found = fit(start, Corpus([contig], 0, False))
    assert found.converged
    return found.model


def test_phage_lambda_from_five_random_starts() -> None:
    """Churchill 1989, Bull. Math. Biol. 51: 79-94; Braun & Müller 1998, Stat. Sci. 13: 142-162."""
    contig = contig_of("NC_001416")
    plan = Plan(states=2, order=0, symmetric=False, start_kind="free", restarts=5, seed=1)
    found = fit_restarts(plan, Corpus([contig], 0, False))
    assert [one.log_likelihood for one in found.fits] == pytest.approx([-66678.07] * 5, abs=0.05)
    assert found.model.gc.tolist() == pytest.approx([0.407, 0.546], abs=0.001)
    edges = best_runs(found.model, contig).edges[1:-1].tolist()
    assert edges == pytest.approx([176, 22499, 31224, 33186, 38365, 46493], abs=5)


@pytest.mark.parametrize("circular", [False, True])
def test_chloroplast_rrna_operons(circular: bool) -> None:
    """Sato et al. 1999, DNA Research 6: 283-290: an operon in each inverted repeat."""
    contig = contig_of("NC_000932", circular)
    model = fitted("chloroplast", contig)
    path = best_path(model, contig)
    called = path == int(np.argmax(model.gc))
    operons = list(read_bed(DATA / "NC_000932.operon.bed"))
    recall, precision = recall_and_precision(called, covered(operons, len(contig)))
    assert recall >= 0.99
    assert precision >= 0.90
    edges = np.flatnonzero(np.diff(called.astype(int))) + 1
    for operon in operons:
        for edge in (operon.start, operon.end):
            assert np.abs(edges - edge).min() <= 50
    one, other = (
        (line.start, line.end)
        for line in read_bed(DATA / "NC_000932.regions.bed")
        if line.name.startswith("IR")
    )
    assert path[slice(*one)].tolist() == path[slice(*other)][::-1].tolist()


@pytest.mark.parametrize("circular", [False, True])
def test_methanococcus_rna_genes(circular: bool) -> None:
    """Klein, Misulovin & Eddy 2002, PNAS 99: 7542-7547: RNA genes are GC islands."""
    contig = contig_of("NC_005791", circular)
    model = fitted("maripaludis", contig)
    state = int(np.argmax(model.gc))
    by_path = best_path(model, contig) == state
    by_posterior = posterior(model, contig)[:, state] > 0.5
    genes = list(read_bed(DATA / "NC_005791.rna.bed"))
    recall, precision = recall_and_precision(by_path, covered(genes, len(contig)))
    assert recall >= 0.85
    assert precision >= 0.85
    assert found_genes(by_path, genes, "rRNA") >= 9
    assert found_genes(by_path, genes, "tRNA") >= 22
    assert found_genes(by_posterior, genes, "tRNA") >= 28


def found_genes(called: NDArray[np.bool_], genes: list[BedLine], kind: str) -> int:
    """Genes of a kind that are covered to half or more of their length."""
    return sum(called[gene.start : gene.end].mean() >= 0.5 for gene in genes if kind in gene.name)


def test_methanococcus_local_optimum() -> None:
    """A start without a state rich enough in GC ends a little lower, and without an RNA state.

    With hmmlearn, whose transitions need not be reversible, it ends 2.9 nats lower.
    """
    contig = contig_of("NC_005791")
    corpus = Corpus([contig], 0, False)
    start = load_model(DATA / "models" / "maripaludis.json")
    levels = np.array([0.20, 0.33, 0.46])
    joint = np.stack([(1 - levels) / 2, levels / 2, levels / 2, (1 - levels) / 2], axis=1)
    poor = Model(
        names=start.names,
        reported=start.reported,
        order=0,
        symmetric=True,
        start_kind="stationary",
        transitions=start.transitions,
        joint=joint,
    )
    good, local = (fit(model, corpus) for model in (start, poor))
    assert 2 < good.log_likelihood - local.log_likelihood < 5
    assert good.model.gc.max() > 0.5
    assert local.model.gc.max() < 0.42
