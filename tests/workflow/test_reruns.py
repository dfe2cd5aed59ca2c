"""What a second run does, and what it does after a change."""

import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from tests.workflow.running import Project

pytestmark = pytest.mark.xdist_group("workflow")
PAGES = ("report", "pages")
ALL_OF_THEM = ("summary", "pages")
"""Rules that take all assemblies together."""


@contextmanager
def touched(path: Path) -> Iterator[None]:
    """Give a file the present time, and its old time back afterwards."""
    before = path.stat()
    os.utime(path)
    yield
    os.utime(path, ns=(before.st_atime_ns, before.st_mtime_ns))


def test_a_second_run_does_nothing(finished: Project) -> None:
    assert "Nothing to be done" in finished.snakemake("--dry-run")
    before = {path: path.stat().st_mtime_ns for path in finished.folder.glob("results/**/*")}
    assert "Nothing to be done" in finished.snakemake()
    after = {path: path.stat().st_mtime_ns for path in finished.folder.glob("results/**/*")}
    assert after == before


def test_a_touched_assembly_reruns_only_its_part(finished: Project) -> None:
    with touched(finished.folder / "NC_001416.fa.gz"):
        planned = finished.planned()
    assert {assembly for rule, assembly in planned if rule not in ALL_OF_THEM} == {"lambda"}
    assert {rule for rule, _ in planned} == {"survey", "train", "decode", "summary", *PAGES}


def test_a_touched_start_model_trains_and_calls_again_but_surveys_nothing(
    finished: Project,
) -> None:
    with touched(finished.folder / "start.json"):
        planned = finished.planned()
    assert {assembly for rule, assembly in planned if rule not in ALL_OF_THEM} == {"demo"}
    assert {rule for rule, _ in planned} == {"train", "batches", "gather", "summary", *PAGES}


def test_a_changed_setting_of_the_calls_does_not_train_again(finished: Project) -> None:
    config = finished.folder / "config.yaml"
    before = config.read_text()
    config.write_text(before + "defaults: {min_length: 50}\n")
    planned = finished.planned()
    config.write_text(before)
    assert {rule for rule, _ in planned} == {"decode", "batches", "gather", "summary", *PAGES}


def test_batches_leave_their_results_behind_and_nothing_else(finished: Project) -> None:
    assert not list(finished.folder.glob("results/*/pieces"))
    assert not list(finished.folder.glob("results/*/decoded"))
    parts = {path.name for path in finished.folder.glob("results/parts/*")}
    tables = finished.folder.glob("results/*/batches/batches.tsv")
    assert parts == {
        line.split("\t")[0] for table in tables for line in table.read_text().splitlines()[1:]
    }


def test_a_grid_is_selected_from_one_job_a_model(finished: Project) -> None:
    config = finished.folder / "config.yaml"
    before = config.read_text()
    config.write_text(before + "select_states: [1, 2]\nselect_orders: [0, 1]\n")
    try:
        planned = finished.planned()
        assert {rule for rule, _ in planned} == {"select", "recommend", *PAGES}
        assert planned.count(("select", "lambda")) == 4
        assert planned.count(("recommend", "lambda")) == 1
        finished.snakemake("results/lambda/selection")
        table = (finished.folder / "results/lambda/selection/selection.tsv").read_text()
        assert [line.split("\t")[:2] for line in table.splitlines()[1:]] == [
            ["1", "0"],
            ["1", "1"],
            ["2", "0"],
            ["2", "1"],
        ]
        finished.hmmseg("verify", "results/lambda/selection")
        assert not list(finished.folder.glob("results/lambda/grid/*"))
    finally:
        config.write_text(before)
        shutil.rmtree(finished.folder / "results/lambda/selection", ignore_errors=True)
