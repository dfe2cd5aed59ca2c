"""The demo assembly is what its recipe makes, and holds what its README says."""

import gzip
import importlib.util
import re
from pathlib import Path

import numpy as np
import pytest

from hmmseg.sequence.reading import Record, read_records
from tests.workflow.running import ROOT, bed_bases

DEMO = ROOT / "demo_data"


@pytest.fixture(scope="module")
def records() -> dict[str, Record]:
    return {record.name: record for record in read_records([DEMO / "assembly.fa.gz"])}


def test_the_recipe_makes_the_same_bytes(tmp_path: Path) -> None:
    spec = importlib.util.spec_from_file_location("build", DEMO / "build.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    module.build(tmp_path)
    # Two builds of zlib may compress alike letters to different bytes: the letters count.
    made = gzip.decompress((tmp_path / "assembly.fa.gz").read_bytes())
    assert made == gzip.decompress((DEMO / "assembly.fa.gz").read_bytes())
    assert (tmp_path / "truth.bed").read_bytes() == (DEMO / "truth.bed").read_bytes()


def test_the_file_carries_neither_time_nor_name() -> None:
    head = (DEMO / "assembly.fa.gz").read_bytes()[:10]
    assert head[3] == 0  # no flags, so no name
    assert head[4:8] == bytes(4)  # no time


def test_size_is_as_stated(records: dict[str, Record]) -> None:
    lengths = [len(record) for record in records.values()]
    readme = (DEMO / "README.md").read_text()
    assert f"{len(lengths)} records, {sum(lengths):,} bases" in readme
    assert len(lengths) == 24
    assert sum(lengths) == pytest.approx(1_000_000, rel=0.05)
    assert min(lengths) < 1_000
    assert max(lengths) > 100_000


def test_it_has_what_real_assemblies_have(records: dict[str, Record]) -> None:
    assert [name for name, record in records.items() if record.circular] == ["plasmid_1"]
    assert sum(record.ambiguous for record in records.values()) == 8
    runs = np.concatenate([record.n_runs for record in records.values()])
    lengths = runs[:, 1] - runs[:, 0]
    assert {1, 10, 24, 25, 2_500} <= set(lengths.tolist())
    masked = sum(int(np.diff(record.soft_mask).sum()) for record in records.values())
    assert 0.05 < masked / sum(map(len, records.values())) < 0.25


def test_truth_is_in_the_sequence(records: dict[str, Record]) -> None:
    """Composition inside the truth differs from that outside, as the README says."""
    truth = {name: bed_bases(DEMO / "truth.bed", name) for name in ("island", "domain", "insert")}
    scaffolds = {name: record for name, record in records.items() if not record.circular}
    counts = {name: np.zeros(5, dtype=int) for name in (*truth, "")}
    for record in scaffolds.values():
        left = np.ones(len(record), dtype=bool)
        for name, bases in truth.items():
            inside = [position for where, position in bases if where == record.name]
            left[inside] = False
            counts[name] += np.bincount(record.bases[inside], minlength=5)
        counts[""] += np.bincount(record.bases[left], minlength=5)
    gc = {name: (count[1] + count[2]) / count[:4].sum() for name, count in counts.items()}
    assert gc[""] == pytest.approx(0.42, abs=0.01)
    assert gc["island"] == pytest.approx(0.60, abs=0.01)
    assert gc["domain"] == pytest.approx(0.31, abs=0.01)
    assert gc["insert"] == pytest.approx(0.49, abs=0.02)


def test_truth_lies_outside_gaps(records: dict[str, Record]) -> None:
    truth = bed_bases(DEMO / "truth.bed")
    for record in records.values():
        for start, end in record.n_runs.tolist():
            if end - start >= 25:
                assert not truth & {(record.name, position) for position in range(start, end)}


def test_an_island_spans_the_origin_of_the_plasmid(records: dict[str, Record]) -> None:
    lines = (DEMO / "truth.bed").read_text().splitlines()
    [first, last] = [line for line in lines if line.startswith("plasmid_1\t")]
    assert re.fullmatch(r"plasmid_1\t0\t\d+\tisland", first)
    assert last.split("\t")[2] == str(len(records["plasmid_1"]))
