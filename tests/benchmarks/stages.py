"""Processor seconds and bytes of each stage of the workflow for one assembly, by its size.

    python -m tests.benchmarks.stages --megabases 16 64 256

Each command runs in one process that has loaded everything before, on one thread, on drawn
sequence in records of 100 kb, cut into two to four batches.
"""

import argparse
import os
import shutil
import tempfile
import time
from contextlib import redirect_stderr, redirect_stdout
from pathlib import Path

from hmmseg.cli import main as hmmseg
from tests.benchmarks.many import MODEL, draw

RECORD = 100_000
COLUMNS = ("megabases", "stage", "runs", "seconds", "files", "megabytes")


def size(path: Path) -> tuple[int, float]:
    """Files in a folder, and their megabytes; of one file likewise."""
    files = [p for p in path.rglob("*") if p.is_file()] if path.is_dir() else [path]
    return len(files), sum(p.stat().st_size for p in files) / 1e6


def timed(commands: list[list[str]]) -> float:
    """Run commands in this process; return their processor seconds."""
    begin = time.process_time()
    with open(os.devnull, "w") as nowhere, redirect_stdout(nowhere), redirect_stderr(nowhere):
        for command in commands:
            assert hmmseg(command) == 0, command
    return time.process_time() - begin


def measure(megabases: int, show: bool = True) -> None:
    """Run all stages, and print a row for each."""
    root = Path(tempfile.mkdtemp())
    fasta, bases = str(root / "a.fa"), megabases * 1_000_000
    draw(Path(fasta), bases, bases // RECORD, 1)
    result, pieces, parts = root / "result", root / "pieces", root / "parts"
    model, calls = str(result / "model.json"), str(result / "calls")
    one = ["--threads", "1"]

    def told(stage: str, commands: list[list[str]], output: Path) -> None:
        cells = (megabases, stage, len(commands), timed(commands), *size(output))
        if show:
            print("{}\t{}\t{}\t{:.2f}\t{}\t{:.2f}".format(*cells), flush=True)

    told("sequence", [], Path(fasta))
    told("survey", [["survey", fasta, "--output", f"{result}/survey"]], result / "survey")
    told("train", [["train", fasta, "--output", model, *one]], Path(model))
    shutil.copy(MODEL, model)
    size_of = ["--batch-bases", str(bases // 2), "--parts", str(parts)]
    told(
        "batches",
        [["batches", fasta, "--model", model, *size_of, "--output", f"{result}/batches"]],
        result / "batches",
    )
    plan = ["--batches", f"{result}/batches"]
    told("cut", [["cut", fasta, *plan, "--output", str(pieces)]], pieces)
    keys = sorted(path.stem for path in pieces.glob("*.fa"))
    told(
        "decode_batch",
        [
            ["decode", f"{pieces}/{key}.fa", "--exclude", f"{pieces}/{key}.bed", "--reuse", *one,
             "--model", model, "--output", f"{parts}/{key}"]
            for key in keys
        ],
        parts,
    )  # fmt: skip
    together = ["gather", f"{result}/batches", "--parts", str(parts), "--output", calls, *one]
    told("gather", [together], Path(calls))
    page = result / "report.html"
    told("report", [["report", str(result), "--output", str(page)]], page)
    shutil.rmtree(root)


def main() -> None:
    """Measure the sizes that were asked for."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--megabases", type=int, nargs="+", default=[16, 64, 256])
    given = parser.parse_args()
    measure(1, show=False)
    print("\t".join(COLUMNS), flush=True)
    for megabases in given.megabases:
        measure(megabases)


if __name__ == "__main__":
    main()
