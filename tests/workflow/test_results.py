"""What the workflow makes of the demo and of three real genomes.

What is to be found in the real ones is documented in tests/data/README.md.
"""

import csv
import json
from pathlib import Path

import pytest

from tests.workflow.conftest import DATA, ROWS
from tests.workflow.running import ROOT, Project, bed_bases

pytestmark = pytest.mark.xdist_group("workflow")
NAMES = [row["assembly"] for row in ROWS]
# Cut into batches, because they are longer than one; the others are decoded by one job.
LARGE = {"demo", "maripaludis"}


def recall_and_precision(
    found: set[tuple[str, int]], truth: set[tuple[str, int]]
) -> tuple[float, float]:
    shared = len(found & truth)
    return shared / len(truth), shared / len(found)


@pytest.mark.parametrize("name", NAMES)
def test_each_assembly_has_its_results(name: str, results: Path) -> None:
    folder = results / name
    expected = {
        "calls",
        "figures",
        "model.json",
        "model.provenance.json",
        "report.html",
        "report.provenance.json",
        "survey",
    }
    if name in LARGE:
        expected.add("batches")
    assert {path.name for path in folder.iterdir()} == expected
    own = ("batches", "cut", "gather") if name in LARGE else ("decode",)
    for rule in ("survey", "train", "report", *own):
        assert (results / "logs" / rule / f"{name}.log").is_file()
        assert "max_rss" in (results / "benchmarks" / rule / f"{name}.tsv").read_text()
    states = json.loads((folder / "model.json").read_text())["states"]
    tracks = {f"{state['name']}.posterior.bw" for state in states if state["reported"]}
    visible = {path.name for path in (folder / "calls").iterdir() if path.name[0] != "."}
    assert visible == tracks | {
        "chrom.sizes",
        "composition.tsv",
        "provenance.json",
        "records.tsv",
        "regions.bed",
        "regions.gff3",
        "regions.tsv",
        "summary.json",
    }


@pytest.mark.parametrize("name", NAMES)
def test_each_result_passes_its_verification(name: str, finished: Project) -> None:
    finished.hmmseg("verify", f"results/{name}/calls")


def test_gathered_batches_equal_one_decoding(finished: Project, tmp_path: Path) -> None:
    batches = finished.folder / "results" / "demo" / "batches" / "batches.tsv"
    assert len(batches.read_text().splitlines()) > 3
    whole = tmp_path / "whole"
    model = "results/demo/model.json"
    finished.hmmseg("decode", "assembly.fa.gz", "--model", model, "--output", str(whole))
    gathered = finished.folder / "results" / "demo" / "calls"
    names = {path.name for path in whole.iterdir()} - {"provenance.json"}
    assert len(names) > 5
    for name in sorted(names):
        assert (gathered / name).read_bytes() == (whole / name).read_bytes(), name


def test_summary_has_a_row_for_each_assembly_and_reported_state(results: Path) -> None:
    with (results / "summary.tsv").open(newline="") as handle:
        rows = list(csv.DictReader(handle, delimiter="\t"))
    found = [(row["assembly"], row["state"]) for row in rows]
    expected = []
    for name in NAMES:
        states = json.loads((results / name / "model.json").read_text())["states"]
        expected += [(name, state["name"]) for state in states if state["reported"]]
    assert sorted(found) == sorted(expected)


def test_demo_islands_and_domain_are_found(results: Path) -> None:
    truth = ROOT / "demo_data" / "truth.bed"
    regions = results / "demo" / "calls" / "regions.bed"
    for name in ("island", "domain"):
        recall, precision = recall_and_precision(bed_bases(regions, name), bed_bases(truth, name))
        assert recall >= 0.85, name
        assert precision >= 0.85, name


def test_demo_region_across_the_origin_is_two_lines_of_one_name(results: Path) -> None:
    regions = results / "demo" / "calls" / "regions.bed"
    lines = [line.split("\t") for line in regions.read_text().splitlines()]
    plasmid = [line for line in lines if line[0] == "plasmid_1" and line[3].startswith("island")]
    first, last = plasmid[0], plasmid[-1]
    assert first[1] == "0"
    assert last[2] == "18600"
    assert first[3] == last[3]


def test_lambda_has_its_boundary(results: Path) -> None:
    regions = results / "lambda" / "calls" / "regions.bed"
    edges = [int(x) for line in regions.read_text().splitlines() for x in line.split("\t")[1:3]]
    assert min(abs(edge - 22_499) for edge in edges) <= 5


def test_chloroplast_rrna_operons_are_found(results: Path) -> None:
    truth = bed_bases(DATA / "NC_000932.operon.bed")
    found = results / "chloroplast" / "calls" / "regions.bed"
    recall, precision = recall_and_precision(
        bed_bases(found, richest(results, "chloroplast")), truth
    )
    assert recall >= 0.99
    assert precision >= 0.90


def test_maripaludis_rna_genes_are_found(results: Path) -> None:
    truth = bed_bases(DATA / "NC_005791.rna.bed")
    found = results / "maripaludis" / "calls" / "regions.bed"
    recall, precision = recall_and_precision(
        bed_bases(found, richest(results, "maripaludis")), truth
    )
    assert recall >= 0.85
    assert precision >= 0.85


def richest(results: Path, name: str) -> str:
    """Name of the state of the highest GC in an assembly's model of order 0."""
    states = json.loads((results / name / "model.json").read_text())["states"]
    return str(max(states, key=lambda state: state["joint"][1] + state["joint"][2])["name"])


@pytest.mark.parametrize("name", NAMES)
def test_each_assembly_has_a_page_that_names_it(name: str, results: Path) -> None:
    page = (results / name / "report.html").read_text(encoding="utf-8")
    assert f"<h1>{name}</h1>" in page
    assert (results / name / "figures" / "overview.svg").is_file()
    together = (results / "report.html").read_text(encoding="utf-8")
    assert f'href="{name}/report.html"' in together


def test_snakemakes_own_report_carries_pages_and_figures(finished: Project, tmp_path: Path) -> None:
    output = tmp_path / "all.html"
    finished.snakemake("--report", str(output))
    text = output.read_text(encoding="utf-8")
    for said in ("overview.svg", "training.svg", "All assemblies side by side"):
        assert said in text
    for name in NAMES:
        assert f"What was found in {name}" in text
