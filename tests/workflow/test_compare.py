"""The comparison in the workflow: for the assemblies that ask for it, against their labels."""

import json
from pathlib import Path

import pytest

from hmmseg.sequence.alphabet import decode
from tests.evidence.drawn import drawn_contigs
from tests.workflow.running import Project

pytestmark = pytest.mark.xdist_group("workflow")


@pytest.fixture
def project(tmp_path: Path) -> Project:
    """Two assemblies of the same sequence, of which one is compared."""
    contigs, truth = drawn_contigs(1, 60_000, 500, 2_000, (0.35, 0.65), 6)
    with Path(tmp_path, "a.fa").open("w") as fasta, Path(tmp_path, "a.bed").open("w") as bed:
        for contig, spans in zip(contigs, truth, strict=True):
            text = decode(contig.bases)
            fasta.write(f">{contig.record}\n{text if isinstance(text, str) else text.decode()}\n")
            bed.writelines(f"{contig.record}\t{start}\t{end}\n" for start, end in spans)
    made = Project(tmp_path)
    made.configure(
        [
            {"assembly": "compared", "fasta": "a.fa", "labels": "a.bed", "compare": "run"},
            {"assembly": "plain", "fasta": "a.fa"},
        ]
    )
    return made


def test_comparison_of_one_assembly(project: Project) -> None:
    planned = project.planned()
    assert [job for job in planned if job[0] == "compare"] == [("compare", "compared")]
    project.snakemake("results/compared/comparison")
    folder = project.folder / "results" / "compared" / "comparison"
    document = json.loads((folder / "comparison.json").read_text())
    assert document["labels"] is True
    assert {"accuracy.tsv", "accuracy.svg", "accuracy.png"} <= {p.name for p in folder.iterdir()}
    log = project.folder / "results" / "logs" / "compare" / "compared.log"
    assert document["verdict"]["words"] in log.read_text()
    project.hmmseg("verify", str(folder))
