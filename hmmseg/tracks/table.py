"""The table of regions: what it must hold, and its tab-separated file ``regions.tsv``.

A table of regions is a data frame sorted by record, in input order, and then by start, with
the columns of `COLUMNS`: intervals are 0-based and half-open, and a region across the origin
of a circular record ends at ``start + length``, beyond the record's length. Further columns
may follow.
"""

import math
import re
from collections.abc import Collection, Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from hmmseg.errors import OutputError

__all__ = [
    "COLUMNS",
    "DECIMALS",
    "check_regions",
    "fixed",
    "read_regions_table",
    "region_problems",
    "write_regions_table",
]

COLUMNS = (
    "region_id",
    "record",
    "start",
    "end",
    "length",
    "state",
    "mean_posterior",
    "log_odds_bits",
)
DECIMALS: Mapping[str, int] = {
    "mean_posterior": 4,
    "log_odds_bits": 3,
    "soft_masked_fraction": 4,
    "expected_wrong_bases": 2,
    "gc": 4,
    "cpg_ratio": 4,
    "gc_skew": 4,
    "at_skew": 4,
    "dinucleotide_entropy": 4,
    "dinucleotide_distance": 4,
}
"""Decimals with which columns are written, wherever they are."""


_TEXT = ("region_id", "record", "state")
_WHOLE = ("start", "end", "length")
_NUMBERS = ("mean_posterior", "log_odds_bits")
_NOT_KNOWN = "NA"
_ROWS_AT_ONCE = 1 << 14
_IS_POSITION = re.compile(r"-?[0-9]{1,18}").fullmatch
_IS_WHOLE_NUMBER = re.compile(r"0|-?[1-9][0-9]{0,17}").fullmatch


def write_regions_table(
    path: str | Path, table: pd.DataFrame, decimals: Mapping[str, int] | None = None
) -> None:
    """Write a table of regions as tab-separated text with a header.

    Parameters
    ----------
    path : path
        The file to write.
    table : DataFrame
        One row a region: the columns of `COLUMNS` come first, further ones after them.
    decimals : mapping, optional
        Decimals of columns of floating-point numbers, where they are not those of `DECIMALS`;
        a column in neither is written with six significant digits. A missing value is written
        ``NA``.

    Raises
    ------
    OutputError
        If a column is missing, or a text would break the table.
    """
    missing = [name for name in COLUMNS if name not in table.columns]
    if missing:
        raise OutputError(f"cannot write {path}: the table of regions lacks {', '.join(missing)}")
    names = [*COLUMNS, *(str(name) for name in table.columns if name not in COLUMNS)]
    places = {**DECIMALS, **(decimals or {})}
    with open(path, "w", encoding="utf-8", newline="\n") as file:
        file.write("\t".join(names) + "\n")
        for number, row in enumerate(_rows_as_text(table[names], places), start=2):
            line = "\t".join(row)
            if line.count("\t") >= len(row) or len(line.splitlines()) > 1:
                raise OutputError(f"cannot write {path}:{number}: a text holds a tab or line end")
            file.write(line + "\n")


def read_regions_table(path: str | Path) -> pd.DataFrame:
    """Read ``regions.tsv``.

    Returns
    -------
    DataFrame
        The columns of `COLUMNS` as text, int64 and float64; a further column as int64 if all
        its values are whole numbers, as float64 if all are numbers or ``NA``, as text otherwise.

    Raises
    ------
    OutputError
        If the header or a value is not as it should be; the line is named.
    """
    with open(path, encoding="utf-8", newline="\n") as file:
        header, *lines = [line.rstrip("\n").split("\t") for line in file] or [[]]
    if tuple(header[: len(COLUMNS)]) != COLUMNS:
        raise OutputError(f"{path}:1: the header does not begin with the columns of a region table")
    for number, fields in enumerate(lines, start=2):
        if len(fields) != len(header):
            raise OutputError(f"{path}:{number}: {len(fields)} columns, the header {len(header)}")
    columns = zip(header, zip(*lines, strict=True) if lines else [()] * len(header), strict=True)
    return pd.DataFrame({name: _typed(cells, name, path) for name, cells in columns})


def check_regions(
    table: pd.DataFrame,
    record_lengths: Mapping[str, int],
    circular: Collection[str] | None = None,
) -> None:
    """Raise OutputError for the first thing that `region_problems` finds."""
    for problem in region_problems(table, record_lengths, circular):
        raise OutputError(f"regions cannot be written: {problem}")


