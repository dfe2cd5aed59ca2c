"""The cache of compiled kernels: where it may not be written, and where processes share it."""

import os
import shutil
import stat
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]

SCRIPT = """
import sys
sys.path.insert(0, sys.argv[1])
import numpy as np
import hmmseg.kernels.elementary as elementary
from hmmseg.kernels.tokens import base_codes
assert elementary.__file__.startswith(sys.argv[1]), elementary.__file__
codes = np.empty(4, np.uint16)
base_codes(np.array([0, 1, 2, 3], np.uint8), 1, False, 0, 4, codes)
print(codes.tolist(), elementary.log(8.0).hex())
"""


def _start(package: Path, environment: dict[str, str]) -> "subprocess.Popen[str]":
    kept = {
        k: v
        for k, v in os.environ.items()
        if k not in ("HOME", "NUMBA_CACHE_DIR", "XDG_CACHE_HOME")
    }
    return subprocess.Popen(
        [sys.executable, "-P", "-c", SCRIPT, str(package)],
        env=kept | environment,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )


def _finish(process: "subprocess.Popen[str]") -> str:
    out, err = process.communicate(timeout=300)
    assert process.returncode == 0, err
    return out


@pytest.fixture
def package(tmp_path: Path) -> Path:
    """Return a folder with a copy of the package that holds no compiled kernel."""
    folder = tmp_path / "site"
    shutil.copytree(
        ROOT / "hmmseg", folder / "hmmseg", ignore=shutil.ignore_patterns("__pycache__")
    )
    return folder


def _kernels_in(folder: Path) -> list[Path]:
    return sorted(folder.rglob("*.nbi"))


def test_cache_beside_the_package(package: Path, tmp_path: Path) -> None:
    """Where it can be written, the package's own folder keeps the kernels."""
    _finish(_start(package, {"HOME": str(tmp_path / "home")}))
    assert _kernels_in(package)


@pytest.mark.parametrize("home", ["writable", "read-only", "none"])
def test_read_only_package(package: Path, tmp_path: Path, home: str) -> None:
    """Kernels go to the user's cache, or to none, and work all the same."""
    if os.geteuid() == 0:
        # To root no folder is read-only, so one stands where it cannot be: a file in its place.
        for folder in {path.parent for path in (package / "hmmseg").rglob("*.py")}:
            (folder / "__pycache__").write_text("")
    for path in [package, *package.rglob("*")]:
        path.chmod(path.stat().st_mode & ~(stat.S_IWUSR | stat.S_IWGRP | stat.S_IWOTH))
    user = tmp_path / "home"
    environment = {}
    if home != "none":
        user.mkdir()
        environment = {"HOME": str(user)}
    if home == "read-only":
        (user / ".cache").write_text("")
    out = _finish(_start(package, environment))
    assert out == _expected()
    assert not _kernels_in(package)
    if home == "writable":
        assert _kernels_in(user)
    for path in [package, *package.rglob("*")]:
        path.chmod(path.stat().st_mode | stat.S_IWUSR)


def _expected() -> str:
    return "[0, 5, 10, 15] 0x1.0a2b23f3bab73p+1\n"


def test_processes_share_a_cache(package: Path, tmp_path: Path) -> None:
    """Processes that start at once and fill one folder do not break one another."""
    environment = {"HOME": str(tmp_path), "NUMBA_CACHE_DIR": str(tmp_path / "shared")}
    for _ in range(2):
        started = [_start(package, environment) for _ in range(3)]
        assert {_finish(process) for process in started} == {_expected()}
    assert _kernels_in(tmp_path / "shared")
