"""The workflow on Slurm gives what it gives on one machine, whatever happens to its jobs.

Things happen to a job while its process is halted from outside, so that they never come too late.
"""

import os
import re
import signal
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path

import pytest

from tests.workflow.cluster.processes import Payload, alive, payload, wait_until
from tests.workflow.cluster.slurm import NODES, Slurm
from tests.workflow.conftest import DATA, ROWS
from tests.workflow.running import ROOT, Project
from tests.workflow.test_calibrate import drawn

pytestmark = [pytest.mark.slurm, pytest.mark.xdist_group("workflow")]

PROFILES = ("slurm", "slurm-generic")
# A test does not wait as long between two looks at the queue as a user's run does.
QUICKLY = {
    "slurm": "--slurm-init-seconds-before-status-checks=1",
    "slurm-generic": "--seconds-between-status-checks=1",
}
LAMBDA = next(row for row in ROWS if row["assembly"] == "lambda")


def on(slurm: Slurm, profile: str, folder: Path, **config: int) -> Project:
    """Return a project that runs on the cluster, with one small genome in it."""
    project = Project(folder, profile, slurm.environment)
    project.add(DATA / LAMBDA["fasta"])
    project.configure([LAMBDA], **config)
    return project


def files(folder: Path) -> dict[str, bytes]:
    """Return all results in a folder.

    Logs and benchmarks, which tell times, are none, nor is what a killed job had begun to write
    beside its result, under a hidden name.
    """
    found = {path.relative_to(folder): path for path in folder.rglob("*") if path.is_file()}
    return {
        str(name): path.read_bytes()
        for name, path in found.items()
        if name.parts[0] not in ("logs", "benchmarks")
        and not any(part.startswith(".partial-") for part in name.parts)
    }


def assert_same(project: Project, finished: Project, part: str = "") -> None:
    """Check that results have the same bytes as those of the run on this machine."""
    found, expected = (files(one.folder / "results" / part) for one in (project, finished))
    assert found.keys() == expected.keys()
    assert [name for name in expected if found[name] != expected[name]] == []


def jobs(slurm: Slurm, project: Project) -> list[dict[str, str]]:
    """Return what Slurm's controller knows of the jobs of a project."""
    return [job for job in slurm.jobs() if job["WorkDir"] == str(project.folder)]


@pytest.mark.parametrize("profile", PROFILES)
def test_results_are_those_of_one_machine(
    profile: str, slurm: Slurm, finished: Project, tmp_path: Path
) -> None:
    project = Project(tmp_path, profile, slurm.environment)
    for file in finished.folder.iterdir():
        if file.is_file():
            project.add(file)
    said = project.snakemake("--jobs=6", QUICKLY[profile])
    assert_same(project, finished)
    assert "restart" not in said
    # Slurm did every job but `all`, on each of its nodes.
    steps = re.findall(r"(\d+) of \1 steps \(100%\) done", said)
    ours = jobs(slurm, project)
    assert [str(len(ours) + 1)] == steps
    assert {job["JobState"] for job in ours} == {"COMPLETED"}
    assert {job["NodeList"] for job in ours} == set(NODES)


@pytest.mark.slow
def test_evidence_is_that_of_one_machine(slurm: Slurm, tmp_path: Path) -> None:
    """Selection cells, null replicates and comparison folds are jobs of Slurm, too."""
    projects = []
    for profile in ("default", *PROFILES):
        (tmp_path / profile).mkdir()
        project = replace(drawn(tmp_path / profile), profile=profile, variables=slurm.environment)
        project.add(ROOT / "demo_data" / "model.json")
        asked = {"calibrate": "run", "null_bases": "120000", "compare": "run"}
        project.configure(
            [{"assembly": "large", "fasta": "a.fa", "model": "model.json", **asked}],
            batch_bases=30_000, select_states=[1, 2], select_orders=[0],
        )  # fmt: skip
        project.snakemake(*(("--jobs=6", QUICKLY[profile]) if profile in PROFILES else ()))
        projects.append(project)
    for project in projects[1:]:
        assert_same(project, projects[0])
        assert {job["JobState"] for job in jobs(slurm, project)} == {"COMPLETED"}
        logs = {path.name for path in (project.folder / "results/logs").iterdir()}
        assert {"select", "recommend", "nulls", "replicate", "fold", "compare"} <= logs


@contextmanager
def running(project: Project) -> Iterator[list[str]]:
    """Run the workflow to its end while things happen to it; the list then holds its messages."""
    process = project.start("--jobs=6", QUICKLY[project.profile])
    said: list[str] = []
    try:
        yield said
        text, _ = process.communicate(timeout=600)
        said.append(text)
        assert process.returncode == 0, text
    finally:
        process.kill()
        process.communicate()


def kill(slurm: Slurm, work: Payload) -> None:
    """End the process as the kernel does that runs out of memory."""
    os.kill(work.pid, signal.SIGKILL)


def cancel(slurm: Slurm, work: Payload) -> None:
    """Cancel the job, as its owner or an administrator does."""
    slurm.run("scancel", work.job)


def take_down(slurm: Slurm, work: Payload) -> None:
    """Take the node out of service, and back into it when it has let go of the job."""
    slurm.run("scontrol", "update", f"nodename={work.node}", "state=down", "reason=test")
    wait_until(lambda: not alive(work.pid), 30, f"{work.job} is not ended")
    slurm.resume_node(work.node)


