"""A browser, and pages to open in it."""

import os
import shutil
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from hmmseg.cli import main
from tests.report.folders import calibrate, called, small_assembly


def _chromium() -> str | None:
    names = ("chromium", "chromium-browser", "google-chrome")
    return os.environ.get("CHROMIUM") or next(filter(None, map(shutil.which, names)), None)


@pytest.fixture(scope="session")
def browser() -> Iterator[Any]:
    """Chromium without a window; Debian's package of that name is enough."""
    found = _chromium()
    if found is None:
        pytest.skip("no chromium in PATH (Debian: apt-get install chromium)")
    playwright = pytest.importorskip("playwright.sync_api")
    with playwright.sync_playwright() as driver:
        opened = driver.chromium.launch(
            executable_path=found,
            args=["--headless", "--no-sandbox", "--disable-gpu", "--disable-background-networking"],
        )
        yield opened
        opened.close()


@pytest.fixture(scope="session")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Results of an assembly whose records have names that nobody should have given them."""
    top = tmp_path_factory.mktemp("report")
    fasta = small_assembly(top / "assembly.fa")
    found = called(top / "small", fasta)
    calibrate(found)
    return found


@pytest.fixture(scope="session")
def page_file(folder: Path) -> Path:
    """Page of those results."""
    output = folder.parent / "report.html"
    assert main(["report", str(folder), "--output", str(output)]) == 0
    return output
