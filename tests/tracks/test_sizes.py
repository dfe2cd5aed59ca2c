"""The table of record lengths."""

from pathlib import Path

import pytest

from hmmseg.errors import OutputError
from hmmseg.tracks.sizes import read_chrom_sizes, write_chrom_sizes
from tests.tracks.regions import LENGTHS


def test_order_and_names_are_kept(tmp_path: Path) -> None:
    write_chrom_sizes(tmp_path / "chrom.sizes", LENGTHS)
    text = (tmp_path / "chrom.sizes").read_bytes().decode("utf-8")
    assert text == "scaffold_2\t300\nNC_0001.1\t120\ngi|7|x;y=1,%~#é\t90\nplasmid\t50\n"
    assert list(read_chrom_sizes(tmp_path / "chrom.sizes").items()) == list(LENGTHS.items())


@pytest.mark.parametrize(
    ("line", "message"),
    [
        ("a", ":2: expected a name, a tab and a length"),
        ("a\t", ":2: expected a name"),
        ("\t5", ":2: expected a name"),
        ("a\t0", ":2: expected a name"),
        ("a\t-5", ":2: expected a name"),
        ("a\t5\t6", ":2: expected a name"),
        ("", ":2: expected a name"),
        ("x\t5", ":2: record x is listed a second time"),
    ],
)
def test_names_file_and_line(tmp_path: Path, line: str, message: str) -> None:
    (tmp_path / "chrom.sizes").write_text(f"x\t5\n{line}\n")
    with pytest.raises(OutputError, match=message):
        read_chrom_sizes(tmp_path / "chrom.sizes")
