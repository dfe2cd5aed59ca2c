"""The records of a result as a table, ``records.tsv``, by which two results can be compared."""

import csv
from collections.abc import Iterable
from pathlib import Path

from hmmseg.errors import OutputError
from hmmseg.sequence.identity import Checksums, KnownRecord

__all__ = ["read_record_table", "write_record_table"]

_COLUMNS = ("record", "length", "topology", "sequence_sha256", "reverse_sha256")
_TOPOLOGY = {False: "linear", True: "circular"}


def write_record_table(path: str | Path, rows: Iterable[KnownRecord]) -> None:
    """Write a header and a line for each record, with tabs between."""
    with open(path, "w", encoding="utf-8", newline="\n") as file:
        file.write("\t".join(_COLUMNS) + "\n")
        for row in rows:
            cells = (row.name, str(row.length), _TOPOLOGY[row.circular], *row.sequence)
            file.write("\t".join(cells) + "\n")


def read_record_table(path: str | Path) -> list[KnownRecord]:
    """Read ``records.tsv``.

    Raises
    ------
    OutputError
        It is not there, or is no such table.
    """
    try:
        with open(path, encoding="utf-8", newline="") as file:
            lines = list(csv.DictReader(file, delimiter="\t", quoting=csv.QUOTE_NONE))
        return [
            KnownRecord(
                line["record"],
                int(line["length"]),
                line["topology"] == _TOPOLOGY[True],
                Checksums(line["sequence_sha256"], line["reverse_sha256"]),
            )
            for line in lines
        ]
    except (OSError, KeyError, ValueError, TypeError):
        raise OutputError(
            f"{path}: cannot be read as a table of records; give a folder written by decode"
        ) from None
