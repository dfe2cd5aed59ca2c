"""What the page of a large assembly costs: to make, to keep, to open."""

import resource
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path

from tests.report.large import large_folder

__all__ = ["opened", "pages"]

_MEGA = 1_000_000


def pages() -> Iterator[str]:
    """Page of 100 Mb in 12,000 records with 60,000 regions: its making, size and opening."""
    with tempfile.TemporaryDirectory() as top:
        folder = large_folder(Path(top) / "large")
        page = Path(top) / "large.html"
        begin = time.perf_counter()
        call = [sys.executable, "-m", "hmmseg", "report", str(folder), "--output", str(page)]
        subprocess.run(call, check=True, capture_output=True)
        wall = time.perf_counter() - begin
        used = resource.getrusage(resource.RUSAGE_CHILDREN)
        yield (
            f"made in {wall:.1f} s ({used.ru_utime + used.ru_stime:.1f} s of processor time), "
            f"{used.ru_maxrss / 1024:.0f} MB at most"
        )
        yield f"{page.stat().st_size / _MEGA:.2f} MB"
        yield opened(page)


def opened(page: Path) -> str:
    """Return after how long a page can be used in Chromium, and a filter answers."""
    found = shutil.which("chromium")
    if found is None:
        return "no chromium, so its opening is not measured"
    from playwright.sync_api import sync_playwright  # noqa: PLC0415 - only where there is one

    with sync_playwright() as driver:
        browser = driver.chromium.launch(
            executable_path=found, args=["--headless", "--no-sandbox", "--disable-gpu"]
        )
        view = browser.new_page(viewport={"width": 1280, "height": 900})
        begin = time.perf_counter()
        view.goto(page.as_uri(), wait_until="commit")
        view.wait_for_selector("#panels[data-ready=yes]")
        ready = time.perf_counter() - begin
        begin = time.perf_counter()
        view.fill("#filter-text", "island_5999")
        view.wait_for_function("document.getElementById('shown').textContent.startsWith('11 of')")
        filtered = time.perf_counter() - begin
        begin = time.perf_counter()
        view.click("#table .row")
        view.wait_for_selector("#table .row.chosen")
        moved = time.perf_counter() - begin
        browser.close()
    return (
        f"interactive after {ready:.2f} s; a filter takes {filtered:.2f} s, a click {moved:.2f} s"
    )
