"""Known features of an assembly, as intervals with a kind: from BED or GFF3."""

import re
from collections.abc import Iterator
from pathlib import Path
from urllib.parse import unquote

from hmmseg.errors import LabelError
from hmmseg.sequence.intervals import BedLine, read_bed
from hmmseg.sequence.source import open_text

__all__ = ["read_features"]

_GFF3 = re.compile(r"\.gff3?(\.gz)?$", re.IGNORECASE)
_COLUMNS = 9
_NAMELESS = "feature"


def read_features(path: str | Path) -> Iterator[BedLine]:
    """Read features; the name of each is its kind.

    Parameters
    ----------
    path
        A GFF3 file, by its ending .gff or .gff3, also .gz: the kind is the type in column 3. Any
        other file is BED: the kind is the name in column 4.

    Yields
    ------
    BedLine
        0-based and half-open.

    Raises
    ------
    LabelError
        A line is malformed; the message names file and line.
    """
    if _GFF3.search(str(path)):
        yield from _read_gff3(path)
        return
    for line in read_bed(path):
        yield line if line.name else line._replace(name=_NAMELESS)


def _read_gff3(path: str | Path) -> Iterator[BedLine]:
    with open_text(path, LabelError) as text:
        for number, line in enumerate(text.lines(), 1):
            if line.startswith("##FASTA"):
                return
            if not line.strip() or line.startswith("#"):
                continue
            where = f"{text.name}:{number}"
            cells = line.rstrip("\r\n").split("\t")
            if len(cells) != _COLUMNS:
                raise LabelError(f"{where}: {len(cells)} columns, but GFF3 has {_COLUMNS}")
            if not (cells[3].isdecimal() and cells[4].isdecimal()):
                raise LabelError(f"{where}: start and end must be whole numbers")
            start, end = int(cells[3]) - 1, int(cells[4])
            if not 0 <= start < end:
                raise LabelError(f"{where}: start {cells[3]} and end {cells[4]} are no interval")
            yield BedLine(unquote(cells[0]), start, end, unquote(cells[2]), where)
