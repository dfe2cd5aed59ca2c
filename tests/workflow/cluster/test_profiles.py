"""What the profiles say, and what the programs beside them answer, without a cluster."""

import os
import subprocess
from pathlib import Path
from typing import Any

import pytest
import yaml

from tests.workflow.running import ROOT

PROFILES = ROOT / "workflow" / "profiles"
ON_A_CLUSTER = ("slurm", "slurm-generic")


def profile(name: str) -> dict[str, Any]:
    return dict(yaml.safe_load((PROFILES / name / "config.yaml").read_text()))


@pytest.mark.parametrize("name", ON_A_CLUSTER)
def test_a_cluster_changes_where_jobs_run_and_nothing_else(name: str) -> None:
    default = profile("default")
    del default["cores"]
    assert {key: profile(name).get(key) for key in default} == default


@pytest.mark.parametrize("name", ON_A_CLUSTER)
def test_failed_jobs_are_done_again(name: str) -> None:
    assert profile(name)["retries"] >= 2


# States of a job as the manual page squeue(1) lists them, section JOB STATE CODES.
FINISHED = ("COMPLETED",)
FAILED = (
    "BOOT_FAIL",
    "CANCELLED",
    "DEADLINE",
    "FAILED",
    "NODE_FAIL",
    "OUT_OF_MEMORY",
    "PREEMPTED",
    "REVOKED",
    "TIMEOUT",
)
GOING_ON = (
    "COMPLETING",
    "CONFIGURING",
    "PENDING",
    "REQUEUED",
    "REQUEUE_FED",
    "REQUEUE_HOLD",
    "RESIZING",
    "RESV_DEL_HOLD",
    "RUNNING",
    "SIGNALING",
    "SPECIAL_EXIT",
    "STAGE_OUT",
    "STOPPED",
    "SUSPENDED",
)
# Complaints of squeue 22.05.
OUTAGES = (
    "slurm_load_jobs error: Unable to contact slurm controller (connect failure)",
    "slurm_load_jobs error: Socket timed out on send/recv operation",
    "slurm_load_jobs error: Zero Bytes were transmitted or received",
)
UNKNOWN = "slurm_load_jobs error: Invalid job id specified"


def status(folder: Path, script: str) -> str:
    """Return what the status program answers if squeue is a given script."""
    squeue = folder / "squeue"
    squeue.write_text(f"#!/bin/sh\n{script}\n")
    squeue.chmod(0o755)
    return subprocess.run(
        [str(PROFILES / "slurm-generic" / "status.sh"), "17"],
        env={"PATH": f"{folder}{os.pathsep}{os.defpath}"},
        capture_output=True,
        text=True,
        check=True,
    ).stdout


@pytest.mark.parametrize(
    ("states", "answer"), [(FINISHED, "success"), (FAILED, "failed"), (GOING_ON, "running")]
)
def test_every_state_of_a_job_has_its_answer(
    states: tuple[str, ...], answer: str, tmp_path: Path
) -> None:
    assert {status(tmp_path, f"echo {state}") for state in states} == {f"{answer}\n"}


@pytest.mark.parametrize("complaint", OUTAGES)
def test_no_answer_means_that_the_job_goes_on(complaint: str, tmp_path: Path) -> None:
    assert status(tmp_path, f"echo '{complaint}' >&2; exit 1") == "running\n"


def test_a_job_that_nobody_knows_is_done_again(tmp_path: Path) -> None:
    assert status(tmp_path, f"echo '{UNKNOWN}' >&2; exit 1") == "failed\n"
    assert status(tmp_path, "exit 0") == "failed\n"


def test_it_asks_for_the_job_in_whatever_state(tmp_path: Path) -> None:
    asked = 'case "$*" in *--states=all*--jobs=17*) echo COMPLETED;; *) echo RUNNING;; esac'
    assert status(tmp_path, asked) == "success\n"
