"""Calibration in the workflow: for assemblies that ask for it, with the settings of the calls."""

import json
from pathlib import Path

import pytest

from hmmseg.sequence.alphabet import decode
from tests.evidence.drawn import drawn_contigs
from tests.workflow.running import Project

pytestmark = pytest.mark.xdist_group("workflow")


@pytest.fixture
def project(tmp_path: Path) -> Project:
    """Two assemblies of the same sequence, of which one is calibrated."""
    contigs, _ = drawn_contigs(1, 60_000, 500, 2_000, (0.35, 0.65), 6)
    with Path(tmp_path, "a.fa").open("w") as fasta:
        for contig in contigs:
            fasta.write(f">{contig.record}\n{decode(contig.bases)}\n")
    made = Project(tmp_path)
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
