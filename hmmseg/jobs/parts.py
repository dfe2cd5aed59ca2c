"""Folders of jobs that have shared one piece of work, each named by its number from 1 up."""

from collections.abc import Mapping
from contextlib import suppress
from pathlib import Path
from typing import Any

from hmmseg.errors import OutputError
from hmmseg.provenance import difference, is_intact, read_provenance

__all__ = ["count_told", "whole_parts"]


def whole_parts(
    parts: str | Path, count: int, expected: Mapping[str, Any], key: str, again: str
) -> list[Path]:
    """Return the folder of each part, all of them whole and made as is asked for now.

    Parameters
    ----------
    parts
        The folder that holds them.
    count
        How many there are to be.
    expected
        What the provenance of each says, as of :func:`~hmmseg.provenance.origin`.
    key
        The parameter by which they differ: the part's number.
    again
        How to make one that is missing, with ``{}`` for its number.

    Raises
    ------
    OutputError
        One is missing or damaged, or was made with something else.
    """
    folders = [Path(parts) / str(number) for number in range(1, count + 1)]
    for number, folder in enumerate(folders, start=1):
        advice = again.format(number)
        if not folder.is_dir():
            raise OutputError(f"{folder}: is missing; {advice}")
        found = _whole(folder)
        if found is None:
            raise OutputError(f"{folder}: damaged; remove it and {advice}")
        wanted = {**expected, "parameters": {**expected["parameters"], key: number}}
        if other := difference(found, wanted):
            raise OutputError(f"{folder}: made with another {other}; remove it and {advice}")
    return folders


def count_told(parts: str | Path, key: str) -> int:
    """Return how many parts there are to be, as those say that are there; 1 if none does."""
    told = [1]
    for folder in Path(parts).glob("[1-9]*"):
        with suppress(OutputError, NotADirectoryError):
            told.append(read_provenance(folder)["parameters"].get(key, 1))
    return max(number for number in told if isinstance(number, int))


def _whole(folder: Path) -> dict[str, Any] | None:
    """Return the provenance of a result; None if that or the result is damaged."""
    try:
        found = read_provenance(folder)
    except OutputError:
        return None
    return found if is_intact(folder, found) else None
