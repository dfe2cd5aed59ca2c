"""What the workflow costs beside the computing: jobs, files, bytes and seconds, by size.

    python -m tests.benchmarks.many --assemblies 10 50 200 --bases 200000
    python -m tests.benchmarks.many --assemblies 1 2 4 --bases 100000000 --records 200

Each size is run on one core from nothing in a folder of its own, on drawn sequence. Seconds are
of the processor, of all processes together, so that they mean the same on a busy machine;
`computing` is what the same commands take in one process that has imported everything before.
"""

import argparse
import os
import resource
import sys
import tempfile
import time
from contextlib import redirect_stderr, redirect_stdout
from pathlib import Path

import numpy as np

from hmmseg.cli import main as hmmseg
from tests.workflow.running import Project

COLUMNS = (
    "assemblies", "bases", "jobs", "graph_s", "total_s", "computing_s", "overhead_s_per_job",
    "wall_s", "files", "megabytes", "largest_job_mb",
)  # fmt: skip
MODEL = Path(__file__).resolve().parents[2] / "demo_data" / "model.json"
ISLAND = 1_000


def draw(path: Path, bases: int, records: int, seed: int) -> None:
    """Write an assembly in which stretches of two compositions take turns."""
    random = np.random.default_rng(seed)
    with path.open("wb") as file:
        for number in range(records):
            length = bases // records
            rich = np.repeat(random.random(length // ISLAND + 1) < 0.1, ISLAND)[:length]
            strong = random.random(length) < np.where(rich, 0.65, 0.4)
            first, second = random.random((2, length)) < 0.5
            codes = np.where(strong, np.where(first, 67, 71), np.where(second, 65, 84))
            file.write(f">r{number}\n".encode() + codes.astype(np.uint8).tobytes() + b"\n")


def children() -> float:
    """Processor seconds of all processes started so far that have ended."""
    used = resource.getrusage(resource.RUSAGE_CHILDREN)
    return used.ru_utime + used.ru_stime


def computing(project: Project, names: list[str], frozen: bool) -> float:
    """Processor seconds of the commands themselves for one assembly, the mean of some."""
    spent = []
    with open(os.devnull, "w") as nowhere, redirect_stdout(nowhere), redirect_stderr(nowhere):
        for number, name in enumerate(names):
            fasta = str(project.folder / f"{name}.fa")
            out = str(project.folder / "warm" / f"{name}-{number}")
            begin = time.process_time()
            assert hmmseg(["survey", fasta, "--output", f"{out}/survey"]) == 0
            model = str(MODEL)
            if not frozen:
                model = f"{out}/model.json"
                assert hmmseg(["train", fasta, "--threads", "1", "--output", model]) == 0
            else:
                assert hmmseg(["adopt", model, "--output", f"{out}/model.json"]) == 0
            calls = ["--threads", "1", "--output", f"{out}/calls"]
            assert hmmseg(["decode", fasta, "--model", model, *calls]) == 0
            page = ["--output", f"{out}/report.html", "--figures", f"{out}/figures"]
            assert hmmseg(["report", out, *page]) == 0
            spent.append(time.process_time() - begin)
    # The first has waited for imports and compiled code.
    return float(np.mean(spent[1:]))


def measure(assemblies: int, bases: int, records: int, batch_bases: int, frozen: bool) -> None:
    """Run one size, and print its row."""
    with tempfile.TemporaryDirectory() as folder:
        project = Project(Path(folder))
        names = [f"a{number:04d}" for number in range(assemblies)]
        for seed, name in enumerate(names):
            draw(project.folder / f"{name}.fa", bases, records, seed)
        rows = [{"assembly": name, "fasta": f"{name}.fa"} for name in names]
        if frozen:
            rows = [{**row, "model": str(MODEL)} for row in rows]
        project.configure(rows, threads=1, batch_bases=batch_bases)
        begin = children()
        project.snakemake("--dry-run", "--quiet")
        graph = children() - begin
        begin, clock = children(), time.monotonic()
        said = project.snakemake("--cores=1")
        total, wall = children() - begin, time.monotonic() - clock
        jobs = said.count("Finished jobid:") - 1
        sample = (names[:1] + names[:4]) if bases <= 10_000_000 else names[:1] * 2
        own = assemblies * computing(project, sample, frozen)
        files = [p for p in (project.folder / "results").rglob("*") if p.is_file()]
        peaks = [
            float(p.read_text().splitlines()[1].split("\t")[2])
            for p in (project.folder / "results" / "benchmarks").rglob("*.tsv")
            if p.read_text().splitlines()[1].split("\t")[2] not in ("NA", "-")
        ]
        cells = (
            assemblies, bases, jobs, f"{graph:.1f}", f"{total:.1f}", f"{own:.1f}",
            f"{(total - own) / jobs:.2f}", f"{wall:.1f}", len(files),
            f"{sum(p.stat().st_size for p in files) / 1e6:.1f}", f"{max(peaks, default=0):.0f}",
        )  # fmt: skip
        print("\t".join(map(str, cells)), flush=True)


def main() -> None:
    """Measure the sizes that were asked for."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--assemblies", type=int, nargs="+", default=[10, 50, 200])
    parser.add_argument("--bases", type=int, default=200_000)
    parser.add_argument("--records", type=int, default=4)
    parser.add_argument("--batch-bases", type=int, default=50_000_000)
    parser.add_argument("--frozen", action="store_true", help="use one model for all")
    given = parser.parse_args()
    print("\t".join(COLUMNS), flush=True)
    for assemblies in given.assemblies:
        measure(assemblies, given.bases, given.records, given.batch_bases, given.frozen)


if __name__ == "__main__":
    sys.exit(main())
