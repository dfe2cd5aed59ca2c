"""Peak memory of one job, measured in a process of its own.

``python -m tests.benchmarks.memory WHAT ORDER BASES`` does the job and prints the most megabytes
that the process ever held.
"""

import re
import resource
import subprocess
import sys
from pathlib import Path

from hmmseg.inference.expectation import expect
from hmmseg.inference.path import best_runs
from hmmseg.inference.posterior import posterior_windows
from hmmseg.inference.streams import Corpus
from tests.benchmarks.cases import a_model, contigs

__all__ = ["peak_megabytes"]


def peak_megabytes(what: str, order: int, bases: int) -> float:
    """Return the peak resident memory of a job in megabytes.

    Parameters
    ----------
    what
        ``"expect"``, ``"posterior"`` or ``"path"``; both strands from order 1 on.
    order
        Context length.
    bases
        Length of the record.
    """
    command = [sys.executable, "-m", "tests.benchmarks.memory", what, str(order), str(bases)]
    done = subprocess.run(command, check=True, capture_output=True, text=True)
    return float(done.stdout)


def _work(what: str, order: int, bases: int) -> None:
    model = a_model(2, order, symmetric=True)
    pieces = contigs([bases])
    if what == "expect":
        corpus = Corpus(pieces, order, model.both_strands)
        for _ in range(2):
            expect(model, corpus, 2)
    elif what == "posterior":
        for _ in posterior_windows(model, pieces[0], 2):
            pass
    else:
        best_runs(model, pieces[0], 2)


def _peak() -> float:
    """Return this process's peak in megabytes; where the system tells, without its parent's."""
    status = Path("/proc/self/status")
    if status.exists():
        found = re.search(r"VmHWM:\s+(\d+) kB", status.read_text())
        if found:
            return int(found[1]) / 1024
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024


if __name__ == "__main__":
    _work(sys.argv[1], int(sys.argv[2]), int(sys.argv[3]))
    print(_peak())
