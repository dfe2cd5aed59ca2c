"""The same bytes on any number of threads, on any processor, with any C library."""

import functools
import os
import subprocess
import sys
from pathlib import Path

import pytest

from tests.kernels.fingerprint import LONGEST, fingerprint

ROOT = Path(__file__).resolve().parents[2]

ENVIRONMENTS = {
    # The compiler may use no instruction that not every x86-64 processor has.
    "plainest processor": {"NUMBA_CPU_NAME": "generic"},
    # The C library picks other versions of log and exp.
    "C library without FMA": {"GLIBC_TUNABLES": "glibc.cpu.hwcaps=-FMA,-AVX2,-FMA4"},
    # BLAS takes kernels of another size, in which sums go in another order.
    "BLAS of an old processor": {"OPENBLAS_CORETYPE": "Prescott"},
    # NumPy takes its plain loops.
    "NumPy without AVX2": {"NPY_DISABLE_CPU_FEATURES": "X86_V3"},
}


@functools.cache
def _here() -> list[str]:
    return fingerprint(1)


def test_fingerprint_shows_a_change_of_one_bit() -> None:
    """The comparison below would mean nothing if lines were empty or few."""
    lines = _here()
    assert len(lines) == len(set(lines)) > 40
    assert all(len(line.split(": ")[1]) >= 16 for line in lines)


def test_threads() -> None:
    """Two threads give what one gives."""
    assert fingerprint(2) == _here()


def _run(threads: int, changes: dict[str, str], longest: int = LONGEST) -> list[str]:
    done = subprocess.run(
        [sys.executable, "-m", "tests.kernels.fingerprint", str(threads), str(longest)],
        cwd=ROOT,
        env=os.environ | changes,
        capture_output=True,
        text=True,
        check=False,
    )
    if "NPY_DISABLE_CPU_FEATURES" in changes and "not supported" in done.stderr:
        pytest.skip("this NumPy or processor has no such feature to switch off")
    assert done.returncode == 0, done.stderr
    return done.stdout.splitlines()


@pytest.mark.parametrize("name", ENVIRONMENTS)
def test_environments(name: str) -> None:
    """A process in another environment gives what this one gives."""
    assert _run(2, ENVIRONMENTS[name]) == _here()


def test_plain_functions() -> None:
    """Without the compiler, the functions in NumPy give what the instructions give.

    NumPy warns of overflow where scores that stand for impossible are added; compiled code is
    silent.
    """
    changes = {"NUMBA_DISABLE_JIT": "1", "PYTHONWARNINGS": "ignore"}
    assert _run(1, changes, longest=500) == fingerprint(1, longest=500)
