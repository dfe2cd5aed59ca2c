"""The lengths of the records, as the two-column table that genome tools call chrom.sizes."""

from collections.abc import Mapping
from pathlib import Path

from hmmseg.errors import OutputError

__all__ = ["read_chrom_sizes", "write_chrom_sizes"]


def write_chrom_sizes(path: str | Path, record_lengths: Mapping[str, int]) -> None:
    """Write name and length of each record, with a tab between, in the order given."""
    with open(path, "w", encoding="utf-8", newline="\n") as file:
        file.writelines(f"{name}\t{length}\n" for name, length in record_lengths.items())


def read_chrom_sizes(path: str | Path) -> dict[str, int]:
    """Read the length in bases of each record, in the order of the file.

    Raises
    ------
    OutputError
        If a line is not a name and a positive whole number, or a name comes twice.
    """
    lengths: dict[str, int] = {}
    with open(path, encoding="utf-8") as file:
        for number, line in enumerate(file, start=1):
            name, _, length = line.rstrip("\n").partition("\t")
            if not name or not (length.isascii() and length.isdigit()) or int(length) == 0:
                raise OutputError(f"{path}:{number}: expected a name, a tab and a length")
            if name in lengths:
                raise OutputError(f"{path}:{number}: record {name} is listed a second time")
            lengths[name] = int(length)
    return lengths
