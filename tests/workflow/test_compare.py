"""The comparison in the workflow: for the assemblies that ask for it, against their labels."""

import json
from pathlib import Path

import pytest

from tests.evidence.drawn import drawn_contigs, write_drawn
from tests.workflow.running import Project

pytestmark = pytest.mark.xdist_group("workflow")

BASES = 60_000


@pytest.fixture
def project(tmp_path: Path) -> Project:
    """Two assemblies of the same sequence, of which one is compared."""
    write_drawn(tmp_path, drawn_contigs(1, BASES, 500, 2_000, (0.35, 0.65), 6))
    configure(Project(tmp_path))
    return Project(tmp_path)


def configure(project: Project, **config: int) -> None:
    project.configure(
        [
            {"assembly": "compared", "fasta": "s.fa", "labels": "truth.bed", "compare": "run"},
            {"assembly": "plain", "fasta": "s.fa"},
        ],
        **config,
    )


def of_comparison(project: Project) -> list[tuple[str, str]]:
    return [job for job in project.planned() if job[0] in ("fold", "compare")]


def test_comparison_of_one_assembly(project: Project) -> None:
    assert of_comparison(project) == [("compare", "compared")]
    project.snakemake("results/compared/comparison")
    folder = project.folder / "results" / "compared" / "comparison"
    document = json.loads((folder / "comparison.json").read_text())
    assert document["labels"] is True
    assert {"accuracy.tsv", "accuracy.svg", "accuracy.png"} <= {p.name for p in folder.iterdir()}
    log = project.folder / "results" / "logs" / "compare" / "compared.log"
    assert document["verdict"]["words"] in log.read_text()
    project.hmmseg("verify", str(folder))


def test_folds_of_a_large_assembly_are_jobs(project: Project) -> None:
    """One that may hold more than one batch: the same files, but for what they were made from."""
    project.snakemake("results/compared/comparison")
    results = project.folder / "results" / "compared"
    whole = (results / "comparison").rename(results / "whole")
    configure(project, batch_bases=BASES // 2)
    assert of_comparison(project) == [("compare", "compared")] + [("fold", "compared")] * 5
    project.snakemake("results/compared/comparison")
    for number in range(1, 6):
        log = project.folder / "results" / "logs" / "fold" / "compared" / f"{number}.log"
        assert log.read_text().startswith(f"fold {number} of 5: ")
    assert not list(results.glob("folds/*"))
    project.hmmseg("verify", str(results / "comparison"))
    ours, theirs = (
        {path.name: path.read_bytes() for path in folder.iterdir() if path.suffix}
        for folder in (results / "comparison", whole)
    )
    inputs = [
        [entry["name"] for entry in json.loads(files.pop("provenance.json"))["inputs"]]
        for files in (ours, theirs)
    ]
    assert inputs[0] == inputs[1] + ["provenance.json"] * 5
    assert len(ours) > 3
    assert ours == theirs
    assert of_comparison(project) == []
