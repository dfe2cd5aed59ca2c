"""A comparison has the same bytes whatever instructions the processor offers."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

from tests.evidence.drawn import drawn_contigs, write_drawn

pytestmark = pytest.mark.slow

PROCESSORS = {
    "compiler": {"NUMBA_CPU_NAME": "generic"},
    "c-library": {"GLIBC_TUNABLES": "glibc.cpu.hwcaps=-FMA,-AVX2,-FMA4"},
    "linear-algebra": {"OPENBLAS_CORETYPE": "Prescott"},
    "numpy": {"NPY_DISABLE_CPU_FEATURES": "X86_V3"},
}
QUICK = ["--folds", "3", "--replicates", "50", "--restarts", "1", "--max-order", "2"]


def compare(folder: Path, name: str, labels: list[str], settings: dict[str, str]) -> Path:
    call = [sys.executable, "-m", "hmmseg", "compare", "s.fa", *QUICK, "--max-hmm-order", "1"]
    # A cache of its own, or code compiled for another processor would be found there.
    environment = {**os.environ, **settings, "NUMBA_CACHE_DIR": str(folder / "cache" / name)}
    subprocess.run([*call, *labels, "--output", name], cwd=folder, env=environment, check=True)
    return folder / name


@pytest.mark.parametrize("processor", PROCESSORS)
@pytest.mark.parametrize("labels", [[], ["--labels", "truth.bed"]], ids=["blind", "labelled"])
def test_same_bytes(processor: str, labels: list[str], tmp_path: Path) -> None:
    write_drawn(tmp_path, drawn_contigs(1, 30_000, 500, 2_000, (0.35, 0.65), 6))
    plain = compare(tmp_path, "plain", labels, {})
    other = compare(tmp_path, processor, labels, PROCESSORS[processor])
    assert {p.name for p in plain.iterdir()} == {p.name for p in other.iterdir()}
    for path in plain.iterdir():
        assert path.read_bytes() == (other / path.name).read_bytes(), path.name
