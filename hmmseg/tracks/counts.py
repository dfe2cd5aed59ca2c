"""Counts of bases and dinucleotides as ``composition.tsv``.

Tab-separated, with a header: ``region_id`` and a column for each word. The first line, named
``genome``, counts all records; then one line for each region, in the order of ``regions.tsv``.
"""

from collections.abc import Iterable, Sequence
from itertools import chain
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import OutputError

__all__ = ["read_counts", "read_names", "write_counts"]

_GENOME = "genome"


def write_counts(
    path: str | Path,
    words: Sequence[str],
    genome: NDArray[np.int64],
    regions: NDArray[np.int64],
    names: Iterable[str],
) -> None:
    """Write counts.

    Parameters
    ----------
    path
        The file to write.
    words
        Names of the columns.
    genome
        int64[word].
    regions
        int64[region, word].
    names
        Of the regions.
    """
    with open(path, "w", encoding="utf-8", newline="\n") as file:
        file.write("\t".join(("region_id", *words)) + "\n")
        for name, row in zip((_GENOME, *names), chain([genome], regions), strict=True):
            file.write("\t".join((name, *map(str, row.tolist()))) + "\n")


def read_names(path: str | Path) -> list[str]:
    """Return the names of the regions."""
    lines = Path(path).read_text(encoding="utf-8").splitlines()
    return [line.split("\t", 1)[0] for line in lines[2:]]


def read_counts(
    path: str | Path, words: Sequence[str]
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Read counts: those of the genome, int64[word], and of the regions, int64[region, word].

    Raises
    ------
    OutputError
        The file is none of `write_counts`.
    """
    try:
        lines = Path(path).read_text(encoding="utf-8").splitlines()
        rows = [line.split("\t") for line in lines]
        counts = np.array([row[1:] for row in rows[1:]], dtype=np.int64)
        sound = rows[0] == ["region_id", *words] and rows[1][0] == _GENOME
        sound = sound and counts.shape == (len(rows) - 1, len(words))
    except (OSError, ValueError, IndexError):
        sound = False
    if not sound:
        raise OutputError(f"{path}: not the counts that decode writes; decode again")
    return counts[0], counts[1:]
