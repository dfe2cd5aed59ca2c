"""Calibration in the workflow: for assemblies that ask for it, with the settings of the calls."""

import json
from pathlib import Path

import pytest

from hmmseg.sequence.alphabet import decode
from tests.evidence.drawn import drawn_contigs
from tests.workflow.running import ROOT, Project

pytestmark = pytest.mark.xdist_group("workflow")


def drawn(folder: Path) -> Project:
    """A project with an assembly of six records, a.fa."""
    contigs, _ = drawn_contigs(1, 60_000, 500, 2_000, (0.35, 0.65), 6)
    with Path(folder, "a.fa").open("w") as fasta:
        for contig in contigs:
            fasta.write(f">{contig.record}\n{decode(contig.bases)}\n")
    return Project(folder)


@pytest.fixture
def project(tmp_path: Path) -> Project:
    """Two assemblies of the same sequence, of which one is calibrated."""
    made = drawn(tmp_path)
    asked = {"calibrate": "run", "null_kind": "chain", "null_bases": "120000", "q": "0.2"}
    made.configure(
        [{"assembly": "judged", "fasta": "a.fa", **asked}, {"assembly": "plain", "fasta": "a.fa"}],
        defaults={"min_length": 30, "restarts": 1},
    )
    return made


def test_calibration_of_one_assembly(project: Project) -> None:
    planned = project.planned()
    assert [job for job in planned if job[0] == "calibrate"] == [("calibrate", "judged")]
    project.snakemake("results/judged/calibration")
    folder = project.folder / "results" / "judged" / "calibration"
    document = json.loads((folder / "calibration.json").read_text())
    assert (document["null"], document["q"], document["null_bases"]) == ("chain", 0.2, 120_000)
    assert document["null_refit"]
    log = project.folder / "results" / "logs" / "calibrate" / "judged.log"
    assert document["statements"]["significance"] in log.read_text()
    project.hmmseg("verify", str(folder))


def test_null_sequence_of_a_large_assembly_is_drawn_by_many_jobs(tmp_path: Path) -> None:
    project = drawn(tmp_path)
    project.add(ROOT / "demo_data" / "model.json")
    asked = {"calibrate": "run", "null_bases": "120000", "model": "model.json"}
    project.configure([{"assembly": "large", "fasta": "a.fa", **asked}], batch_bases=30_000)
    # Three nulls of 120 kb, in jobs of four batches.
    project.snakemake("results/large/calls", "results/large/survey")
    rules = [rule for rule, _ in project.planned()]
    assert [rules.count(name) for name in ("nulls", "replicate", "calibrate")] == [1, 3, 1]
    project.snakemake("results/large/calibration")
    given = ["a.fa", "--model", "model.json", "--calls", "results/large/calls"]
    project.hmmseg("calibrate", *given, "--null-bases", "120000", "--output", "direct")
    several, one = (tmp_path / name for name in ("results/large/calibration", "direct"))
    names = {p.name for p in one.iterdir()}
    assert {p.name for p in several.iterdir()} - {".snakemake_timestamp"} == names
    different = [n for n in names if (one / n).read_bytes() != (several / n).read_bytes()]
    assert different == ["provenance.json"]
    assert not list((tmp_path / "results" / "large").glob("nulls"))
    assert not list((tmp_path / "results" / "large").glob("replicates/*"))
