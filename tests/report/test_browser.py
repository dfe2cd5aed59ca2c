"""The page in a browser: it works, keeps to itself, and takes names for names."""

from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from tests.report.folders import HOSTILE

SECTIONS = [
    "What was found",
    "Where",
    "How sure",
    "Why this model",
    "The model",
    "Methods",
]


class Watched:
    """A page that is open, and everything that it complained of or asked for."""

    def __init__(self, browser: Any, file: Path, width: int = 1280) -> None:
        self.page = browser.new_page(viewport={"width": width, "height": 900})
        self.complaints: list[str] = []
        self.requests: list[str] = []
        self.page.on("pageerror", lambda error: self.complaints.append(str(error)))
        self.page.on("dialog", self._dialog)
        self.page.on("console", self._console)
        self.page.on("request", lambda request: self.requests.append(request.url))
        self.page.goto(file.as_uri())
        self.page.wait_for_selector("#panels[data-ready=yes] canvas, #panels[data-ready=yes] > *")

    def _dialog(self, dialog: Any) -> None:
        self.complaints.append(f"dialog: {dialog.message}")
        dialog.dismiss()

    def _console(self, message: Any) -> None:
        if message.type in ("error", "warning"):
            self.complaints.append(message.text)

    @property
    def view(self) -> tuple[int, int, int]:
        """Record, start and end that the map shows."""
        before = None
        for _ in range(100):
            self.page.wait_for_timeout(80)
            found = self.page.evaluate("({...document.getElementById('panels').dataset})")
            if found == before:
                return int(found["record"]), int(found["start"]), int(found["end"])
            before = found
        raise AssertionError("the map does not come to rest")

    @property
    def shown(self) -> str:
        return str(self.page.inner_text("#shown"))

    def close(self) -> None:
        """Close it; nothing may have gone wrong."""
        self.page.close()
        assert not self.complaints
        outside = [url for url in self.requests if not url.startswith(("data:", "blob:"))]
        assert len(outside) == 1, outside


@pytest.fixture(params=[1280, 420])
def opened(browser: Any, page_file: Path, request: pytest.FixtureRequest) -> Iterator[Watched]:
    watched = Watched(browser, page_file, request.param)
    yield watched
    watched.close()


@pytest.fixture
def wide(browser: Any, page_file: Path) -> Iterator[Watched]:
    watched = Watched(browser, page_file)
    yield watched
    watched.close()


def test_all_sections_are_there_in_order_each_with_a_conclusion(opened: Watched) -> None:
    page = opened.page
    assert page.locator("main h2").all_inner_texts() == SECTIONS
    conclusions = page.locator("section > .conclusion").all_inner_texts()
    assert len(conclusions) == len(SECTIONS)
    assert all(len(text) > 30 and text.endswith(".") for text in conclusions)
    # Nothing makes the page wider than the window.
    assert page.evaluate("document.documentElement.scrollWidth <= window.innerWidth")


def test_drawn_panels_have_ink(opened: Watched) -> None:
    """A canvas that is one colour shows nothing."""
    counts = opened.page.evaluate(
        """() => {
          const out = [];
          const visit = (node) => {
            for (const one of node.querySelectorAll("*")) {
              if (one.tagName === "CANVAS" && one.width > 100) {
                const [w, h] = [one.width, one.height];
                const d = one.getContext("2d").getImageData(0, 0, w, h).data;
                const seen = new Set();
                for (let i = 0; i < d.length; i += 4)
                  seen.add(d[i] + 256 * d[i + 1] + 65536 * d[i + 2]);
                out.push(seen.size);
              }
              if (one.shadowRoot) visit(one.shadowRoot);
            }
          };
          visit(document);
          return out;
        }"""
    )
    assert sum(count > 8 for count in counts) >= 3


def test_click_on_a_row_moves_the_map_there(wide: Watched) -> None:
    page = wide.page
    before = wide.view
    assert before[1] == 0
    row = page.locator("#table .row").nth(6)
    start = int(row.locator(".cell").nth(2).inner_text().replace(",", ""))
    length = int(row.locator(".cell").nth(3).inner_text().replace(",", ""))
    name = row.locator(".cell").nth(1).inner_text()
    row.click()
    record, left, right = wide.view
    assert left <= start < start + length <= right
    assert right - left < 20_000
    assert page.input_value("#record") == name
    assert page.locator("#table .row.chosen").count() == 1
    assert (record, left, right) != before


