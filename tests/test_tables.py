"""Tables on standard output: tabs for programs, columns for people."""

import io
import sys

import pytest

from hmmseg.cli.tables import print_table

HEAD = ("state", "regions", "in_words")
ROWS = [["island", "67", "very GC-rich, mean length 995 bp"], ["at-rich-block", "1234", "AT-rich"]]


def test_tabs_where_nobody_looks(capsys: pytest.CaptureFixture[str]) -> None:
    print_table(HEAD, ROWS)
    found = [line.split("\t") for line in capsys.readouterr().out.splitlines()]
    assert found == [list(HEAD), *ROWS]


class _Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


@pytest.mark.parametrize("width", [100, 40])
def test_columns_on_a_terminal(monkeypatch: pytest.MonkeyPatch, width: int) -> None:
    terminal = _Terminal()
    monkeypatch.setattr(sys, "stdout", terminal)
    monkeypatch.setenv("COLUMNS", str(width))
    print_table(HEAD, ROWS)
    head, one, two = terminal.getvalue().splitlines()
    assert head.index("regions") == one.index("67") + 2 - len("regions")
    assert two.startswith("at-rich-block     1234  AT-rich")
    assert max(map(len, (head, one, two))) <= width
    assert one.endswith("995 bp" if width == 100 else "…")
