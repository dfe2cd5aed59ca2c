"""One finished run of the workflow, which all tests of its results share."""

from pathlib import Path

import pytest

from tests.workflow.running import ROOT, Project

DATA = ROOT / "tests" / "data"
ROWS = (
    {
        "assembly": "demo",
        "fasta": "assembly.fa.gz",
        "init": "start.json",
    },
    {
        "assembly": "lambda",
        "fasta": "NC_001416.fa.gz",
        "states": "2",
        "order": "0",
        "strands": "stranded",
        "start": "free",
    },
    {
        "assembly": "chloroplast",
        "fasta": "NC_000932.fa.gz",
        "init": "chloroplast.json",
        "circular": "NC_000932.1",
    },
    {
        "assembly": "maripaludis",
        "fasta": "NC_005791.fa.gz",
        "init": "maripaludis.json",
        "circular": "NC_005791.1",
    },
)


@pytest.fixture(scope="session")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Project:
    """The demo and three real genomes, run to the end from one sample sheet."""
    project = Project(tmp_path_factory.mktemp("workflow"))
    project.add(ROOT / "demo_data" / "assembly.fa.gz", ROOT / "demo_data" / "start.json")
    project.add(*sorted(DATA.glob("*.fa.gz")), *sorted((DATA / "models").glob("*.json")))
    # Small batches, so that even the demo is cut into several and gathered.
    project.configure(ROWS, batch_bases=400_000)
    project.snakemake()
    return project


@pytest.fixture
def results(finished: Project) -> Path:
    """Folder of the results of that run."""
    return finished.folder / "results"