def test_filters_reduce_the_table_and_sorting_orders_it(wide: Watched) -> None:
    page = wide.page
    every = wide.shown
    page.fill("#filter-text", "plain")
    records = page.locator("#table .row .cell:nth-child(2)").all_inner_texts()
    assert set(records) == {"plain"}
    assert wide.shown != every
    page.fill("#filter-text", "")
    page.fill("#filter-length", "800")
    lengths = page.locator("#table .row .cell:nth-child(4)").all_inner_texts()
    assert lengths
    assert all(int(text.replace(",", "")) >= 800 for text in lengths)
    page.fill("#filter-length", "")
    page.fill("#filter-q", "0.05")
    assert wide.shown.startswith("8 of ")  # 0.007 apart, from 0 on
    page.fill("#filter-q", "")
    assert wide.shown == every
    page.click("#table .head button[title='Sort by length']")
    rising = [int(t.replace(",", "")) for t in
              page.locator("#table .row .cell:nth-child(4)").all_inner_texts()]  # fmt: skip
    assert rising == sorted(rising)
    page.click("#table .head button[title='Sort by length']")
    falling = [int(t.replace(",", "")) for t in
               page.locator("#table .row .cell:nth-child(4)").all_inner_texts()]  # fmt: skip
    assert falling == sorted(falling, reverse=True)
    assert falling[0] > rising[0]


def test_zoom_and_move_by_button_key_and_wheel(wide: Watched) -> None:
    page = wide.page
    _, start, end = wide.view
    page.click("#in")
    _, left, right = wide.view
    assert right - left == pytest.approx((end - start) / 2, abs=2)
    page.focus("#panels")
    page.keyboard.press("+")
    _, left, right = wide.view
    assert right - left == pytest.approx((end - start) / 4, abs=2)
    page.keyboard.press("ArrowRight")
    assert wide.view[1] > left
    page.keyboard.press("0")
    assert wide.view[1:] == (start, end)
    page.hover("#panels")
    page.keyboard.down("Control")
    page.mouse.wheel(0, -400)
    page.keyboard.up("Control")
    _, left, right = wide.view
    assert right - left < end - start
    page.keyboard.press("PageDown")
    assert wide.view[0] == 1


def test_what_lies_under_the_pointer_is_told(wide: Watched) -> None:
    """The tip of a region bar gives its name, as text, and its place."""
    page = wide.page
    page.locator("#table .row").nth(5).click()
    _, left, right = wide.view
    row = page.locator("#table .row.chosen")
    name = row.locator(".cell").nth(0).inner_text()
    start = int(row.locator(".cell").nth(2).inner_text().replace(",", ""))
    page.locator("#panels").scroll_into_view_if_needed()
    box = page.locator("#panels").bounding_box()
    inside = box["width"] - 58 - 12
    at = 58 + inside * (start - left) / (right - left) + 6
    page.mouse.move(box["x"] + at, box["y"] + 25)
    page.mouse.move(box["x"] + at + 2, box["y"] + 26)
    page.get_by_text(name, exact=True).nth(1).wait_for(timeout=5000)


def test_drag_moves_the_map(wide: Watched) -> None:
    page = wide.page
    page.click("#in")
    _, left, right = wide.view
    page.locator("#panels").scroll_into_view_if_needed()
    box = page.locator("#panels").bounding_box()
    middle = box["x"] + box["width"] / 2, box["y"] + 150
    page.mouse.move(*middle)
    page.mouse.down()
    page.mouse.move(middle[0] - 80, middle[1], steps=4)
    page.mouse.up()
    _, after, end = wide.view
    assert after > left
    assert end - after == pytest.approx(right - left, abs=2)


def test_table_by_keyboard(wide: Watched) -> None:
    page = wide.page
    page.focus("#table")
    page.keyboard.press("ArrowDown")
    first = wide.view
    page.keyboard.press("End")
    last = wide.view
    assert last != first
    assert page.locator("#table .row.chosen").is_visible()


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_names_are_text(wide: Watched, name: str) -> None:
    page = wide.page
    page.fill("#record", name)
    assert wide.view
    assert page.inner_text("#where-now strong") == name
    # The page's own text has it, too, wherever it stands.
    assert page.evaluate("document.querySelectorAll('img[onerror]').length") == 0
    assert page.evaluate("[...document.scripts].every((s) => !s.textContent.startsWith('alert'))")


def test_printed_page_is_readable(browser: Any, page_file: Path, tmp_path: Path) -> None:
    """On paper: dark on white, everything folded out, no control."""
    watched = Watched(browser, page_file)
    watched.page.emulate_media(media="print")
    assert not watched.page.locator("nav").is_visible()
    assert not watched.page.locator("#in").is_visible()
    watched.page.pdf(path=tmp_path / "page.pdf")
    assert (tmp_path / "page.pdf").stat().st_size > 20_000
    watched.close()
