"""Regions as BED, and BED files of intervals in.

References
----------
Niu J., Denisko D., Hoffman M. M. (2022). The Browser Extensible Data (BED) format,
version 1.0. GA4GH, samtools.github.io/hts-specs/BEDv1.pdf.
"""

import gzip
import math
import re
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import IO, NamedTuple

import pandas as pd

from hmmseg.errors import LabelError, OutputError
from hmmseg.tracks.table import check_regions

__all__ = [
    "BedLine",
    "bed_lines",
    "invalid_bed_names",
    "read_bed",
    "score_of",
    "write_regions_bed",
]

_CHROM = re.compile(r"[A-Za-z0-9_]{1,255}")
_NAME = re.compile(r"[\x20-\x7e]{1,255}")
_GZIP_MAGIC = b"\x1f\x8b"


class BedLine(NamedTuple):
    """One interval of a BED file, 0-based and half-open, and the number of its line."""

    record: str
    start: int
    end: int
    name: str = ""
    score: str = ""
    strand: str = ""
    line: int = 0


def invalid_bed_names(record_lengths: Mapping[str, int]) -> list[str]:
    """Return the record names that BED v1.0, section 1.5, does not allow, in their order.

    It allows letters, digits and the underscore, so every accession with a version breaks it.
    Programs read such files all the same; it is worth a note to the user, once.
    """
    return [name for name in record_lengths if not _CHROM.fullmatch(name)]


def score_of(mean_posterior: float) -> int:
    """Return the BED score, 0 to 1000: 1000 x the mean posterior, a half rounded up."""
    return math.floor(1000 * mean_posterior + 0.5)


def write_regions_bed(
    path: str | Path, table: pd.DataFrame, record_lengths: Mapping[str, int]
) -> None:
    """Write regions as BED6: record, start, end, name, score, strand (always ``.``).

    Parameters
    ----------
    path : path
        The file to write.
    table : DataFrame
        The regions, as `hmmseg.tracks.table` describes them.
    record_lengths : mapping
        Length of each record in bases. Lines follow this order and then the start. A region
        across the origin makes two lines of one name.

    Raises
    ------
    OutputError
        If a region does not fit its record, or its name is none for BED.
    """
    check_regions(table, record_lengths)
    for name in table["region_id"]:
        if not _NAME.fullmatch(name):
            raise OutputError(
                f"cannot write {path}: BED allows no region name {name!r}; rename the state with "
                "printable ASCII characters"
            )
    with open(path, "w", encoding="utf-8", newline="\n") as file:
        for row in bed_lines(table, record_lengths):
            file.write("\t".join(map(str, row[:6])) + "\n")


def bed_lines(table: pd.DataFrame, record_lengths: Mapping[str, int]) -> list[BedLine]:
    """Return the lines that a valid table of regions makes, sorted by record, then start."""
    rank = {name: i for i, name in enumerate(record_lengths)}
    pieces = _pieces(table, record_lengths)
    rows = sorted(pieces, key=lambda row: (rank[row.record], row.start, row.end, row.name))
    return [row._replace(line=number) for number, row in enumerate(rows, start=1)]


def read_bed(path: str | Path, record_lengths: Mapping[str, int] | None = None) -> pd.DataFrame:
    """Read the intervals of a BED file of three columns or more, plain or gzip.

    Parameters
    ----------
    path : path
        The file. Blank lines and lines that begin with ``#`` are passed over.
    record_lengths : mapping, optional
        Length of each record in bases; if given, intervals must lie within these records.

    Returns
    -------
    DataFrame
        One row an interval, in the order of the file: record, start, end, name, score, strand
        (text, empty if the file has no such column) and line, counted from 1.

    Raises
    ------
    LabelError
        If a line is not BED or its interval lies outside the records; file and line are named.
    """
    try:
        with _opened(path) as file:
            rows = [_checked(row, path, record_lengths) for row in _lines(file, path)]
    except (EOFError, gzip.BadGzipFile) as error:
        raise LabelError(f"{path}: broken gzip file; copy it again") from error
    except UnicodeDecodeError as error:
        raise LabelError(f"{path}: not a text file; expected BED") from error
    frame = pd.DataFrame(rows, columns=list(BedLine._fields))
    return frame.astype({"start": "int64", "end": "int64", "line": "int64"})


def _pieces(table: pd.DataFrame, record_lengths: Mapping[str, int]) -> Iterator[BedLine]:
    columns = ("record", "start", "end", "region_id", "mean_posterior")
    for record, start, end, name, mean in zip(*(table[c].tolist() for c in columns), strict=True):
        length = record_lengths[record]
        score = str(score_of(mean))
        yield BedLine(record, start, min(end, length), name, score, ".")
        if end > length:
            yield BedLine(record, 0, end - length, name, score, ".")


def _opened(path: str | Path) -> IO[str]:
    with open(path, "rb") as file:
        packed = file.read(2) == _GZIP_MAGIC
    # utf-8-sig: spreadsheets put a byte order mark before the first record's name.
    return (gzip.open if packed else open)(path, "rt", encoding="utf-8-sig")


def _lines(file: IO[str], path: str | Path) -> Iterator[BedLine]:
    for number, line in enumerate(file, start=1):
        text = line.rstrip("\r\n")
        if not text.strip() or text.startswith("#"):
            continue
        fields = text.split("\t") if "\t" in text else text.split()
        if fields[0] in ("track", "browser"):
            raise LabelError(
                f"{path}:{number}: {fields[0]} lines do not belong to BED; remove the line"
            )
        if len(fields) < 3:
            raise LabelError(f"{path}:{number}: expected record, start and end, separated by tabs")
        for field in fields[1:3]:
            if not (field.isascii() and field.isdigit()):
                raise LabelError(f"{path}:{number}: {field!r} is not a position; use 0, 1, 2, ...")
        name, score, strand = [*fields[3:6], "", "", ""][:3]
        yield BedLine(fields[0], int(fields[1]), int(fields[2]), name, score, strand, number)


def _checked(row: BedLine, path: str | Path, record_lengths: Mapping[str, int] | None) -> BedLine:
    where = f"{path}:{row.line}: interval {row.start}-{row.end}"
    if row.start >= row.end:
        raise LabelError(f"{where} is empty; BED starts at 0 and the end must exceed the start")
    if record_lengths is None:
        return row
    if row.record not in record_lengths:
        raise LabelError(f"{where} is on {row.record}, which is no record of the sequence")
    if row.end > record_lengths[row.record]:
        raise LabelError(
            f"{where} ends beyond the {record_lengths[row.record]} bases of {row.record}"
        )
    return row
