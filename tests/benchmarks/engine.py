"""What Snakemake itself costs for so many assemblies: the workflow, with commands that do nothing.

    python -m tests.benchmarks.engine --assemblies 50 100 200 --batches 0
    python -m tests.benchmarks.engine --assemblies 50 100 200 --batches 2

With batches every assembly is cut by a checkpoint, without it is decoded by one job. Seconds are
of the processor; the commands are a shell script that makes what each would, in a few
milliseconds, beside a Python that the workflow takes for its own.
"""

import argparse
import os
import resource
import subprocess
import sys
import sysconfig
import tempfile
from pathlib import Path

from tests.workflow.running import ROOT, Project

COLUMNS = ("assemblies", "batches", "jobs", "graph_s", "run_s", "run_ms_per_job", "peak_mb")
COMMAND = """#!/bin/bash
# Makes the output of a command of the package, without its content.
command=$1; batches=__BATCHES__
while [ $# -gt 0 ]; do
    case $1 in --output) output=$2 ;; --figures) mkdir -p "$2" ;; esac
    shift
done
case $command in
    report) : > "$output"; : > "${output%.html}.provenance.json" ;;
    adopt) printf '{}' > "$output"; printf '{}' > "${output%.json}.provenance.json" ;;
    summary) : > "$output" ;;
    batches)
        mkdir -p "$output"
        { printf 'batch\\trecords\\tbases\\treused\\n'
          for ((i = 0; i < batches; i++)); do
              key=$(printf '%s-%s' "$output" $i | md5sum | cut -c 1-32)
              printf '%s\\t1\\t1\\tno\\n' "$key"
          done; } > "$output/batches.tsv" ;;
    *) mkdir -p "$output" ;;
esac
"""


def environment(folder: Path, batches: int) -> Path:
    """Make a Python with everything installed here, beside a command that does nothing."""
    subprocess.run([sys.executable, "-m", "venv", "--without-pip", folder], check=True)
    own = subprocess.run(
        [folder / "bin" / "python", "-c", "import sysconfig; print(sysconfig.get_path('purelib'))"],
        check=True, capture_output=True, text=True,
    ).stdout.strip()  # fmt: skip
    Path(own, "here.pth").write_text(f"{sysconfig.get_path('purelib')}\n{ROOT}\n")
    script = folder / "bin" / "hmmseg"
    script.write_text(COMMAND.replace("__BATCHES__", str(batches)))
    script.chmod(0o755)
    return folder / "bin" / "python"


def spent(python: Path, project: Project, *arguments: str) -> tuple[float, float]:
    """Run Snakemake; return its processor seconds and peak megabytes."""
    call = [str(python), "-m", "snakemake", *project.arguments(), "--quiet", *arguments]
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    subprocess.run(call, cwd=project.folder, env=os.environ, capture_output=True, check=True)
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    seconds = after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime
    return seconds, after.ru_maxrss / 1024


def measure(assemblies: int, batches: int) -> None:
    """Run one size, and print its row."""
    with tempfile.TemporaryDirectory() as folder:
        project = Project(Path(folder))
        python = environment(project.folder / "env", batches)
        (project.folder / "a.fa").write_text(">a\n" + "ACGT" * 100 + "\n")
        project.add(ROOT / "demo_data" / "model.json")
        rows = [
            {"assembly": f"a{number:04d}", "fasta": "a.fa", "model": "model.json"}
            for number in range(assemblies)
        ]
        project.configure(rows, threads=1, batch_bases=100 if batches else 10_000)
        graph, _ = spent(python, project, "--dry-run")
        run, peak = spent(python, project)
        jobs = len(list((project.folder / "results" / "benchmarks").rglob("*.tsv")))
        cells = (
            assemblies, batches, jobs, f"{graph:.1f}", f"{run:.1f}", f"{1000 * run / jobs:.0f}",
            f"{peak:.0f}",
        )  # fmt: skip
        print("\t".join(map(str, cells)), flush=True)


def main() -> None:
    """Measure the sizes that were asked for."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--assemblies", type=int, nargs="+", default=[50, 100, 200])
    parser.add_argument("--batches", type=int, default=2)
    given = parser.parse_args()
    print("\t".join(COLUMNS), flush=True)
    for assemblies in given.assemblies:
        measure(assemblies, given.batches)


if __name__ == "__main__":
    main()
