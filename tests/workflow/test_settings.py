"""Schemas, explanations and style of the workflow agree with one another."""

import inspect
import re
import subprocess
import sys
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import pytest
import yaml
from snakemake.scheduling.job_scheduler import JobScheduler
from snakemake.settings.types import MaxJobsPerTimespan

from tests.workflow.running import ROOT, Project


def schema(name: str) -> dict[str, Any]:
    text = (ROOT / "workflow" / "schemas" / f"{name}.schema.yaml").read_text()
    return dict(yaml.safe_load(text))


CONFIG: dict[str, Any] = schema("config")["properties"]
DEFAULTS: dict[str, Any] = CONFIG["defaults"]["properties"]
SHEET: dict[str, Any] = schema("assemblies")["properties"]["rows"]["items"]["properties"]


def test_a_column_obeys_the_same_rules_as_its_default() -> None:
    for key, rules in DEFAULTS.items():
        assert SHEET[key] == {name: rules[name] for name in rules if name != "default"}


def test_the_configuration_that_ships_states_every_default() -> None:
    shipped = yaml.safe_load((ROOT / "config" / "config.yaml").read_text())
    assert shipped.keys() == CONFIG.keys()
    assert shipped.pop("defaults") == {key: rules["default"] for key, rules in DEFAULTS.items()}
    assert shipped == {key: CONFIG[key]["default"] for key in shipped}


@pytest.mark.parametrize("key", sorted({*CONFIG, *DEFAULTS, *SHEET}))
def test_every_key_is_explained(key: str) -> None:
    text = (ROOT / "config" / "README.md").read_text()
    [row] = re.findall(rf"^\| `{key}` \|(.*)\|$", text, flags=re.MULTILINE)
    assert len(row) > 20


def test_nothing_is_explained_that_does_not_exist() -> None:
    text = (ROOT / "config" / "README.md").read_text()
    explained = set(re.findall(r"^\| `(\w+)` \|", text, flags=re.MULTILINE))
    assert explained == {*CONFIG, *DEFAULTS, *SHEET}


def test_snakefmt_has_nothing_to_change() -> None:
    call = [str(Path(sys.executable).with_name("snakefmt")), "--check", "Snakefile", "workflow"]
    done = subprocess.run(call, cwd=ROOT, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


def test_what_the_snakefile_lifts_is_still_what_makes_the_scheduler_look_again() -> None:
    # If this fails, see whether `look_only_when_a_job_ends` in common.smk is still of use.
    source = inspect.getsource(JobScheduler.schedule)
    assert "if self.job_rate_limiter is not None:" in source
    assert "self._schedule_reevalutation(self.job_rate_limiter.timespan)" in source


@pytest.mark.parametrize(
    ("asked", "lifted"), [("100/1s", True), ("100/1m", False), ("1/1s", False)]
)
def test_only_the_limit_that_nobody_asked_for_is_lifted(asked: str, lifted: bool) -> None:
    text = (ROOT / "workflow" / "rules" / "common.smk").read_text()
    [function] = re.findall(
        r"^def look_only_when_a_job_ends.*?(?=^\S)", text, re.DOTALL | re.MULTILINE
    )
    names: dict[str, Any] = {}
    exec(function, names)
    limit = MaxJobsPerTimespan.parse_choice(asked)
    workflow = SimpleNamespace(
        scheduling_settings=SimpleNamespace(max_jobs_per_timespan=limit),
        scheduler=SimpleNamespace(job_rate_limiter="there"),
    )
    names["look_only_when_a_job_ends"](workflow)
    assert workflow.scheduler.job_rate_limiter == (None if lifted else "there")


def test_the_linter_misses_only_conda_environments(tmp_path: Path) -> None:
    # The rules call the package that brought Snakemake along, see DEVELOPERS.md.
    project = Project(tmp_path)
    (tmp_path / "a.fa").write_text("")
    project.configure([{"assembly": "a", "fasta": "a.fa"}])
    call = [sys.executable, "-m", "snakemake", *project.arguments(), "--lint"]
    done = subprocess.run(call, cwd=tmp_path, capture_output=True, text=True, check=False)
    found = set(re.findall(r"^    \* (.*):$", done.stdout + done.stderr, flags=re.MULTILINE))
    assert found == {"Specify a conda environment or container for each rule."}


def test_every_rule_asks_for_memory_and_time() -> None:
    rules = ""
    for file in sorted((ROOT / "workflow" / "rules").glob("*.smk")):
        rules += file.read_text()
    parts = re.split(r"^(?:rule|checkpoint) (\w+):\n", rules, flags=re.MULTILINE)[1:]
    found = dict(zip(parts[::2], parts[1::2], strict=True))
    assert len(found) > 5
    for name, body in found.items():
        assert f'mem_mb=memory_of("{name}"),' in body, name
        assert f'runtime=minutes_of("{name}"),' in body, name


def test_larger_sequence_asks_for_more(tmp_path: Path) -> None:
    project = Project(tmp_path)
    for name, bases in (("small", 1), ("large", 30_000_000)):
        with (tmp_path / f"{name}.fa").open("wb") as handle:
            handle.truncate(bases)
    project.configure([{"assembly": name, "fasta": f"{name}.fa"} for name in ("small", "large")])
    asked: dict[tuple[str, str], tuple[int, int]] = {}
    for job in re.split(r"^rule ", project.snakemake("--dry-run"), flags=re.MULTILINE)[1:]:
        needs = {
            key: re.search(rf"\b{key}=(\w+)", job) for key in ("assembly", "mem_mb", "runtime")
        }
        if (assembly := needs["assembly"]) and (memory := needs["mem_mb"]):
            time = needs["runtime"]
            assert time is not None
            asked[job.split(":")[0], assembly[1]] = int(memory[1]), int(time[1])
    # As in workflow/rules/resources.smk, above 600 MB and 30 minutes.
    assert asked["train", "small"] == (601, 31)
    assert asked["train", "large"] == (600 + 5 * 30, 30 + 3 + 2 * 30)
    assert asked["decode", "large"] == (600 + 10 * 30, 30 + 3 + 15)


def test_what_a_row_says_of_training_reaches_the_command(tmp_path: Path) -> None:
    project = Project(tmp_path)
    for name in ("a.fa", "s.yaml", "known.bed"):
        (tmp_path / name).write_text("")
    project.configure(
        [
            {"assembly": "a", "fasta": "a.fa", "spec": "s.yaml", "fix": "x.length, start"},
            {"assembly": "b", "fasta": "a.fa", "train_labels": "known.bed", "train_bases": "0"},
        ]
    )
    said = project.snakemake("--dry-run", "--printshellcmds")
    [of_a] = re.findall(r"hmmseg train .* results/a/model.json .*", said)
    [of_b] = re.findall(r"hmmseg train .* results/b/model.json .*", said)
    assert "--spec s.yaml " in of_a
    assert "--fix=x.length --fix=start " in of_a
    assert "--train-bases 50000000 " in of_a
    assert "--states" not in of_a
    assert "--labels known.bed " in of_b
    assert "--train-bases 0 " in of_b
    assert "--states 2 " in of_b