def region_problems(
    table: pd.DataFrame,
    record_lengths: Mapping[str, int],
    circular: Collection[str] | None = None,
) -> Iterator[str]:
    """Find what is wrong with a table of regions.

    Parameters
    ----------
    table : DataFrame
        The regions.
    record_lengths : mapping
        Length of each record in bases, in the order in which the table is sorted.
    circular : collection of str, optional
        The circular records; if not given, a region may cross the end of any record.

    Yields
    ------
    str
        For each rule that is broken, the first region that breaks it.
    """
    ids, records = table["region_id"].astype(str), table["record"].astype(str)
    start, end, length = (table[name].to_numpy(dtype=np.int64) for name in _WHOLE)
    posterior = table["mean_posterior"].to_numpy(dtype=np.float64)
    rank = records.map({name: i for i, name in enumerate(record_lengths)})
    known = rank.notna().to_numpy()
    size = np.array([record_lengths.get(name, 0) for name in records], dtype=np.int64)
    crosses = known & (end > size)
    linear = np.zeros(len(table), bool) if circular is None else ~records.isin(circular).to_numpy()
    order = rank.fillna(-1).to_numpy(dtype=np.int64)
    rules = {
        "its record is not known": ~known,
        "its end is not start + length": end - start != length,
        "its length is not between 1 and that of the record": (
            known & ((length < 1) | (length > size))
        ),
        "its start is outside the record": (start < 0) | (known & (start >= size)),
        "it crosses the end of a record that is not circular": crosses & linear,
        "its mean posterior is not between 0 and 1": ~((posterior >= 0) & (posterior <= 1)),
        "its log-odds are not a number": np.isnan(table["log_odds_bits"].to_numpy(np.float64)),
        "its name is not unique": ids.duplicated().to_numpy(),
        "it is out of order by record and start": _steps_back(order, start),
    }
    for rule, broken in rules.items():
        if broken.any():
            at = int(np.argmax(broken))
            yield f"region {ids.iloc[at]} ({records.iloc[at]}:{start[at]}-{end[at]}): {rule}"


def fixed(value: float, decimals: int) -> str:
    """Write a number with so many decimals; what rounds to zero has no sign."""
    text = f"{value:.{decimals}f}"
    return text[1:] if text[0] == "-" and text.strip("-0.") == "" else text


def _steps_back(
    order: npt.NDArray[np.integer[Any]], start: npt.NDArray[np.integer[Any]]
) -> npt.NDArray[np.bool_]:
    before = (order[1:] < order[:-1]) | ((order[1:] == order[:-1]) & (start[1:] < start[:-1]))
    return np.concatenate([np.zeros(min(1, len(order)), dtype=bool), before])


def _rows_as_text(table: pd.DataFrame, places: Mapping[str, int]) -> Iterator[tuple[str, ...]]:
    """Yield the cells of every row; only some rows are held as text at a time."""
    for first in range(0, len(table), _ROWS_AT_ONCE):
        rows = table.iloc[first : first + _ROWS_AT_ONCE]
        yield from zip(*(_as_text(rows[name], places.get(str(name))) for name in rows), strict=True)


def _as_text(column: "pd.Series[Any]", decimals: int | None) -> list[str]:
    values = column.tolist()
    if decimals is None and not pd.api.types.is_float_dtype(column.dtype):
        return [_NOT_KNOWN if pd.isna(value) else str(value) for value in values]
    numbers = [float(value) for value in values]
    return [
        _NOT_KNOWN if math.isnan(x) else f"{x:.6g}" if decimals is None else fixed(x, decimals)
        for x in numbers
    ]


def _typed(cells: Sequence[str], name: str, path: str | Path) -> "pd.Series[Any]":
    """Return a column as what its cells say that it is."""
    if name in _TEXT:
        return pd.Series(cells, dtype=object)
    # Lists and arrays of objects: pandas' own columns of text take several times as long.
    given = np.array(["nan" if cell == _NOT_KNOWN else cell for cell in cells], dtype=object)
    numbers = pd.to_numeric(given, errors="coerce")
    is_whole = _IS_POSITION if name in _WHOLE else _IS_WHOLE_NUMBER
    if name not in _NUMBERS and all(map(is_whole, cells)):
        return pd.Series(numbers.astype(np.int64))
    numbers = numbers.astype(np.float64)
    if name in _WHOLE:
        bad = [at for at, cell in enumerate(cells) if not is_whole(cell)]
    else:
        bad = [at for at in np.flatnonzero(np.isnan(numbers)).tolist() if given[at] != "nan"]
    if not bad:
        return pd.Series(numbers)
    if name not in COLUMNS:
        return pd.Series(cells, dtype=object)
    raise OutputError(f"{path}:{bad[0] + 2}: {name} is {cells[bad[0]]!r}, not a number")