def crash(slurm: Slurm, work: Payload) -> None:
    """Let the node vanish, and come back when the controller has missed it."""
    slurm.crash_node(work.node)
    wait_until(lambda: slurm.node_state(work.node) == "down", 90, f"{work.node} is not missed")
    slurm.start_node(work.node)


def test_faults_in_one_run(slurm: Slurm, finished: Project, tmp_path: Path) -> None:
    project = on(slurm, "slurm-generic", tmp_path)
    with running(project) as said:
        training = payload(tmp_path, "train")
        kill(slurm, training)
        calling = payload(tmp_path, "decode")
        cancel(slurm, calling)
        summing = payload(tmp_path, "summary")
        take_down(slurm, summing)
    assert_same(project, finished, "lambda")
    state = {job["JobId"]: job["JobState"] for job in jobs(slurm, project)}
    assert state[training.job] == "FAILED"
    assert state[calling.job] == "CANCELLED"
    assert said[0].count("Trying to restart") >= 2


@pytest.mark.slow
@pytest.mark.parametrize("profile", PROFILES)
@pytest.mark.parametrize("fault", [kill, cancel, take_down, crash])
def test_after_a_fault_results_are_the_same(
    fault: Callable[[Slurm, Payload], None],
    profile: str,
    slurm: Slurm,
    finished: Project,
    tmp_path: Path,
) -> None:
    project = on(slurm, profile, tmp_path)
    with running(project):
        fault(slurm, payload(tmp_path, "train"))
    assert_same(project, finished, "lambda")


@pytest.mark.slow
@pytest.mark.parametrize("profile", PROFILES)
def test_a_job_over_its_memory_gets_more(
    profile: str, slurm: Slurm, finished: Project, tmp_path: Path
) -> None:
    # Snakemake's wrapper holds some 130 MB, the training some 180: too much at first, not then.
    project = on(slurm, profile, tmp_path, mem_mb=240)
    with running(project):
        first = payload(tmp_path, "train")
        first.grow(150)
        second = payload(tmp_path, "train", but=first.job)
        second.go_on()
    assert_same(project, finished, "lambda")
    asked = {job["JobId"]: job["MinMemoryNode"] for job in jobs(slurm, project)}
    ended = {job["JobId"]: job["JobState"] for job in jobs(slurm, project)}
    assert (asked[first.job], asked[second.job]) == ("241M", "482M")
    assert ended[first.job] in ("OUT_OF_MEMORY", "FAILED", "CANCELLED")
    assert ended[second.job] == "COMPLETED"


@pytest.mark.slow
@pytest.mark.parametrize("profile", PROFILES)
def test_a_job_over_its_time_gets_more(
    profile: str, slurm: Slurm, finished: Project, tmp_path: Path
) -> None:
    project = on(slurm, profile, tmp_path, runtime=1)
    with running(project):
        first = payload(tmp_path, "summary")
        second = payload(tmp_path, "summary", but=first.job, seconds=180)
        second.go_on()
    assert_same(project, finished, "lambda")
    asked = {job["JobId"]: job["TimeLimit"] for job in jobs(slurm, project)}
    ended = {job["JobId"]: job["JobState"] for job in jobs(slurm, project)}
    assert (asked[first.job], asked[second.job]) == ("00:01:00", "00:02:00")
    assert (ended[first.job], ended[second.job]) == ("TIMEOUT", "COMPLETED")


@pytest.mark.slow
@pytest.mark.parametrize("profile", PROFILES)
def test_a_dead_run_is_resumed_as_the_readme_says(
    profile: str, slurm: Slurm, finished: Project, tmp_path: Path
) -> None:
    stop = "sh workflow/profiles/stop.sh"
    resume = ".venv/bin/snakemake --workflow-profile workflow/profiles/slurm"
    assert f"\n{stop}\n{resume} --unlock\n{resume}\n" in (ROOT / "README.md").read_text()
    project = on(slurm, profile, tmp_path)
    driver = project.start("--jobs=6", QUICKLY[profile])
    work = payload(tmp_path, "train")
    driver.kill()
    driver.communicate()
    _, script = stop.split()
    said = slurm.run("sh", str(ROOT / script), folder=tmp_path)
    assert work.job in said.split()
    wait_until(lambda: not alive(work.pid), 5, f"{work.job} is not ended")
    project.snakemake("--unlock")
    project.snakemake("--jobs=6", QUICKLY[profile])
    assert_same(project, finished, "lambda")


@pytest.mark.slow
def test_a_controller_may_be_away(slurm: Slurm, finished: Project, tmp_path: Path) -> None:
    project = on(slurm, "slurm-generic", tmp_path)
    slurm.stop_controller()
    with running(project) as said:
        # Nothing can be submitted; then a job ends while nobody can say so.
        time.sleep(30)
        slurm.start_controller()
        work = payload(tmp_path, "train")
        slurm.stop_controller()
        work.go_on()
        time.sleep(30)
        slurm.start_controller()
    assert_same(project, finished, "lambda")
    assert "restart" not in said[0]
    assert {job["JobState"] for job in jobs(slurm, project)} == {"COMPLETED"}


def test_stopping_where_nothing_runs(slurm: Slurm, tmp_path: Path) -> None:
    said = slurm.run("sh", str(ROOT / "workflow/profiles/stop.sh"), folder=tmp_path)
    assert said == f"no jobs of {tmp_path}\n"
