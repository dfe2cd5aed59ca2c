"""A revised assembly under a given model: what is decoded again, and what is told of it."""

import csv
import gzip
from pathlib import Path
from typing import NamedTuple

import pytest

from tests.workflow.running import ROOT, Project

pytestmark = pytest.mark.xdist_group("workflow")

BATCH_BASES = 200_000


def records(path: Path) -> dict[str, str]:
    """Header and sequence lines of each record."""
    found: dict[str, str] = {}
    with gzip.open(path, "rt") as file:
        entries = file.read().split(">")[1:]
    for entry in entries:
        header, text = entry.split("\n", 1)
        found[header] = text
    return found


def revise(before: dict[str, str]) -> dict[str, str]:
    """One record changed, one added, one removed, one renamed; the others in another order."""
    after = {
        header.replace("scaffold_11", "scaffold_11b"): text
        for header, text in reversed(before.items())
    }
    changed = next(header for header in after if header.split()[0] == "scaffold_07")
    lines = after[changed].split("\n")
    lines[3] = lines[3][:20] + "ACGTTGCAGT" + lines[3][20:]
    after[changed] = "\n".join(lines)
    del after[next(header for header in after if header.split()[0] == "scaffold_09")]
    after["scaffold_99"] = "ACGGATTTCAGGATAC" * 500 + "\n"
    return after


class Revised(NamedTuple):
    """A project whose second run added the revision, and what that run said."""

    project: Project
    said: str
    parts: dict[Path, int]


@pytest.fixture(scope="module")
def revised(tmp_path_factory: pytest.TempPathFactory) -> Revised:
    """The demo, decoded by the model that drew it, and after that a revision beside it."""
    made = Project(tmp_path_factory.mktemp("revision"))
    made.add(ROOT / "demo_data" / "assembly.fa.gz", ROOT / "demo_data" / "model.json")
    demo = {"assembly": "demo", "fasta": "assembly.fa.gz", "model": "model.json"}
    made.configure([demo], batch_bases=BATCH_BASES)
    said = made.snakemake()
    batches = rows(made.folder / "results/demo/batches/batches.tsv")
    assert f"0 of {len(batches)} batches were decoded before and used again." in said
    text = revise(records(made.folder / "assembly.fa.gz"))
    (made.folder / "revised.fa").write_text("".join(f">{h}\n{t}" for h, t in text.items()))
    revised = {"assembly": "revised", "fasta": "revised.fa", "model": "model.json"}
    made.configure([demo, revised], batch_bases=BATCH_BASES)
    parts = {path: path.stat().st_mtime_ns for path in made.folder.glob("results/parts/*")}
    return Revised(made, made.snakemake(), parts)


def rows(path: Path) -> list[dict[str, str]]:
    with path.open(newline="") as file:
        return list(csv.DictReader(file, delimiter="\t"))


def members(project: Project, assembly: str) -> dict[str, set[str]]:
    """Names of the records of each batch."""
    found: dict[str, set[str]] = {}
    for row in rows(project.folder / "results" / assembly / "batches" / "records.tsv"):
        found.setdefault(row["batch"], set()).add(row["record"])
    return found


def test_only_batches_with_changed_sequence_are_decoded(revised: Revised, tmp_path: Path) -> None:
    project, said, parts = revised
    batches = rows(project.folder / "results/revised/batches/batches.tsv")
    again = {row["batch"] for row in batches if row["reused"] == "no"}
    assert said.count("localrule decode_batch:") == len(again)
    told = f"{len(batches) - len(again)} of {len(batches)} batches were decoded before"
    assert f"{told} and used again." in said
    assert {path: path.stat().st_mtime_ns for path in parts} == parts

    before, after = members(project, "demo"), members(project, "revised")
    # What shared a batch with the removed record, or with the changed one as it was, has to be
    # decoded with others, too.
    beside = {
        name
        for names in before.values()
        if names & {"scaffold_07", "scaffold_09"}
        for name in names
    }
    for key, names in after.items():
        touched = names & ({"scaffold_07", "scaffold_99"} | beside)
        assert bool(touched) == (key in again), names
    assert 1 <= len(again) < len(batches) - 2

    whole = tmp_path / "whole"
    decode = ["decode", "revised.fa", "--model", "model.json", "--output", str(whole)]
    project.hmmseg(*decode)
    for path in whole.iterdir():
        if path.name != "provenance.json":
            gathered = project.folder / "results/revised/calls" / path.name
            assert gathered.read_bytes() == path.read_bytes(), path.name


def test_diff_names_exactly_the_changes(revised: Revised) -> None:
    project = revised.project
    said = project.hmmseg("diff", "results/demo", "results/revised", "--output", "diff")
    told = {
        (row["status"], row["old_record"], row["new_record"])
        for row in rows(project.folder / "diff" / "records.tsv")
        if row["status"] != "same"
    }
    assert told == {
        ("changed", "scaffold_07", "scaffold_07"),
        ("added", "NA", "scaffold_99"),
        ("removed", "scaffold_09", "NA"),
        ("renamed", "scaffold_11", "scaffold_11b"),
    }
    assert "Of 24 records 21 are the same, 1 is renamed, 1 is changed and 1 is gone" in said
    for row in rows(project.folder / "diff" / "regions.tsv"):
        if row["record_status"] in ("same", "renamed"):
            assert row["status"] == "kept"
        if row["old_record"] == "scaffold_09":
            assert row["status"] == "lost"


def test_a_second_run_does_nothing(revised: Revised) -> None:
    assert "Nothing to be done" in revised.project.snakemake("--dry-run")
