"""Memory and time of the commands that the workflow's rules call, by the size of the sequence.

``python -m tests.benchmarks.commands MEGABASES...`` draws one record of each size and prints a
row for each command: what ``workflow/rules/resources.smk`` asks a cluster for is made from these
figures. Two threads, as in ``config/config.yaml``; kernels must have been compiled by a run before.
Training stops after ten iterations of one start: memory does not grow with them, and time does as
one would think. Commands that fit many models are measured up to five megabases only.
"""

import json
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path

from hmmseg.evidence.amount import null_bases_of
from hmmseg.model.document import model_to_dict
from tests.benchmarks.cases import a_model

_HMMSEG = str(Path(sys.executable).with_name("hmmseg"))
_SEQUENCE = ("drawn/sequence.fa.gz", "--threads", "2")
_MODELS = {"plain": ("--states", "2"), "rich": ("--states", "4", "--order", "3")}
_SHORT = ("--restarts", "1", "--max-iterations", "10")
_MOST_FOR_MANY_FITS = 5


def _calls(size: int) -> Iterator[tuple[str, list[str]]]:
    """Return the name and the arguments of each command, in an order in which they can run."""
    yield "survey", ["survey", _SEQUENCE[0], "--output", "survey"]
    for name, model in _MODELS.items():
        yield f"train {name}", ["train", *_SEQUENCE, *model, *_SHORT, "--output", f"{name}.json"]
        document = ["--model", f"{name}.json"]
        yield f"decode {name}", ["decode", *_SEQUENCE, *document, "--output", f"{name}.calls"]
    plan = ["--model", "plain.json", "--batch-bases", "50000000", "--output", "batches"]
    yield "batches", ["batches", _SEQUENCE[0], *plan]
    yield "cut", ["cut", _SEQUENCE[0], "--batches", "batches", "--output", "pieces"]
    judged = [_SEQUENCE[0], "--model", "rich.json", "--calls", "rich.calls", "--no-null-refit"]
    yield "nulls", ["nulls", *judged, "--output", "nulls"]
    part = ["--part", "1", "--of", str(3 * null_bases_of(size * 1_000_000) // 200_000_000 + 1)]
    yield "replicate", ["replicate", "nulls", *part, *_SEQUENCE[1:], "--output", "part"]
    less = ["--null-bases", "20000000", *_SEQUENCE[1:]]
    yield "calibrate", ["calibrate", *judged, *less, "--output", "calibration"]
    if size > _MOST_FOR_MANY_FITS:
        return
    cell = ["--states", "4", "--orders", "3"]
    yield "select", ["select", *_SEQUENCE, *cell, "--output", "selection"]
    yield "fold", ["fold", *_SEQUENCE, "--fold", "1", "--output", "fold"]
    yield "compare", ["compare", *_SEQUENCE, "--output", "comparison"]


def _measured(call: list[str], folder: Path) -> tuple[float, float]:
    """Return the seconds that a command takes and the most megabytes that it holds."""
    begin = time.monotonic()
    silent = subprocess.DEVNULL
    process = subprocess.Popen([_HMMSEG, *call], cwd=folder, stdout=silent, stderr=silent)
    _, status, used = os.wait4(process.pid, 0)
    process.returncode = os.waitstatus_to_exitcode(status)
    if process.returncode:
        raise subprocess.CalledProcessError(process.returncode, call)
    return time.monotonic() - begin, used.ru_maxrss / 1024


def main(sizes: list[int]) -> None:
    """Print a table of all commands at all sizes, in megabases."""
    print("command", "Mb", "seconds", "MB", sep="\t")
    for size in sizes:
        with tempfile.TemporaryDirectory() as name:
            folder = Path(name)
            document = model_to_dict(a_model(2, 0, symmetric=True))
            (folder / "truth.json").write_text(json.dumps(document))
            length = str(size * 1_000_000)
            drawn = ["--records", "1", "--length", length, "--seed", "1", "--output", "drawn"]
            _measured(["simulate", "--model", "truth.json", *drawn], folder)
            for command, call in _calls(size):
                seconds, megabytes = _measured(call, folder)
                print(command, size, f"{seconds:.1f}", f"{megabytes:.0f}", sep="\t", flush=True)


if __name__ == "__main__":
    main([int(size) for size in sys.argv[1:]])
