"""Snakemake in a process of its own, as a user runs it."""

import json
import os
import re
import shutil
import subprocess
import sys
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import yaml

__all__ = ["ROOT", "Project", "bed_bases", "dry_runs"]

ROOT = Path(__file__).resolve().parents[2]
_PROFILES = ROOT / "workflow" / "profiles"


def _environment() -> dict[str, str]:
    """Environment without what another Snakemake or pytest run around this one has set."""
    kept = (
        "PATH",
        "PYTHONPATH",
        "HOME",
        "LANG",
        "LC_ALL",
        "TMPDIR",
        "XDG_CACHE_HOME",
        "NUMBA_CACHE_DIR",
    )
    return {name: os.environ[name] for name in kept if name in os.environ}


@dataclass(frozen=True)
class Project:
    """A folder with a configuration, a sample sheet and the sequence that it names.

    Snakemake runs there under a profile, with variables of the environment beside the usual ones.
    """

    folder: Path
    profile: str = "default"
    variables: Mapping[str, str] = field(default_factory=dict)

    def add(self, *files: Path) -> None:
        """Copy files into the folder."""
        for file in files:
            shutil.copy(file, self.folder)

    def configure(self, rows: Sequence[Mapping[str, str]], **config: Any) -> None:
        """Write the sample sheet and the configuration."""
        columns = list(dict.fromkeys(column for row in rows for column in row))
        lines = [columns, *([row.get(column, "") for column in columns] for row in rows)]
        sheet = "".join("\t".join(line) + "\n" for line in lines)
        (self.folder / "sheet.tsv").write_text(sheet)
        text = yaml.safe_dump({"assemblies": "sheet.tsv", **config})
        (self.folder / "config.yaml").write_text(text)

    def arguments(self) -> list[str]:
        """Arguments of Snakemake that every run shares."""
        return [
            f"--snakefile={ROOT / 'Snakefile'}",
            f"--workflow-profile={_PROFILES / self.profile}",
            f"--directory={self.folder}",
            f"--configfile={self.folder / 'config.yaml'}",
            "--cores=2",
        ]

    def snakemake(self, *arguments: str) -> str:
        """Run Snakemake, and return what it printed; a failure shows all of it."""
        process = self.start(*arguments)
        said, _ = process.communicate()
        assert process.returncode == 0, said
        return said

    def start(self, *arguments: str) -> subprocess.Popen[str]:
        """Start Snakemake, and return its process, whose messages are all in its output."""
        return subprocess.Popen(
            [sys.executable, "-m", "snakemake", *self.arguments(), *arguments],
            cwd=self.folder,
            env={**_environment(), **self.variables},
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            text=True,
        )

    def planned(self) -> list[tuple[str, str]]:
        """Rule and assembly of every job that a run would do now; `all` aside."""
        text = self.snakemake("--dry-run")
        jobs = re.split(r"^(?:rule|checkpoint) ", text, flags=re.MULTILINE)[1:]
        found = []
        for job in jobs:
            rule = job.split(":", 1)[0]
            named = re.search(r"^    wildcards: assembly=([^,\s]+)", job, flags=re.MULTILINE)
            if rule != "all":
                found.append((rule, named.group(1) if named else ""))
        return sorted(found)

    def hmmseg(self, *arguments: str) -> str:
        """Run the package's own command in the folder."""
        call = [str(Path(sys.executable).with_name("hmmseg")), *arguments]
        done = subprocess.run(
            call, cwd=self.folder, env=_environment(), capture_output=True, text=True, check=False
        )
        assert done.returncode == 0, done.stderr
        return done.stdout


def dry_runs(calls: Sequence[Sequence[str]]) -> list[tuple[int, str]]:
    """Exit code and messages of many Snakemake calls, behind one slow import."""
    script = Path(__file__).with_name("many_runs.py")
    done = subprocess.run(
        [sys.executable, str(script)],
        input=json.dumps([list(call) for call in calls]),
        env=_environment(),
        capture_output=True,
        text=True,
        check=True,
    )
    parts = done.stdout.split("\0")
    messages, codes = parts[0:-1:2], parts[1::2]
    assert len(codes) == len(calls)
    return list(zip(map(int, codes), messages, strict=True))


def bed_bases(path: Path, name: str = "") -> set[tuple[str, int]]:
    """Record and position of every base in a BED file, or in its intervals of one name.

    The name of a called region is that of its state, an underscore and a number.
    """
    found: set[tuple[str, int]] = set()
    for line in path.read_text().splitlines():
        record, start, end, *rest = line.split("\t")
        if not name or name in (rest[0], rest[0].rsplit("_", 1)[0]):
            found.update((record, position) for position in range(int(start), int(end)))
    return found
